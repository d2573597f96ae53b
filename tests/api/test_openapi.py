"""The OpenAPI document says exactly what the routes answer."""

import html
import json
import re
from collections import defaultdict
from collections.abc import Callable
from typing import Any

import pytest
from flask import Flask
from flask.testing import FlaskClient
from jsonschema import Draft202012Validator
from werkzeug.routing import Rule

from api.access import OPEN
from api.openapi import Blueprint
from api.services import KEY
from tests.job_documents import strip
from tests.walk import visit_all

# Described as possible everywhere; provoked in test_outages.py, and 429 in test_fairness.py.
OUTAGES = {"429", "500", "503"}
CONDITIONAL = {"206", "304", "416"}  # in test_results.py and tests/hostile/test_requests.py


@pytest.fixture
def document(client: FlaskClient) -> dict[str, Any]:
    found: dict[str, Any] = client.get("/openapi.json").get_json()
    return found


def validator(schema: dict[str, Any], document: dict[str, Any]) -> Draft202012Validator:
    """OpenAPI 3.1 schemas are JSON Schema 2020-12; references go to the document's components."""
    return Draft202012Validator({**schema, "components": document["components"]})


def resolve(part: dict[str, Any], document: dict[str, Any]) -> dict[str, Any]:
    if "$ref" not in part:
        return part
    found = document
    for step in part["$ref"].removeprefix("#/").split("/"):
        found = found[step]
    return found


def described_path(rule: Rule) -> str:
    """As OpenAPI writes it."""
    return re.sub(r"<(?:\w+:)?(\w+)>", r"{\1}", rule.rule)


def test_routes_answer_what_the_document_says(
    app: Flask,
    document: dict[str, Any],
    finish: Callable[[str], None],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Status, media type and body of every answer; and every status described does occur.

    First as the one person on the machine, then on a guarded server.
    """
    seen: dict[tuple[str, str], set[str]] = defaultdict(set)
    visits = visit_all(app, finish, monkeypatch)
    reader = app.extensions[KEY].tokens.add("reader", "read")[1]
    for visit in [*visits, *visit_all(app, finish, monkeypatch, (None, reader))]:
        path = described_path(visit.rule)
        operation = document["paths"].get(path, {}).get(visit.method.lower())
        if operation is None:
            assert path in ("/", "/jobs", "/docs", "/openapi.json")
            continue
        status = str(visit.answer.status_code)
        where = f"{visit.method} {path} {status}"
        assert status in operation["responses"], f"{where} is not described"
        described = resolve(operation["responses"][status], document)
        assert visit.answer.mimetype in described["content"], where
        schema = described["content"][visit.answer.mimetype].get("schema")
        if schema and visit.answer.is_json:
            errors = validator(schema, document).iter_errors(visit.answer.get_json())
            assert not [f"{where} {e.json_path}: {e.message}" for e in errors]
        assert set(described.get("headers", ())) <= {*visit.answer.headers.keys()}, where
        seen[visit.method.lower(), path].add(status)
    for path, item in document["paths"].items():
        for method in item.keys() - {"parameters"}:
            described = item[method]["responses"].keys() - OUTAGES - CONDITIONAL - {"default"}
            assert described <= seen[method, path], f"{method} {path} never answers so"


def test_every_api_route_is_described(app: Flask, document: dict[str, Any]) -> None:
    for rule in app.url_map.iter_rules():
        if isinstance(app.blueprints[rule.endpoint.split(".")[0]], Blueprint):
            assert described_path(rule) in document["paths"]


def test_the_document_says_where_a_token_may_be_needed(
    app: Flask, document: dict[str, Any]
) -> None:
    """The description of an operation and the guard at its door agree."""
    (scheme,) = document["components"]["securitySchemes"]
    assert document["components"]["securitySchemes"][scheme]["scheme"] == "bearer"  # RFC 6750
    for rule in app.url_map.iter_rules():
        item = document["paths"].get(described_path(rule), {})
        for method in item.keys() - {"parameters"}:
            needed = [{scheme: []}, {}] if rule.endpoint not in OPEN else []
            if method.upper() in (rule.methods or ()):
                assert item[method]["security"] == needed, rule


def test_all_schemas_are_json_schema(document: dict[str, Any]) -> None:
    for schema in document["components"]["schemas"].values():
        Draft202012Validator.check_schema(schema)


def test_only_x_keys_are_added_to_the_standard_document(document: dict[str, Any]) -> None:
    """OpenAPI 3.1 section 4.9: foreign fields must begin with x-."""
    standard = {"openapi", "info", "servers", "paths", "components", "security", "tags",
                "externalDocs", "jsonSchemaDialect", "webhooks"}  # fmt: skip
    assert document["openapi"].startswith("3.1.")
    assert {key for key in document if not key.startswith("x-")} <= standard


def test_the_document_schema_admits_a_job_and_names_what_is_wrong(document: dict[str, Any]) -> None:
    """The published schema and the reader agree on a good job and on a misspelt key."""
    check = validator({"$ref": "#/components/schemas/Job"}, document)
    assert not list(check.iter_errors(strip()))
    assert list(check.iter_errors({**strip(), "titel": "x"}))


def test_the_example_of_the_page_is_accepted_and_fits_its_schema(
    client: FlaskClient, document: dict[str, Any]
) -> None:
    """As printed on the page: copied from there it must work."""
    text = html.unescape(client.get("/docs").text)
    example = json.loads(text.split("<pre>")[1].split("</pre>")[0])
    assert client.post("/v1/jobs", json=example).status_code == 202
    check = validator({"$ref": "#/components/schemas/Job"}, document)
    assert not list(check.iter_errors(example))


def test_the_page_for_people_needs_nothing_from_elsewhere(client: FlaskClient) -> None:
    """It must work on a machine without the internet: no script, font or image by address."""
    answer = client.get("/docs")
    assert answer.mimetype == "text/html"
    assert "default-src 'none'" in answer.headers["Content-Security-Policy"]
    assert not re.search(
        r"<(script|link|img|iframe)\b|@import|url\(|(src|href)=.?https?:", answer.text
    )


def test_the_page_for_people_shows_every_operation_problem_and_caution(
    client: FlaskClient, document: dict[str, Any]
) -> None:
    text = client.get("/docs").text
    for path, item in document["paths"].items():
        for method in item.keys() - {"parameters"}:
            assert f'id="{method.upper()}{path}"' in text
    for caution in document["x-cautions"]:
        assert caution["message"] in text
    for address in set(re.findall(r'href="#([^"]+)"', text)):
        assert f'id="{address}"' in text, address

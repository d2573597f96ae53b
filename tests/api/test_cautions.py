"""Every answer of every route carries review cautions, whatever the request and its outcome."""

import re
from collections.abc import Callable
from typing import Any

import flask
import pytest
from flask import Flask
from flask.testing import FlaskClient
from werkzeug.test import TestResponse

from api.access import OPEN
from api.services import Services
from tests.walk import AUTOMATIC, visit_all
from workers.cautions import STANDING

STANDING_CODES = {caution.code for caution in STANDING}


def assert_cautions(answer: TestResponse) -> None:
    """JSON bodies have them inside, everything else links to a JSON body that has them."""
    if answer.is_json:
        body = answer.get_json()
        cautions = body["x-cautions" if "openapi" in body else "cautions"]
        assert {c["code"] for c in cautions} >= STANDING_CODES, answer.request.path
    else:
        assert re.search(r'<[^>]+>; *rel="describedby"', answer.headers["Link"])


def test_every_route_answers_with_cautions(
    app: Flask, finish: Callable[[str], None], monkeypatch: pytest.MonkeyPatch
) -> None:
    visits = visit_all(app, finish, monkeypatch)
    for visit in visits:
        assert_cautions(visit.answer)
    for rule in app.url_map.iter_rules():
        for method in (rule.methods or set()) - AUTOMATIC:
            statuses = {
                v.answer.status_code for v in visits if (v.rule, v.method) == (rule, method)
            }
            assert min(statuses) < 400, f"{method} {rule} never works"
            assert max(statuses) >= 400 or not rule.arguments, f"{method} {rule} never fails"


def test_every_refusal_of_a_guarded_server_carries_cautions_and_says_what_is_needed(
    app: Flask,
    finish: Callable[[str], None],
    monkeypatch: pytest.MonkeyPatch,
    tokens: dict[str, str],
) -> None:
    """Without a token, with a wrong one, with one of too low a role, and of another workspace."""
    bearers = (None, "wrong", tokens["read"], tokens["other"])
    visits = visit_all(app, finish, monkeypatch, bearers)
    for visit in visits:
        assert_cautions(visit.answer)
        refused = visit.answer.status_code in (401, 403)
        assert refused == ("WWW-Authenticate" in visit.answer.headers)
    for place in range(0, len(visits), len(bearers)):
        nobody, wrong, reader, other = visits[place : place + len(bearers)]
        is_open = nobody.rule.endpoint in OPEN
        changes = nobody.method not in ("GET", "HEAD", "OPTIONS")
        assert (nobody.answer.status_code == 401) == (not is_open)
        assert (wrong.answer.status_code == 401) == (not is_open)
        assert (reader.answer.status_code == 403) == changes
        if "job_id" in other.rule.arguments:
            assert other.answer.status_code == 404


def test_links_of_files_lead_to_cautions(
    client: FlaskClient, post: Callable[..., Any], finish: Callable[[str], None]
) -> None:
    job = post().get_json()
    finish(job["id"])
    answer = client.get(f"/v1/jobs/{job['id']}/fields/pull.vtu", buffered=True)
    target = re.match(r"<([^>]+)>", answer.headers["Link"])
    assert target is not None
    codes = [c["code"] for c in client.get(target[1]).get_json()["cautions"]]
    assert codes == ["a-rule", *[caution.code for caution in STANDING]]


def test_unknown_addresses_and_methods_are_problems_with_cautions(client: FlaskClient) -> None:
    for answer, status in ((client.get("/nowhere"), 404), (client.put("/v1/jobs"), 405)):
        assert answer.status_code == status
        assert answer.mimetype == "application/problem+json"
        assert_cautions(answer)


def test_an_unexpected_error_is_a_problem_without_its_inner_text(
    client: FlaskClient, services: Services, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A traceback or a message of a library may hold what is no client's business."""

    def broken(*_: Any, **__: Any) -> None:
        raise RuntimeError("secret")

    monkeypatch.setattr(services.store, "list", broken)
    answer = client.get("/v1/jobs")
    assert answer.status_code == 500
    assert_cautions(answer)
    assert "secret" not in answer.text
    assert re.fullmatch("[0-9a-f]{8}", answer.get_json()["reference"])


def test_a_route_that_returns_a_plain_dictionary_cannot_forget_them(app: Flask) -> None:
    """New routes get their cautions from the JSON provider, not from being careful."""
    app.add_url_rule("/new", view_func=lambda: {"answer": 1})
    assert_cautions(app.test_client().get("/new"))


def test_a_json_answer_that_cannot_carry_them_is_an_error(app: Flask) -> None:
    app.add_url_rule("/list", view_func=lambda: flask.jsonify([1, 2]))
    assert app.test_client().get("/list").status_code == 500

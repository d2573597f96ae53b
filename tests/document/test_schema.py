"""The schemas as OpenAPI 3.1: complete, described, and of one mind with what is enforced."""

from typing import Any

import pytest
from apispec import APISpec
from apispec.ext.marshmallow import MarshmallowPlugin
from jsonschema import Draft202012Validator
from marshmallow import ValidationError

from tests.good_documents import KINDS, good
from workers.document.job import JobSchema
from workers.document.loads import KINDS as KINDS_OF_LOAD
from workers.document.read import load, to_document
from workers.job import Job


@pytest.fixture(scope="module")
def openapi() -> dict[str, Any]:
    spec = APISpec("jobs", "1", "3.1.0", plugins=[MarshmallowPlugin()])
    spec.components.schema("Job", schema=JobSchema)
    return spec.to_dict()


@pytest.fixture(scope="module")
def validator(openapi: dict[str, Any]) -> Draft202012Validator:
    schema = {"$ref": "#/components/schemas/Job", "components": openapi["components"]}
    Draft202012Validator.check_schema(schema)
    return Draft202012Validator(schema)


def test_every_key_has_a_description_and_every_object_a_title(openapi: dict[str, Any]) -> None:
    for name, schema in openapi["components"]["schemas"].items():
        assert schema["title"], name
        assert schema["additionalProperties"] is False
        for key, described in schema["properties"].items():
            assert described.get("description"), f"{name}.{key}"


def test_exactly_one_key_is_said_in_the_schema(openapi: dict[str, Any]) -> None:
    schemas = openapi["components"]["schemas"]
    geometry = schemas["Job"]["properties"]["geometry"]
    assert [one["required"] for one in geometry["oneOf"]] == [["outline"], ["patches"], ["mesh"]]
    load = schemas["Job"]["properties"]["load_cases"]["additionalProperties"]["items"]
    assert [one["required"] for one in load["oneOf"]] == [[key] for key in KINDS_OF_LOAD]
    assert set(KINDS_OF_LOAD) < set(schemas["Load"]["properties"])


@pytest.mark.parametrize("kind", KINDS)
def test_good_documents_are_valid_by_the_published_schema(
    kind: str, validator: Draft202012Validator
) -> None:
    """Oracle: a general JSON Schema validator."""
    assert list(validator.iter_errors(good(kind))) == []
    assert list(validator.iter_errors(to_document(load(good(kind))))) == []


@pytest.mark.parametrize(
    ("kind", "path", "value"),
    [
        ("mesh", ["title"], ""),
        ("mesh", ["titel"], "a"),
        ("mesh", ["units", "length"], "km"),
        ("mesh", ["materials"], {}),
        ("mesh", ["materials", "steel", "poissons_ratio"], 0.5),
        ("mesh", ["materials", "steel", "youngs_modulus"], 0),
        ("mesh", ["plate", "thickness"], None),
        ("mesh", ["geometry", "outline"], []),
        ("mesh", ["geometry", "mesh", "nodes"], [["0", 1]]),
        ("mesh", ["supports", 0, "on"], {}),
        ("mesh", ["supports", 0, "on"], {"box": [[0, 0], [1, 1]], "nodes": [1]}),
        ("mesh", ["supports", 0, "on"], 5),
        ("mesh", ["load_cases", "pull", 0], {"on": "nose"}),
        ("mesh", ["load_cases", "pull", 0], {"on": "nose", "force": [1, 1], "pressure": 1}),
        ("outline", ["load_cases", "wind", 2, "traction"], {"from": [0, 1]}),
        ("outline", ["geometry", "outline", 0, "at"], [1, 2, 3]),
        ("outline", ["requests", "lines", "net section", "points"], 1),
        ("patches", ["geometry", "patches", 0, "divisions"], [0, 1]),
        ("patches", ["geometry", "patches", 0, "sides"], [None, None, None]),
    ],
)
def test_what_the_published_schema_refuses_is_refused(
    kind: str, path: list[Any], value: Any, validator: Draft202012Validator
) -> None:
    document = place = good(kind)
    for key in path[:-1]:
        place = place[key]
    place[path[-1]] = value
    assert list(validator.iter_errors(document))
    with pytest.raises(ValidationError):
        JobSchema().load(document)


def test_the_schema_alone_gives_a_job_or_every_fault() -> None:
    """So that a web framework that validates with the schema cannot miss what `load` finds."""
    assert isinstance(JobSchema().load(good("outline")), Job)
    document = good("outline")
    document["supports"][0]["on"] = "nowhere"
    with pytest.raises(ValidationError) as caught:
        JobSchema().load(document)
    assert set(caught.value.messages) == {"supports"}

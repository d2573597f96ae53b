"""A job written as a document and read again is the same job, and knows its places."""

import dataclasses
import json
from collections.abc import Iterator, Mapping
from functools import reduce
from typing import Any

import numpy as np
import orjson
import pytest
from hypothesis import given

from tests.good_documents import KINDS, good
from tests.job_strategies import JOBS, NAME
from workers.document.loads import KINDS as KINDS_OF_LOAD
from workers.document.read import load, read_document, to_document
from workers.job import Job, Named


def same(one: Any, other: Any) -> bool:
    """Equal in every field but the pointers; arrays in type and every entry."""
    if type(one) is not type(other):
        return False
    if dataclasses.is_dataclass(one) and not isinstance(one, type):
        names = [f.name for f in dataclasses.fields(one) if f.name != "pointer"]
        return all(same(getattr(one, name), getattr(other, name)) for name in names)
    if isinstance(one, np.ndarray):
        return one.dtype == other.dtype and np.array_equal(one, other)
    if isinstance(one, Mapping):
        return list(one) == list(other) and all(same(one[key], other[key]) for key in one)
    if isinstance(one, tuple):
        return len(one) == len(other) and all(map(same, one, other))
    return bool(one == other)


@given(JOBS)
def test_any_job_comes_back_from_its_document(job: Job) -> None:
    document = to_document(job)
    assert same(load(document), job)
    assert same(read_document(orjson.dumps(document)), job)
    assert same(read_document(json.dumps(document).encode()), job)


@pytest.mark.parametrize("kind", KINDS)
def test_written_documents_of_read_jobs_are_stable(kind: str) -> None:
    written = to_document(load(good(kind)))
    assert to_document(load(written)) == written


@given(NAME)
def test_any_name_comes_back_wherever_a_name_may_stand(name: str) -> None:
    document = good("patches")
    side, other, case = (f"{name[:79]}{number}" for number in "123")
    document["geometry"]["patches"][0]["sides"][3] = side
    document["geometry"]["points"] = {other: [16, 1]}
    document["supports"] = [{"on": side, "ux": 0}, {"name": name, "on": other, "uy": 0}]
    document["load_cases"] = {case: [{"on": other, "force": [1, 0]}]}
    document["combinations"] = {name: {case: 2}}
    job = load(document)
    assert [support.label for support in job.supports] == [side, name]
    assert job.supports[1].on == Named(other)
    assert (job.load_cases[0].name, dict(job.combinations[0].factors)) == (case, {case: 2})


@given(JOBS)
def test_each_part_points_at_what_it_came_from(job: Job) -> None:
    """The pointer of a part leads to the object or list that it was read from (RFC 6901)."""
    document = to_document(job)
    for part in parts_of(load(document)):
        assert MARKS[type(part).__name__] in marks_of(follow(document, part.pointer))


# A key that stands in the object of each part, or what else it is.
MARKS = {
    **dict.fromkeys(("Vertex",), "at"),
    **dict.fromkeys(("Hole", "Region", "Patch"), "name"),
    **dict.fromkeys(("Line", "Cut"), "from"),
    "HotSpot": "direction",
    "MeshBlock": "connectivity",
    "Support": "on",
    "LoadCase": "a list",
    "Combination": "a factor",
    **{kind.makes.__name__: key for key, kind in KINDS_OF_LOAD.items()},
}


def follow(document: Any, pointer: str) -> Any:
    tokens = (token.replace("~1", "/").replace("~0", "~") for token in pointer.split("/")[1:])
    return reduce(lambda at, t: at[int(t) if isinstance(at, list) else t], tokens, document)


def marks_of(found: Any) -> set[str]:
    if isinstance(found, list):
        return {"a list"}
    return {*found, *(["a factor"] if all(isinstance(v, float) for v in found.values()) else [])}


def parts_of(thing: Any) -> Iterator[Any]:
    """Everything in a job that has a pointer."""
    if dataclasses.is_dataclass(thing):
        if hasattr(thing, "pointer"):
            assert thing.pointer
            yield thing
        for field in dataclasses.fields(thing):
            yield from parts_of(getattr(thing, field.name))
    elif isinstance(thing, Mapping):
        for value in thing.values():
            yield from parts_of(value)
    elif isinstance(thing, tuple):
        for value in thing:
            yield from parts_of(value)

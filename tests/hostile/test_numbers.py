"""Numbers at the ends of what a document may say, in every place that takes one."""

import copy
import json
from collections.abc import Iterator
from pathlib import Path
from random import Random
from typing import Any

import orjson
import pytest

from tests.hostile.amount import LONG
from tests.hostile.test_odd_jobs import solve
from tests.job_documents import strip
from workers.analysis.finite import require_numbers
from workers.document.fields import LARGEST, SMALLEST
from workers.document.read import read_document
from workers.errors import AnalysisError, DocumentError, FaultyError

Place = tuple[str | int, ...]

VALUES = (LARGEST, -LARGEST, SMALLEST, 1e-320, 1e16, -0.0, 0.0)
SAMPLE = 40  # of all pairs of a place and a value; each takes 0.1 s
UNSAYABLE = ("NaN", "Infinity", "-Infinity", "1e309", "1" + "0" * 400, "-1e31", "1e308")


def everything() -> Any:
    """A strip with every kind of number in its document."""
    document = strip()
    document["materials"]["steel"]["thermal_expansion"] = 1e-5
    document["supports"][0]["ux"] = 0.5
    document["supports"].append({"on": "high", "spring": {"x": 1.0}})
    document["load_cases"] = {
        "a": [
            {"on": "right", "total_force": [32000.0, 1.0]},
            {"temperature_change": 1.0},
            {"acceleration": [1.0, 2.0]},
            {"spin": {"about": [1.0, 1.0], "speed": 1.0}},
        ],
        "b": [
            {"on": "right", "pressure": {"from": 1.0, "to": 2.0}},
            {"on": "right", "total_moment": 1.0},
            {"body_force": [1.0, 1.0]},
        ],
    }
    document["combinations"] = {"c": {"a": 1.5, "b": 2.0}}
    document["limits"] = {"displacement": 1.0, "factor_on_yield": 1.5}
    document["requests"] = {
        "probes": {"p": [50.0, 20.0]},
        "cuts": {"k": {"from": [50.0, -5.0], "to": [50.0, 50.0]}},
        "lines": {"l": {"from": [1.0, 20.0], "to": [90.0, 20.0]}},
        "hot_spots": {"h": {"at": [10.0, 20.0], "direction": [1.0, 0.0], "thickness": 5.0}},
    }
    return document


def places(value: Any, place: Place = ()) -> Iterator[Place]:
    """Where numbers stand, but those of elements."""
    if isinstance(value, dict):
        for key, inner in value.items():
            if key != "divisions":
                yield from places(inner, (*place, key))
    elif isinstance(value, list):
        for number, inner in enumerate(value):
            yield from places(inner, (*place, number))
    elif isinstance(value, int | float):
        yield place


def with_value(place: Place, value: Any) -> Any:
    document = copy.deepcopy(everything())
    inner = document
    for step in place[:-1]:
        inner = inner[step]
    inner[place[-1]] = value
    return document


PLACES = tuple(places(everything()))
PAIRS = [(place, value) for place in PLACES for value in VALUES]
CHOSEN = PAIRS if LONG else Random(1).sample(PAIRS, SAMPLE)


@pytest.mark.parametrize("text", UNSAYABLE)
def test_numbers_that_are_none_or_too_large_are_faults_wherever_they_stand(text: str) -> None:
    """RFC 8259 has no NaN; 400 digits are more than double precision holds."""
    for place in PLACES:
        data = json.dumps(with_value(place, "HERE")).replace('"HERE"', text).encode()
        with pytest.raises(DocumentError) as refused:
            read_document(data)
        pointers = [fault.pointer for fault in refused.value.faults]
        # What is nowhere in JSON is a fault of the text; everything else has its place.
        here = "/" + "/".join(map(str, place))
        assert any(p in ("", here) or here.startswith(f"{p}/") for p in pointers), (here, pointers)


@pytest.mark.slow
@pytest.mark.parametrize("eighth", range(8))
def test_extreme_numbers_give_numbers_or_faults(tmp_path: Path, eighth: int) -> None:
    """Never an error of the program, and never a result that is no number."""
    ends = dict.fromkeys(("finished", "refused"), 0)
    for number, (place, value) in enumerate(CHOSEN[eighth::8]):
        folder = tmp_path / str(number)
        folder.mkdir()
        try:
            results = solve(orjson.dumps(with_value(place, value)), folder)
        except FaultyError:
            ends["refused"] += 1
            continue
        ends["finished"] += 1
        require_numbers(results)
    print(f"extreme numbers: {ends}")


@pytest.mark.parametrize("value", [float("nan"), float("inf"), float("-inf")])
def test_results_that_are_no_numbers_are_an_error_that_names_their_place(value: float) -> None:
    with pytest.raises(AnalysisError, match="/cases/a/1 of the results"):
        require_numbers({"mesh": {"nodes": 3}, "cases": {"a": [1.0, value]}, "none": None})

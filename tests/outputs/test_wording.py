"""Supports, loads and factors in words: with signs, units and what they act on."""

from typing import Any

import pytest

from tests.good_documents import KINDS, good
from workers.document.read import load
from workers.job import Combination, Job, Units
from workers.outputs.assumptions import assumptions
from workers.outputs.wording import (
    factor_words,
    geometry_words,
    load_words,
    support_words,
    target_words,
)


def read(kind: str, **changes: Any) -> Job:
    return load({**good(kind), **changes})


def plain(text: str) -> str:
    """With the signs of a keyboard."""
    signs = {"\N{NO-BREAK SPACE}": " ", "\N{MINUS SIGN}": "-", "\N{MULTIPLICATION SIGN}": "x"}
    return text.translate(str.maketrans(signs))


LOADS = [  # of the good outline, as its document gives them
    ("lift", 0, "pin", "bearing force (0, 80 000) N"),
    ("lift", 1, "tip", "force (1, -2) N"),
    ("self weight", 0, "whole plate", "acceleration (0, -9810) mm/s²"),
    ("wind", 0, "right", "force (300, 0) N spread over the side"),
    ("wind", 1, "right", "moment 2 x 10⁶ N·mm spread over the side"),
    ("wind", 2, "crown", "traction from (1, 0) to (0, 1) MPa"),
    ("wind", 3, "crown", "pressure from 0 to 3 MPa"),
    ("wind", 4, "slot", "shear 2 MPa"),
    ("wind", 5, "slot low", "line load (5, 0) N/mm"),
    ("sun", 0, "insert", "temperature change +20 K"),
    ("turning", 0, "whole plate", "spin 3.14159 rad/s about (0, 0) mm"),
    ("turning", 1, "boss", "body force (0, 1 x 10⁻⁶) N/mm³"),
]


@pytest.mark.parametrize(("case", "number", "where", "words"), LOADS)
def test_every_kind_of_load_is_told(case: str, number: int, where: str, words: str) -> None:
    job = read("outline")
    (loads,) = (c.loads for c in job.load_cases if c.name == case)
    assert target_words(loads[number].on, job.units) == where
    assert plain(load_words(loads[number], job.units)) == words


SUPPORTS = [
    ("base", "ux = 0, uy = 0"),
    ("left", "normal = 0.1 mm; moved in case settled only"),
    ("left", "spring x 50 N/mm², spring tangential 3 N/mm²"),
    ("tip", "along (1, 1) = 0.5 mm, spring y 5000 N/mm"),
    ("boundary from (160, 0) to (160, 90) mm", "ux = 0"),
    ("everything in the box (0, 0) to (10, 10) mm", "uy = 0"),
    ("boundary on the circle about (80, 90), radius 25 mm", "ux = 0"),
]


@pytest.mark.parametrize(("number", "where", "words"), [(i, *s) for i, s in enumerate(SUPPORTS)])
def test_every_kind_of_support_is_told(number: int, where: str, words: str) -> None:
    job = read("outline")
    support = job.supports[number]
    assert plain(target_words(support.on, job.units)) == where
    assert plain(support_words(job, support)) == words


def test_springs_at_chosen_nodes_tell_both_units() -> None:
    job = read("mesh")
    assert support_words(job, job.supports[1]) == (
        "spring y 9 kN/m² along sides, kN/m at lone nodes"
    )
    assert target_words(job.supports[1].on, job.units) == "nodes 1, 2"


@pytest.mark.parametrize(
    ("factors", "words"),
    [({"a": 1.5, "b": 1.35}, "1.5 x a + 1.35 x b"),
     ({"a": -1, "b": 0, "c": -0.5}, "- 1 x a - 0.5 x c"),
     ({"a": 0}, "nothing: all factors are zero")],
)  # fmt: skip
def test_factors_are_told_with_their_signs(factors: dict[str, float], words: str) -> None:
    assert plain(factor_words(Combination("x", factors))) == words


@pytest.mark.parametrize(
    ("kind", "words"),
    [("outline", "outline of 4 corners with 2 holes"), ("patches", "2 mapped patches"),
     ("mesh", "mesh of the client's own")],
)  # fmt: skip
def test_geometry_is_told(kind: str, words: str) -> None:
    assert geometry_words(read(kind)) == words


def test_a_load_of_no_known_kind_is_an_error() -> None:
    with pytest.raises(TypeError, match="not a load"):
        load_words(object(), Units("mm", "N"))  # type: ignore[arg-type]


# --- assumptions ---------------------------------------------------------------------------------

ASSUMED = {
    "cosine pressure": "bearing",
    "material stress": "force",
    "even through the thickness, and": "temperature_change",
    "Body forces are static": "acceleration",
}


@pytest.mark.parametrize(("words", "kind"), ASSUMED.items())
def test_what_a_load_takes_for_granted_is_said_where_there_is_one(words: str, kind: str) -> None:
    document = good("outline")
    assert any(words in text for text in assumptions(load(document)))
    values = {"acceleration": [0, 1], "bearing": [0, 1]}
    other = next(name for name in values if name != kind)
    on = {} if other == "acceleration" else {"on": "pin"}
    document["load_cases"] = {"settled": [], "only": [{**on, other: values[other]}]}
    document["combinations"] = {}
    assert not any(words in text for text in assumptions(load(document)))


@pytest.mark.parametrize("kind", KINDS)
def test_plane_stress_is_always_assumed(kind: str) -> None:
    assert "plane stress" in assumptions(read(kind))[0]


def test_moves_that_combinations_multiply_are_said() -> None:
    """In the good outline a support moves in every case, and there is a combination."""
    said = "sum of its factors"
    assert any(said in text for text in assumptions(read("outline")))
    assert not any(said in text for text in assumptions(read("outline", combinations={})))

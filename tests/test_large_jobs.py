"""A job whose factor has no room is solved by iteration, and its results say how well."""

from pathlib import Path
from typing import Any

import orjson
import pytest

from tests.panels import cells_for, panel
from workers import pipeline
from workers.analysis.effort import ENERGY_ERROR, TOLERANCE

SOLVED_BY = "solved-by-iteration"


def solved(folder: Path, memory: float | None) -> Any:
    folder.mkdir()
    document = orjson.dumps(panel(cells_for(2000), cases=3))
    return pipeline.run(document, folder, pictures=0, memory=memory)


@pytest.fixture(scope="module")
def direct(tmp_path_factory: pytest.TempPathFactory) -> Any:
    return solved(tmp_path_factory.mktemp("large") / "direct", 1e9)


@pytest.fixture(scope="module")
def iterated(tmp_path_factory: pytest.TempPathFactory) -> Any:
    return solved(tmp_path_factory.mktemp("large") / "iterated", 1e5)


def test_tolerance_iterations_and_residual_are_in_the_results(iterated: Any) -> None:
    solver = iterated["solver"]
    assert solver["iteration"]["iterations"] > 0
    assert 0 < solver["iteration"]["energy_error"] <= ENERGY_ERROR
    assert 0 < solver["residual"] <= solver["iteration"]["tolerance"] == TOLERANCE
    raised = [c for c in iterated["cautions"] if c["code"] == SOLVED_BY]
    assert len(raised) == 1


def test_a_factor_that_fits_is_made_and_raises_no_caution(direct: Any) -> None:
    assert direct["solver"]["iteration"] is None
    assert SOLVED_BY not in [c["code"] for c in direct["cautions"]]


def test_numbers_are_those_of_the_factor_to_the_tolerance(direct: Any, iterated: Any) -> None:
    """By the error in the energy norm that is allowed; a peak may be off by ten times as much."""
    for name, state in direct["cases"].items():
        other = iterated["cases"][name]
        assert other["displacement"]["value"] == pytest.approx(
            state["displacement"]["value"], rel=10 * ENERGY_ERROR
        )
        force = other["reactions"]["sill"]["force"]
        assert force == pytest.approx(state["reactions"]["sill"]["force"], rel=10 * ENERGY_ERROR)
        assert other["equilibrium"]["residual"] < 10 * ENERGY_ERROR

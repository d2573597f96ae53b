"""Peaks outside singular places: in the results, state by state."""

from typing import Any

import numpy as np
import pytest

from tests.plates import grid, plate_job
from workers.analysis.combine import load_states
from workers.analysis.envelope import WORST
from workers.analysis.peaks import NO_ZONES, find_peaks
from workers.analysis.recovery import Recovery
from workers.analysis.solution import solve
from workers.analysis.summary import summarise
from workers.analysis.zones import ActiveZones, Zones
from workers.job import Combination, Named, PointForce, Support, Traction

FIXED = Support("wall", Named("left"), ux=0.0, uy=0.0)
PULL = Traction(on=Named("right"), start=(100.0, 0.0), end=(100.0, 0.0))
PUSH = PointForce(on=Named("NE"), force=(0.0, -50.0))


def _solved(loads: Any, supports: Any = (FIXED,), **more: Any):
    job = plate_job(supports, loads, **more)
    solution = solve(job, grid("Q8", 12, 6, size=(6.0, 3.0)))
    return solution, Recovery.build(solution.model), load_states(job)


@pytest.fixture(scope="module")
def results() -> dict[str, Any]:
    return summarise(
        *_solved(
            {"pull": [PULL], "push": [PUSH], "both": [PULL, PUSH]},
            combinations=(Combination("pull twice", {"pull": 2.0}),),
        )
    )


def test_the_peak_lies_outside_and_both_values_are_told(results: dict[str, Any]) -> None:
    """A clamped strip in tension: the corners of the wall are singular (Williams 1952)."""
    for name in ("von_mises", "principal_max", "shear_max"):
        peak = results["cases"]["pull"][name]
        hidden = peak["singular"]
        assert hidden["kind"] == "fixed-end"
        assert hidden["value"] > peak["value"]
        assert hidden["at"] in ([0.0, 0.0], [0.0, 3.0])
        assert hidden["confirmed"] is None
        distance = np.hypot(*np.subtract(peak["at"], hidden["at"]))
        assert distance > hidden["radius"]


def test_an_envelope_and_a_factored_state_leave_out_the_same(results: dict[str, Any]) -> None:
    once = results["cases"]["pull"]["von_mises"]
    twice = results["combinations"]["pull twice"]["von_mises"]
    assert twice["value"] == pytest.approx(2 * once["value"], rel=1e-9)
    assert twice["singular"]["value"] == pytest.approx(2 * once["singular"]["value"], rel=1e-9)
    assert results["envelope"]["von_mises"]["singular"] is not None


def test_displacement_is_finite_everywhere(results: dict[str, Any]) -> None:
    for state in results["cases"].values():
        assert state["displacement"]["singular"] is None
        assert state["displacement"]["interval"] is None


def test_a_loaded_point_counts_in_its_own_cases_only() -> None:
    """In "pull" the corner that "push" loads is a plain corner."""
    solution, recovery, states = _solved({"pull": [PULL], "push": [PUSH]})
    zones = Zones.build(solution, recovery.field_mesh, states)
    kinds = [place.kind for place in zones.places]
    row = kinds.index("point-load")
    assert zones.active[row].tolist() == [False, True]
    assert zones.active[[k for k, kind in enumerate(kinds) if kind == "fixed-end"]].all()


def test_a_point_support_without_a_force_is_harmless() -> None:
    """A strip pulled on a roller; the pin holds it from sliding and feels nothing."""
    roller, pin = Support("wall", Named("left"), ux=0.0), Support("pin", Named("SW"), uy=0.0)
    solution, recovery, states = _solved({"pull": [PULL], "push": [PUSH]}, (roller, pin))
    zones = Zones.build(solution, recovery.field_mesh, states)
    (row,) = [k for k, place in enumerate(zones.places) if place.kind == "point-support"]
    assert zones.active[row].tolist() == [False, True]


def test_utilisation_is_that_of_the_reported_stress(results: dict[str, Any]) -> None:
    state = results["cases"]["pull"]
    assert state["utilisation"]["value"] == pytest.approx(state["von_mises"]["value"] / 355)
    assert state["utilisation"]["at"] == state["von_mises"]["at"]


# --- the search itself ---------------------------------------------------------------------------


def _peaks(zones: ActiveZones) -> Any:
    """Two states on the points of one Q4; stress falls from point 0 to 3 in both."""
    solution, recovery, _ = _solved([PULL])
    points = recovery.field_mesh.point_count
    column = np.linspace(9.0, 1.0, points)
    fall = np.column_stack((column, column))
    values = {name: fall.copy() for name in WORST}
    error = tuple(np.ones((block.element_count, 2)) for block in solution.model.mesh.blocks)
    found = find_peaks(recovery.field_mesh, values, error, zones)
    np.testing.assert_array_equal(values["von_mises"], fall)  # looking changes nothing
    return found, points


def test_excluded_points_are_passed_over_in_their_state_only() -> None:
    excluded = np.array([[True, False], [True, False]])
    found, points = _peaks(ActiveZones(np.array([0, 1]), excluded))
    assert found["von_mises"].point.tolist() == [2, 0]
    assert found["von_mises"].singular.tolist() == [0, -1]
    assert found["von_mises"].singular_value[0] == 9.0
    assert found["displacement"].point.tolist() == [0, 0]
    assert found["principal_min"].point.tolist() == [points - 1] * 2


def test_where_nothing_is_left_outside_everything_counts() -> None:
    _, points = _peaks(NO_ZONES)
    everything = ActiveZones(np.arange(points), np.ones((points, 2), bool))
    found, _ = _peaks(everything)
    assert found["von_mises"].point.tolist() == [0, 0]
    assert found["von_mises"].singular.tolist() == [-1, -1]

"""Estimated errors, element shapes, and low-order elements in bending."""

import numpy as np
import pytest

from tests.plates import grid
from tests.reviewed import raised, sound_job, sound_results, sound_state, stressed
from workers.analysis.mesh import Mesh
from workers.analysis.solution import solve
from workers.job import Job, LoadCase, Named, Segment, Support, TemperatureChange, TotalForce
from workers.review.bending_share import bending_shares
from workers.review.context import ReviewContext


def estimated(relative: float) -> dict:
    return sound_results({"pull": sound_state(error_estimate={"relative": relative})})


@pytest.mark.parametrize("relative", [0.101, 0.6])
def test_a_large_error_in_the_energy_norm_is_told(relative: float) -> None:
    (caution,) = raised(results=estimated(relative))["error-high"]
    assert caution.evidence["value"] == relative
    assert caution.evidence["limit"] == 0.1


@pytest.mark.parametrize("relative", [0.0, 0.099])
def test_a_small_error_in_the_energy_norm_is_silent(relative: float) -> None:
    assert raised(results=estimated(relative)) == {}


@pytest.mark.parametrize("error", [11.0, 80.0])
def test_a_large_error_of_the_peak_stress_is_told(error: float) -> None:
    (caution,) = raised(results=sound_results({"pull": stressed(100.0, error=error)}))["error-high"]
    assert caution.evidence["quantity"] == "von Mises stress"
    assert caution.evidence["value"] == error


@pytest.mark.parametrize("error", [0.0, 9.9])
def test_a_small_error_of_the_peak_stress_is_silent(error: float) -> None:
    assert raised(results=sound_results({"pull": stressed(100.0, error=error)})) == {}


def shaped(**worst: float) -> dict:
    results = sound_results()
    for key, value in worst.items():
        results["mesh"]["quality"][key] = {"value": value, "at": [1.0, 2.0]}
    return raised(results=results)


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("min_scaled_jacobian", 0.19),
        ("min_scaled_jacobian", 0.01),
        ("min_angle", 14.9),
        ("min_angle", 2.0),
        ("max_aspect", 10.1),
        ("max_aspect", 200.0),
    ],
)
def test_a_badly_shaped_element_is_told_with_its_place(key: str, value: float) -> None:
    (caution,) = shaped(**{key: value})["distorted-elements"]
    assert caution.evidence["quantity"] == key
    assert caution.evidence["at"] == [1, 2]


@pytest.mark.parametrize(
    "worst",
    [
        {"min_scaled_jacobian": 0.21},
        {"min_angle": 15.1},
        {"max_aspect": 9.9},
        {"min_scaled_jacobian": 0.3, "min_angle": 25.0, "max_aspect": 6.0},
    ],
)
def test_a_fairly_shaped_element_is_silent(worst: dict) -> None:
    assert shaped(**worst) == {}


# --- low-order elements in bending -------------------------------------------------------------


def cantilever(element: str, across: int) -> tuple[Job, Mesh]:
    """80 x 10 mm of square cells, loaded across at its end."""
    mesh = grid(element, 8 * across, across, size=(80.0, 10.0))
    force = TotalForce(on=Named("right"), force=(0.0, -100.0))
    return sound_job(load_cases=(LoadCase("pull", (force,)),)), mesh


def quarter_with_hole(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Unit square onto a quarter of a 100 mm square plate with a hole of 20 mm."""
    angle = y * np.pi / 2
    outer = 50 / np.maximum(np.cos(angle), np.sin(angle))
    r = 10 + (outer - 10) * (x + 1.5 * x**2) / 2.5
    return r * np.cos(angle), r * np.sin(angle)


def pulled_past_a_hole(element: str, cells: int) -> tuple[Job, Mesh]:
    mesh = grid(element, cells, cells, shape=quarter_with_hole)
    supports = (Support("y", Named("bottom"), uy=0.0), Support("x", Named("top"), ux=0.0))
    force = TotalForce(on=Segment((50.0, 0.0), (50.0, 50.0)), force=(1000.0, 0.0))
    return sound_job(load_cases=(LoadCase("pull", (force,)),), supports=supports), mesh


def codes_for(job: Job, mesh: Mesh) -> dict:
    return raised(job, mesh=mesh, solution=solve(job, mesh))


@pytest.mark.parametrize(("element", "across"), [("Q4", 1), ("Q4", 4), ("T3", 1), ("T3", 8)])
def test_low_order_elements_in_bending_are_told(element: str, across: int) -> None:
    (caution,) = codes_for(*cantilever(element, across))["low-order-bending"]
    assert caution.evidence["element"] == element
    assert caution.evidence["value"] > caution.evidence["limit"]


@pytest.mark.parametrize(
    ("job", "mesh"),
    [
        cantilever("Q4", 10),  # many across the depth
        cantilever("Q8", 1),  # quadratic elements bend
        cantilever("T6", 1),
        pulled_past_a_hole("Q4", 4),  # stress changes, but not by bending
        pulled_past_a_hole("T3", 8),
    ],
    ids=["fine Q4", "Q8", "T6", "Q4 in tension", "T3 in tension"],
)
def test_what_bends_well_or_hardly_bends_is_silent(job: Job, mesh: Mesh) -> None:
    assert "low-order-bending" not in codes_for(job, mesh)


@pytest.mark.parametrize("element", ["Q4", "T3"])
def test_the_share_of_bending_falls_with_the_square_of_the_number_across(element: str) -> None:
    """Stress linear over the depth, constant in each of n layers: 1/n^2 of its energy is lost."""
    shares = []
    for across in (4, 8):
        job, mesh = cantilever(element, across)
        context = ReviewContext(job, mesh, {}, solve(job, mesh))
        shares.append(bending_shares(context, "pull")[element])
    assert shares[0] / shares[1] == pytest.approx(4.0, rel=0.1)


@pytest.mark.parametrize("element", ["Q4", "T3"])
def test_uniform_heating_does_not_hide_bending(element: str) -> None:
    """A heating that strains more than the load: its strain is not the elements' to carry."""
    job, mesh = cantilever(element, 2)
    heat = TemperatureChange(change=500.0)
    heated = sound_job(load_cases=(LoadCase("pull", (*job.load_cases[0].loads, heat)),),
                       supports=(Support("left", Named("left"), ux=0.0),
                                 Support("corner", Named("SW"), uy=0.0)))  # fmt: skip
    assert "low-order-bending" in codes_for(heated, mesh)

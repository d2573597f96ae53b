"""Estimated errors, element shapes, and low-order elements in bending."""

import numpy as np
import pytest

from elements.registry import get
from tests.plates import grid
from tests.reviewed import raised, sound_job, sound_results, sound_state, stressed
from workers.analysis.mesh import Block, Mesh
from workers.analysis.quality import mesh_quality
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


def one_quadrilateral(*corners: tuple[float, float]) -> dict:
    """Cautions about the shape of one element, by the measure that is poor."""
    block = Block(get("Q4"), np.array([[0, 1, 2, 3]], np.int32), np.zeros(1, np.int32))
    mesh = Mesh(np.array(corners) * 100, (block,))
    results = sound_results() | {"mesh": {"quality": mesh_quality(mesh)}}
    cautions = raised(sound_job(supports=()), results, mesh=mesh).get("distorted-elements", [])
    return {caution.evidence["quantity"]: caution.evidence for caution in cautions}


def skewed(degrees: float) -> dict:
    """A rhombus of unit sides with that corner angle; its scaled Jacobian is the angle's sine."""
    dx, dy = np.cos(np.radians(degrees)), np.sin(np.radians(degrees))
    return one_quadrilateral((0.0, 0.0), (1.0, 0.0), (1 + dx, dy), (dx, dy))


@pytest.mark.parametrize("degrees", [19.0, 10.0])
def test_an_element_with_a_sharp_corner_is_told_with_its_place(degrees: float) -> None:
    evidence = skewed(degrees)["min_angle"]
    assert evidence["value"] == pytest.approx(degrees)
    assert evidence["at"][1] == pytest.approx(50 * np.sin(np.radians(degrees)))


@pytest.mark.parametrize("degrees", [11.0, 1.0])
def test_an_element_that_is_nearly_flat_has_a_small_scaled_jacobian(degrees: float) -> None:
    evidence = skewed(degrees)["min_scaled_jacobian"]
    assert evidence["value"] == pytest.approx(np.sin(np.radians(degrees)))


@pytest.mark.parametrize("aspect", [10.5, 400.0])
def test_a_long_element_is_told(aspect: float) -> None:
    found = one_quadrilateral((0.0, 0.0), (aspect, 0.0), (aspect, 1.0), (0.0, 1.0))
    assert found["max_aspect"]["value"] == pytest.approx(aspect)


@pytest.mark.parametrize("degrees", [21.0, 45.0, 90.0])
def test_a_moderately_skewed_element_is_silent(degrees: float) -> None:
    assert skewed(degrees) == {}


@pytest.mark.parametrize("aspect", [1.0, 9.5])
def test_a_moderately_long_element_is_silent(aspect: float) -> None:
    assert one_quadrilateral((0.0, 0.0), (aspect, 0.0), (aspect, 1.0), (0.0, 1.0)) == {}


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

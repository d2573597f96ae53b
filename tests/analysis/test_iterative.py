"""Conjugate gradients with multigrid against the factor, and what they cannot solve."""

import numpy as np
import pytest

from tests.plates import ELEMENTS, MIXED, grid, plate_job, warp
from workers.analysis.effort import ENERGY_ERROR, TOLERANCE
from workers.analysis.iterative import ConjugateGradients
from workers.analysis.memory_need import direct_memory
from workers.analysis.mesh import PLATE, Block, Mesh
from workers.analysis.solution import Solution, solve
from workers.errors import AnalysisError, MechanismError
from workers.job import (
    Acceleration,
    Job,
    Named,
    Pressure,
    Shear,
    Spring,
    Support,
    TemperatureChange,
)

LEFT, RIGHT, TOP, SW, NW = (Named(name) for name in ("left", "right", "top", "SW", "NW"))
SKEW = (
    Support("pin", SW, ux=0.0, uy=0.02),
    Support("skew", NW, along=(2.0, 1.0)),
    Support("bed", RIGHT, spring=Spring(x=2e3, y=1e4)),
)
CASES = {
    "push": [Pressure(on=TOP, start=4, end=1)],
    "drag": [Shear(on=TOP, start=3, end=3)],
    "weight": [Acceleration(acceleration=(0, -9.81e6))],
    "heat": [TemperatureChange(change=40.0)],
    "rest": [Pressure(on=TOP, start=0, end=0)],
}
CLAMP = (Support("clamp", LEFT, ux=0.0, uy=0.0),)


def _largest_difference(one: Solution, other: Solution) -> float:
    """Of the displacements of all cases, each over its largest."""
    size = np.abs(other.displacement).max(axis=(0, 1))
    return float((np.abs(one.displacement - other.displacement).max(axis=(0, 1)) / size).max())


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_every_element_is_solved_as_by_the_factor(kind: str) -> None:
    """With supports in skew axes, springs and prescribed displacements."""
    job, mesh = plate_job(SKEW, CASES), grid(kind, 24, 16, shape=warp, shuffle=2)
    iterated, direct = solve(job, mesh, method="iterative"), solve(job, mesh)
    # The energy error is at most 1e-6; the largest displacement differs by less.
    assert _largest_difference(iterated, direct) < ENERGY_ERROR
    for one, other in zip(iterated.support_forces, direct.support_forces, strict=True):
        size = np.abs(other.force).max(axis=(0, 1))
        np.testing.assert_allclose(one.force / size, other.force / size, atol=1e-5)
    assert iterated.solver.residual.max() < 2 * TOLERANCE
    assert iterated.solver.iteration is not None
    assert 3 < iterated.solver.iteration.iterations < 60
    assert 0 < iterated.solver.iteration.energy_error < ENERGY_ERROR
    assert direct.solver.iteration is None


def test_iteration_takes_over_where_the_factor_would_not_fit() -> None:
    job, mesh = plate_job(CLAMP, CASES), grid("Q8", 30, 30)
    direct = solve(job, mesh)
    need = direct_memory(mesh.dof_count, direct.solver.factor_entries)
    fits, does_not = (solve(job, mesh, memory=part * need) for part in (1.001, 0.999))
    assert fits.solver.name == direct.solver.name
    assert does_not.solver.name == ConjugateGradients.name
    assert does_not.solver.factor_entries < direct.solver.factor_entries


def test_a_slender_strip_is_solved_as_by_the_factor() -> None:
    """1 to 100: the residual is small long before the tip is where it belongs."""
    mesh = grid("Q8", 200, 2, size=(100.0, 1.0))
    job = plate_job(CLAMP, {"bend": [Shear(on=RIGHT, start=1, end=1)]})
    iterated, direct = solve(job, mesh, method="iterative"), solve(job, mesh)
    # The tip is as wrong as the energy at most, and the estimate may be a few times too small.
    assert _largest_difference(iterated, direct) < 10 * ENERGY_ERROR


def _hinged(kind: str = "Q4", cells: int = 12) -> Mesh:
    """Two squares that have one corner node in common: the right one can turn about it."""
    one = grid(kind, cells, cells)
    corner = one.points["NE"]
    other = one.nodes + np.array([1.0, 1.0])
    number = np.arange(one.node_count) + one.node_count
    number[one.points["SW"]] = corner
    keep = np.delete(np.arange(one.node_count), one.points["SW"])
    place = np.full(one.node_count, corner)
    place[keep] = one.node_count + np.arange(len(keep))
    block = one.blocks[0]
    connectivity = np.concatenate((block.connectivity, place[block.connectivity])).astype(np.int32)
    region = np.zeros(len(connectivity), np.int32)
    return Mesh(
        np.concatenate((one.nodes, other[keep])),
        (Block(block.element, connectivity, region),),
        (PLATE,),
        {"left": one.sides["left"]},
        {"far": int(place[one.points["NE"]])},
    )


@pytest.mark.parametrize("kind", ["Q4", "Q8"])
def test_a_free_motion_that_shows_only_in_the_numbers_is_named(
    kind: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Hinges are found before anything is solved; here the look for them is left out."""
    monkeypatch.setattr("workers.analysis.solution.free_motions", lambda *_: [])
    mesh = _hinged(kind)
    job = plate_job(CLAMP, {"weight": [Acceleration(acceleration=(0, -9.81e6))]})
    with pytest.raises(MechanismError, match=r"rotate about \(1, 1\)"):
        solve(job, mesh, method="iterative")


def test_what_does_not_converge_says_so_and_what_to_do(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("workers.analysis.iterative.MOST_ITERATIONS", 2)
    job, mesh = plate_job(CLAMP, CASES), grid("Q8", 30, 30)
    with pytest.raises(AnalysisError, match=r"did not converge.*coarser mesh") as caught:
        solve(job, mesh, method="iterative")
    assert not isinstance(caught.value, MechanismError)


def _on_springs(stiffness: float) -> Job:
    held = (Support("bed", LEFT, spring=Spring(x=stiffness, y=stiffness)),)
    return plate_job(held, {"push": [Shear(on=TOP, start=3, end=1)]})


@pytest.mark.parametrize("stiffness", [1e2, 1.0, 1e-1])
def test_a_nearly_free_plate_is_still_solved_rightly(stiffness: float) -> None:
    """On springs down to a millionth of the plate's own stiffness of 4e5 N/mm."""
    job, mesh = _on_springs(stiffness), grid("Q4", 20, 20)
    iterated, direct = solve(job, mesh, method="iterative"), solve(job, mesh)
    assert _largest_difference(iterated, direct) < ENERGY_ERROR


@pytest.mark.parametrize("stiffness", [1e-3, 1e-5])
def test_a_plate_that_is_free_in_all_but_name_is_refused(stiffness: float) -> None:
    with pytest.raises(AnalysisError, match=r"nearly free to move|can rotate|can slide"):
        solve(_on_springs(stiffness), grid("Q4", 20, 20), method="iterative")

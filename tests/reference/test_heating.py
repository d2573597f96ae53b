"""Free and restrained heating: no stress, and -E alpha dT / (1 - nu) both ways.

Hooke's law with thermal strain, sigma_z = 0: eps = sigma (1 - nu) / E + alpha dT for an equal
biaxial state; Timoshenko & Goodier, *Theory of Elasticity*, ch. 13 (from memory).
"""

import numpy as np
import pytest

from tests.plates import ELEMENTS, MIXED, grid, plate_job, raw_stress, warp
from workers.analysis.plane_stress import thermal_strain
from workers.analysis.solution import Solution, solve
from workers.job import Named, Support, TemperatureChange

E, NU, ALPHA, DT = 210e3, 0.3, 1.2e-5, 80.0


def _stress(solution: Solution) -> np.ndarray:
    """D (B u - eps0) at the stiffness points, (points, 3)."""
    thermal = solution.model.sections[0].constitutive[0] @ thermal_strain(ALPHA, DT)
    return raw_stress(solution) - thermal


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_free_plate_grows_without_stress(kind: str) -> None:
    mesh = grid(kind, 4, 3, shape=warp, size=(4.0, 3.0))
    supports = [
        Support("pin", Named("SW"), ux=0.0, uy=0.0),
        Support("roller", Named("SE"), along=_across(mesh)),
    ]
    solution = solve(plate_job(supports, [TemperatureChange(change=DT)]), mesh)
    expected = ALPHA * DT * (mesh.nodes - mesh.nodes[mesh.points["SW"]])
    np.testing.assert_allclose(solution.displacement[:, :, 0], expected, atol=1e-13)
    np.testing.assert_allclose(_stress(solution), 0, atol=1e-10 * E * ALPHA * DT)


def _across(mesh) -> tuple[float, float]:
    """Across the line from SW to SE, so that the plate may grow along it."""
    dx, dy = mesh.nodes[mesh.points["SE"]] - mesh.nodes[mesh.points["SW"]]
    return (-dy, dx)


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_fully_restrained_plate_is_pressed_both_ways(kind: str) -> None:
    mesh = grid(kind, 4, 3, size=(4.0, 3.0))
    sides = ("left", "right", "bottom", "top")
    supports = [Support(side, Named(side), normal=0.0) for side in sides]
    solution = solve(plate_job(supports, [TemperatureChange(change=DT)]), mesh)
    pressure = -E * ALPHA * DT / (1 - NU)
    expected = np.tile([pressure, pressure, 0.0], (len(_stress(solution)), 1))
    np.testing.assert_allclose(_stress(solution), expected, atol=1e-11 * -pressure)
    for support in solution.support_forces:
        total = support.force.sum(axis=0)[:, 0]
        length = 3.0 if support.label in ("left", "right") else 4.0
        # Two nodes of each side belong to the neighbour first, in the other direction only.
        assert np.abs(total).max() == pytest.approx(-pressure * length * 2.0, rel=1e-10)
        assert np.abs(total).min() == pytest.approx(0.0, abs=1e-9 * -pressure)

"""Orders of convergence, and the peak at a hole, against exact solutions.

Sources stand beside the solutions in tests/exact_solutions.py.
"""

import numpy as np
import pytest

from tests.exact_solutions import (
    Errors,
    Exact,
    cantilever,
    kirsch,
    measure_errors,
    solve_with_exact_border,
    waves,
)
from tests.plates import ELEMENTS, grid, plate_job, warp
from workers.analysis.mesh import Mesh
from workers.analysis.model import Model, build_model
from workers.analysis.recovery import Recovery

E, NU, T = 1000.0, 0.3, 0.5
ORDER = {"T3": 1, "Q4": 1, "T6": 2, "Q8": 2}


def _model(mesh: Mesh) -> Model:
    return build_model(plate_job(youngs_modulus=E, poissons_ratio=NU, thickness=T), mesh)


def _solve(model: Model, exact: Exact) -> tuple[Recovery, np.ndarray, np.ndarray, Errors]:
    u = solve_with_exact_border(model, exact)
    recovery = Recovery.build(model)
    nodal = recovery.nodal_stress(u)
    errors = measure_errors(model, exact, u, nodal, recovery.field_mesh.connectivity)
    return recovery, u, nodal, errors


def _hole(kind: str, cells: int) -> Mesh:
    """Quarter ring from the hole of radius 1 to radius 4, finer towards the hole."""

    def shape(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        r, t = 1 + 3 * (np.exp(1.5 * x) - 1) / (np.exp(1.5) - 1), np.pi / 2 * y
        return r * np.cos(t), r * np.sin(t)

    return grid(kind, cells, cells, shape=shape)


@pytest.mark.parametrize(
    ("exact", "shape"), [(waves(E, NU), "square"), (kirsch(E, NU), "hole")], ids=["waves", "hole"]
)
@pytest.mark.parametrize("kind", ELEMENTS)
def test_errors_fall_with_the_order_of_the_element(kind: str, exact: Exact, shape: str) -> None:
    """p in the energy norm, p + 1 in displacement (L2): a priori theory, e.g. Strang & Fix,
    An Analysis of the Finite Element Method, ch. 3. Within 0.15: the orders are asymptotic.

    What the recovery is for: its stress must be closer than the raw one and converge faster.
    """
    pair = []
    for cells in (12, 24):
        mesh = _hole(kind, cells) if shape == "hole" else grid(kind, cells, cells, shape=warp)
        pair.append(_solve(_model(mesh), exact)[3])
    coarse, fine = pair
    order = {
        name: np.log2(getattr(coarse, name) / getattr(fine, name))
        for name in ("displacement", "raw", "recovered")
    }
    print(f"{kind} {shape}: " + ", ".join(f"{name} {value:.2f}" for name, value in order.items()))
    assert order["displacement"] == pytest.approx(ORDER[kind] + 1, abs=0.15)
    assert order["raw"] == pytest.approx(ORDER[kind], abs=0.15)
    assert order["recovered"] > ORDER[kind] + 0.3
    assert fine.recovered < 0.7 * fine.raw


@pytest.mark.parametrize(
    ("kind", "cells", "tolerance"),
    [("T3", 32, 0.08), ("Q4", 32, 0.01), ("T6", 16, 0.01), ("Q8", 16, 0.005)],
)
def test_peak_at_a_hole_is_three_times_the_pull(kind: str, cells: int, tolerance: float) -> None:
    """Kirsch 1898: sigma_xx = 3 S at the top of the hole, -S at its side; closed form.

    The tolerances are what each element reaches with elements of that number around a quarter of
    the hole: T3 is honestly poor.
    """
    recovery, _, nodal, _ = _solve(_model(_hole(kind, cells)), kirsch(E, NU))
    points = recovery.field_mesh.points
    top = int(np.linalg.norm(points - [0, 1], axis=1).argmin())
    side = int(np.linalg.norm(points - [1, 0], axis=1).argmin())
    print(f"{kind}: {nodal[top, 0, 0]:.4f} S (exact 3), {nodal[side, 1, 0]:.4f} S (exact -1)")
    assert nodal[top, 0, 0] == pytest.approx(3, rel=tolerance)
    assert nodal[side, 1, 0] == pytest.approx(-1, abs=3 * tolerance)


@pytest.mark.parametrize(
    ("kind", "tolerance"), [("T3", 0.15), ("Q4", 0.01), ("T6", 2e-3), ("Q8", 2e-3)]
)
def test_cantilever_fields(kind: str, tolerance: float) -> None:
    """Timoshenko & Goodier art. 21: bending and parabolic shear stress at all field points.

    24 x 6 elements; tolerance of the largest bending stress. T3, six to the depth, is honestly
    poor.
    """
    length, c, force = 8.0, 1.0, 6.0
    exact = cantilever(E, NU, length, c, force)
    mesh = grid(kind, 24, 6, size=(length, 2 * c), shape=lambda x, y: (x, y - c))
    recovery, u, nodal, _ = _solve(_model(mesh), exact)
    stress = exact.stress(*recovery.field_mesh.points.T)
    largest = np.abs(stress).max()
    off = np.abs(nodal[..., 0] - stress).max() / largest
    moved = exact.displacement(*mesh.nodes.T)
    print(f"{kind}: stress within {off:.2e} of the largest, displacement ", end="")
    print(f"{np.abs(u[..., 0] - moved).max() / np.abs(moved).max():.2e}")
    assert off < tolerance


@pytest.mark.parametrize(
    "exact",
    [kirsch(E, NU), cantilever(E, NU, 8.0, 1.0, 6.0), waves(E, NU)],
    ids=["hole", "cantilever", "waves"],
)
def test_exact_solutions_satisfy_their_equations(exact: Exact) -> None:
    """Numerical derivatives: Hooke's law holds between the two fields, and div sigma + b = 0."""
    rng = np.random.default_rng(6)
    x, y = rng.uniform(1.2, 2.0, (2, 40))
    h = 1e-5

    def slope(field, axis: int) -> np.ndarray:
        dx, dy = (h, 0.0) if axis == 0 else (0.0, h)
        return (field(x + dx, y + dy) - field(x - dx, y - dy)) / (2 * h)

    u_x, u_y = slope(exact.displacement, 0), slope(exact.displacement, 1)
    strain = np.stack([u_x[:, 0], u_y[:, 1], u_y[:, 0] + u_x[:, 1]], axis=-1)
    law = E / (1 - NU**2) * np.array([[1, NU, 0], [NU, 1, 0], [0, 0, (1 - NU) / 2]])
    stress = exact.stress(x, y)
    np.testing.assert_allclose(strain @ law, stress, atol=1e-6 * np.abs(stress).max())
    s_x, s_y = slope(exact.stress, 0), slope(exact.stress, 1)
    force = np.stack([s_x[:, 0] + s_y[:, 2], s_x[:, 2] + s_y[:, 1]], axis=-1)
    if exact.body_force is not None:
        force += exact.body_force(x, y)
    np.testing.assert_allclose(force, 0, atol=1e-6 * np.abs(stress).max())

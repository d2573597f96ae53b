"""A bar under its own body force: E u'' + f = 0, fixed at x = 0, free at x = L, nu = 0.

The solution of the one-dimensional equation is u = f (L x - x^2 / 2) / E. Quadratic elements hold
it; linear elements are exact at their nodes on a bar one element wide, as they are in one dimension
(the Green's function of a node is piecewise linear).
"""

import numpy as np
import pytest

from tests.plates import ELEMENTS, grid, plate_job
from workers.analysis.solution import solve
from workers.job import Acceleration, BodyForce, Load, Named, Support

E, L, H, F, RHO = 200.0, 8.0, 1.0, 0.3, 1.5


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize(
    "load",
    [BodyForce(force=(F, 0.0)), Acceleration(acceleration=(F / RHO, 0.0))],
    ids=["body force", "acceleration"],
)
def test_nodal_displacements_are_exact(kind: str, load: Load) -> None:
    mesh = grid(kind, 5, 1, size=(L, H))
    supports = [Support("wall", Named("left"), ux=0.0), Support("pin", Named("SW"), uy=0.0)]
    job = plate_job(supports, [load], youngs_modulus=E, poissons_ratio=0.0, density=RHO)
    solution = solve(job, mesh)
    x = mesh.nodes[:, 0]
    exact = F * (L * x - x**2 / 2) / E
    u, v = solution.displacement[:, :, 0].T
    if kind == "T3":
        # The triangles load top and bottom of the bar unequally, which bends it; the mean over the
        # width, which the one-dimensional equation is about, is exact.
        u = np.array([u[np.isclose(x, at)].mean() for at in x])
        v = np.zeros_like(u)
    np.testing.assert_allclose(u, exact, atol=1e-12 * exact.max())
    np.testing.assert_allclose(v, 0, atol=1e-12 * exact.max())
    reaction = solution.support_forces[0].force.sum(axis=0)[0, 0]
    assert reaction == pytest.approx(-F * L * H * 2.0, rel=1e-12)

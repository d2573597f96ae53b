"""A manufactured solution on the unit square: what order an element type converges at.

Roache, *Verification and Validation in Computational Science and Engineering*, 1998, method of
manufactured solutions: choose the displacement, derive the body force, prescribe the border.
"""

import numpy as np

from elements.contract import Array, ElementType
from elements.trials import element_dofs, isotropic, reference_rule, solve_dense, square_mesh


def displacement(x: Array, y: Array) -> Array:
    """u = sin(2x + y), v = cos(x - 2y): (..., 2)."""
    return np.stack((np.sin(2 * x + y), np.cos(x - 2 * y)), axis=-1)


def strain(x: Array, y: Array) -> Array:
    """xx, yy, engineering xy: (..., 3)."""
    first, second = np.cos(2 * x + y), np.sin(x - 2 * y)
    return np.stack((2 * first, 2 * second, first - second), axis=-1)


def body_force(x: Array, y: Array, law: Array) -> Array:
    """Minus the divergence of the stress under an isotropic law: (..., 2)."""
    d, e, g = law[0, 0], law[0, 1], law[2, 2]
    u, v = np.sin(2 * x + y), np.cos(x - 2 * y)
    f_x = (4 * d + g) * u - 2 * (e + g) * v
    f_y = 2 * (e + g) * u + (4 * d + g) * v
    return np.stack((f_x, f_y), axis=-1)


def manufactured_errors(element: ElementType, divisions: int) -> tuple[float, float]:
    """L2 norm of the displacement error, and energy norm of the stress error."""
    mesh, law = square_mesh(element, divisions), isotropic(1.0, 0.3)
    coords, laws = mesh.coords, np.tile(law, (len(mesh.connectivity), 1, 1))
    x, y = np.moveaxis(element.shape_functions(element.load_rule().points) @ coords, -1, 0)
    loads = element.body_load(coords, np.ones(len(coords)), body_force(x, y, law))
    u = solve_dense(element, mesh, law, loads, displacement(*mesh.nodes.T))
    points, weights = reference_rule(element)
    N = element.shape_functions(points)
    x, y = np.moveaxis(N @ coords, -1, 0)
    area = element.jacobian(coords, points)[1] * weights
    miss = N @ u[mesh.connectivity] - displacement(x, y)
    operator = element.stress_operator(coords, laws, points)
    stress = np.einsum("mqia,ma->mqi", operator, u.ravel()[element_dofs(mesh.connectivity)])
    off = stress - strain(x, y) @ law
    energy = np.einsum("mq,mqi,ij,mqj->", area, off, np.linalg.inv(law), off)
    return float(np.sqrt(np.einsum("mq,mqi->", area, miss**2))), float(np.sqrt(energy))

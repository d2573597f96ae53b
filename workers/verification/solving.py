"""Finite-element solutions of exact solutions, and how far they are off.

The supports and loads of a job cannot say an arbitrary field on a border; here the stiffness is
assembled as for a job, and the exact displacements and tractions are put on it.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse.linalg import spsolve

from elements.quadrature import Rule, quadrilateral, triangle
from workers.analysis.assembly import assemble_stiffness
from workers.analysis.mesh import Facets
from workers.analysis.model import Model
from workers.analysis.recovery import raw_stress
from workers.verification.exact import Exact

Array = NDArray[np.float64]


def solve_with_exact_border(model: Model, exact: Exact) -> Array:
    """Displacement (N, 2, 1) with the exact one prescribed on the whole border."""
    held = np.zeros((model.mesh.node_count, 2), bool)
    held[model.mesh.facet_nodes(model.mesh.boundary)] = True
    return solve_with(model, exact, held, np.empty((0, 3), np.int32))


def solve_with(model: Model, exact: Exact, held: NDArray[np.bool_], pulled: Facets) -> Array:
    """Displacement (N, 2, 1) under the exact body force.

    Parameters
    ----------
    held : (N, 2)   where the exact displacement is prescribed
    pulled : (f, 3) facets on which the exact traction acts
    """
    K = assemble_stiffness(model).tocsc()
    force = _body_force(model, exact) + _tractions(model, exact, pulled)
    u = np.where(held, exact.displacement(*model.mesh.nodes.T), 0.0)
    free = ~held.ravel()
    rest = force.ravel() - K @ u.ravel()
    u.ravel()[free] = spsolve(K[free][:, free], rest[free])
    return u[..., None]


def _body_force(model: Model, exact: Exact) -> Array:
    """Consistent nodal forces (N, 2)."""
    force = np.zeros((model.mesh.node_count, 2))
    if exact.body_force is None:
        return force
    for number, block in enumerate(model.mesh.blocks):
        coords = model.mesh.coords(number)
        at = np.matmul(block.element.shape_functions(block.element.load_rule().points), coords)
        load = block.element.body_load(
            coords, model.sections[number].thickness, exact.body_force(*np.moveaxis(at, -1, 0))
        )
        np.add.at(force, block.connectivity, load)
    return force


def _tractions(model: Model, exact: Exact, pulled: Facets) -> Array:
    """Consistent nodal forces (N, 2) of sigma n on the facets."""
    force = np.zeros((model.mesh.node_count, 2))
    for group in model.mesh.facet_groups(pulled):
        block = model.mesh.blocks[group.block]
        nodes = block.connectivity[group.elements]
        coords = model.mesh.nodes[nodes]
        at, tangent = block.element.side_points(coords, group.side)
        normal = np.stack((tangent[..., 1], -tangent[..., 0]), axis=-1)
        normal /= np.linalg.norm(normal, axis=-1, keepdims=True)
        xx, yy, xy = np.moveaxis(exact.stress(*np.moveaxis(at, -1, 0)), -1, 0)
        nx, ny = np.moveaxis(normal, -1, 0)
        traction = np.stack((xx * nx + xy * ny, xy * nx + yy * ny), axis=-1)
        thickness = model.sections[group.block].thickness[group.elements, None, None]
        np.add.at(force, nodes, block.element.side_load(coords, group.side, traction * thickness))
    return force


@dataclass(frozen=True)
class Errors:
    """Against the exact solution: L2 of displacement, energy norms of raw and recovered stress.

    estimate is the energy norm of recovered minus raw, energy that of the exact stress; all by
    quadrature of higher degree than the program's own.
    """

    displacement: float
    raw: float
    recovered: float
    estimate: float
    energy: float


def measure_errors(
    model: Model, exact: Exact, u: Array, nodal: Array, connectivity: tuple
) -> Errors:
    """u (N, 2, 1), recovered stress nodal (P, 3, 1) on the points of `connectivity`."""
    sums = np.zeros(5)
    for number, block in enumerate(model.mesh.blocks):
        element = block.element
        rule: Rule = triangle(5) if element.is_triangle else quadrilateral(4)
        coords = model.mesh.coords(number)
        _, det_J = element.jacobian(coords, rule.points)
        volume = det_J * rule.weights * model.sections[number].thickness[:, None]
        N = element.shape_functions(rule.points)
        x, y = np.moveaxis(np.matmul(N, coords), -1, 0)
        raw = raw_stress(model, number, rule.points, u)[..., 0]
        recovered = np.matmul(N, nodal[connectivity[number], :, 0])
        true = exact.stress(x, y)
        compliance = np.linalg.inv(model.sections[number].constitutive)
        for row, field in enumerate((raw - true, recovered - true, recovered - raw, true), 1):
            sums[row] += np.einsum("mqi,mij,mqj,mq->", field, compliance, field, volume)
        off = np.matmul(N, u[block.connectivity, :, 0]) - exact.displacement(x, y)
        sums[0] += np.einsum("mqi,mqi,mq->", off, off, volume)
    return Errors(*np.sqrt(sums).tolist())

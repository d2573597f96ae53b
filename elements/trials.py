"""Trial shapes, trial meshes and a small dense solver for the conformance kit.

Nothing here uses the derived methods that the kit has to judge, except where it says so.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from elements.contract import Array, ElementType
from elements.quadrature import Rule, quadrilateral, triangle

Index = NDArray[np.intp]

# MacNeal & Harder, "A proposed standard set of problems to test finite element accuracy", Finite
# Elements in Analysis and Design 1 (1985), membrane patch test (geometry from memory).
PATCH_CORNERS = np.array(
    [
        [0.0, 0.0],
        [0.24, 0.0],
        [0.24, 0.12],
        [0.0, 0.12],
        [0.04, 0.02],
        [0.18, 0.03],
        [0.16, 0.08],
        [0.08, 0.08],
    ]
)
PATCH_QUADRILATERALS = np.array(
    [[0, 1, 5, 4], [1, 2, 6, 5], [2, 3, 7, 6], [3, 0, 4, 7], [4, 5, 6, 7]]
)

SMALLEST_JACOBIAN = 0.2  # of the largest in the element: a usable shape, not a border case


class TrialMesh(NamedTuple):
    """nodes : (N, 2); connectivity : (m, n); boundary : node numbers on the outer border."""

    nodes: Array
    connectivity: Index
    boundary: Index

    @property
    def coords(self) -> Array:
        return self.nodes[self.connectivity]


def reference_rule(element: ElementType) -> Rule:
    """A rule richer than any that the element uses itself."""
    return triangle(5) if element.is_triangle else quadrilateral(5)


def isotropic(youngs_modulus: float, poissons_ratio: float) -> Array:
    """Plane-stress law (3, 3), engineering shear strain [F/L^2]."""
    nu = poissons_ratio
    law = np.array([[1, nu, 0], [nu, 1, 0], [0, 0, (1 - nu) / 2]])
    return youngs_modulus / (1 - nu**2) * law


def regular_shape(element: ElementType) -> Array:
    """The reference shape itself, (1, n, 2)."""
    return np.array(element.natural_nodes)[None]


def straight_shapes(element: ElementType, count: int = 60) -> Array:
    """Usable shapes with straight sides and mid-side nodes in the middle, (m, n, 2)."""
    return _shapes(element, count, bow=0.0)


def curved_shapes(element: ElementType, count: int = 400) -> Array:
    """Usable shapes whose mid-side nodes are off the middle; empty for elements of order 1."""
    return _shapes(element, count if element.order == 2 else 0, bow=0.2)


def _shapes(element: ElementType, count: int, bow: float) -> Array:
    random = np.random.default_rng(20)
    coords = np.tile(element.natural_nodes, (count, 1, 1))
    reach = 0.5 if element.is_triangle else 1.0  # half the side of the reference shape
    corners = coords[:, : element.corners]
    corners += reach * random.uniform(-0.4, 0.4, corners.shape)
    for side in element.sides:
        if len(side) == 3:
            a, b, mid = side
            coords[:, mid] = (coords[:, a] + coords[:, b]) / 2
            coords[:, mid] += 2 * reach * random.uniform(-bow, bow, (count, 2))
    points = np.vstack((reference_rule(element).points, element.natural_nodes))
    det_J = np.linalg.det(np.einsum("qin,mnk->mqik", element.gradients(points), coords))
    return coords[det_J.min(axis=1) > SMALLEST_JACOBIAN * det_J.max(axis=1)]


def patch_mesh(element: ElementType) -> TrialMesh:
    """The five-quadrilateral patch of MacNeal & Harder; ten triangles for triangular types."""
    return _mesh(element, PATCH_CORNERS, PATCH_QUADRILATERALS, boundary_corners=4)


def square_mesh(element: ElementType, divisions: int) -> TrialMesh:
    """Unit square, smoothly distorted so that refinement makes the elements parallelograms.

    Serendipity elements lose an order on meshes of similar trapezoids whatever their size
    (Arnold, Boffi & Falk, Math. Comp. 71 (2002)), so a family of those would judge unfairly.
    """
    steps = np.linspace(0, 1, divisions + 1)
    y, x = (a.ravel() for a in np.meshgrid(steps, steps, indexing="ij"))
    bulge = 0.06 * np.sin(np.pi * x) * np.sin(np.pi * y)
    grid = np.arange(x.size).reshape(divisions + 1, -1)
    around = (grid[:-1, :-1], grid[:-1, 1:], grid[1:, 1:], grid[1:, :-1])
    quadrilaterals = np.stack([corner.ravel() for corner in around], axis=1)
    border = (x == 0) | (x == 1) | (y == 0) | (y == 1)
    order = np.argsort(~border, kind="stable")  # border nodes first, as `_mesh` wants them
    rank = np.argsort(order)
    corners = np.column_stack((x + bulge, y - bulge))[order]
    return _mesh(element, corners, rank[quadrilaterals], boundary_corners=int(border.sum()))


def _mesh(element: ElementType, nodes: Array, quads: Index, boundary_corners: int) -> TrialMesh:
    """Elements on given quadrilaterals; the first `boundary_corners` nodes are the border."""
    if element.is_triangle:
        quads = np.vstack((quads[:, [0, 1, 2]], quads[:, [0, 2, 3]]))
    corner_count = len(nodes)
    boundary = np.arange(boundary_corners)
    if element.order == 1:
        return TrialMesh(nodes, quads, boundary)
    ends = np.stack([quads[:, list(side[:2])] for side in element.sides], axis=1)
    edges, inverse, uses = np.unique(
        np.sort(ends.reshape(-1, 2), axis=1), axis=0, return_inverse=True, return_counts=True
    )
    mids = corner_count + inverse.reshape(len(quads), -1)
    return TrialMesh(
        np.vstack((nodes, nodes[edges].mean(axis=1))),
        np.hstack((quads, mids)),
        np.concatenate((boundary, corner_count + np.flatnonzero(uses == 1))),
    )


def element_dofs(connectivity: Index) -> Index:
    """Dof numbers of each element, (m, 2n)."""
    return np.stack((2 * connectivity, 2 * connectivity + 1), axis=-1).reshape(
        len(connectivity), -1
    )


def solve_dense(
    element: ElementType, mesh: TrialMesh, law: Array, loads: Array, prescribed: Array
) -> Array:
    """Displacements (N, 2) with every boundary node prescribed; unit thickness.

    loads : (m, n, 2) element nodal forces; prescribed : (N, 2), used on the boundary only.
    Judges `element.stiffness`.
    """
    m, total = len(mesh.connectivity), mesh.nodes.size
    dofs = element_dofs(mesh.connectivity)
    K, f = np.zeros((total, total)), np.zeros(total)
    stiffness = element.stiffness(mesh.coords, np.tile(law, (m, 1, 1)), np.ones(m))
    np.add.at(K, (dofs[:, :, None], dofs[:, None, :]), stiffness)
    np.add.at(f, dofs, loads.reshape(m, -1))
    free = np.ones(total, dtype=bool)
    free[element_dofs(mesh.boundary[None])] = False
    u = np.where(free, 0.0, prescribed.ravel())
    u[free] = np.linalg.solve(K[np.ix_(free, free)], (f - K @ u)[free])
    return u.reshape(-1, 2)

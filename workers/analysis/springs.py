"""Springs: elastic supports as 2x2 node blocks of the stiffness matrix."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import FacetGroup, Facets, Mesh
from workers.analysis.selection import Selection
from workers.analysis.true_normals import facet_normals
from workers.errors import Fault, MeshError
from workers.job import Named, Spring, Support

Array = NDArray[np.float64]

NO_STIFFNESS = 1e-12  # of the stiffness the other way: rounding of the turned spring


@dataclass(frozen=True, eq=False)
class SpringBlocks:
    """Node blocks that a support adds to the stiffness: rows (b,), columns (b,), blocks (b, 2, 2).

    A pair may occur several times; its blocks add up.
    """

    rows: NDArray[np.int64]
    columns: NDArray[np.int64]
    blocks: Array

    def force(self, displacement: Array) -> Array:
        """Force of the springs on the plate, -K u, in the order of `nodes`: (k, 2, c) [F]."""
        nodes, row = np.unique(self.rows, return_inverse=True)
        force = np.zeros((len(nodes), *displacement.shape[1:]))
        np.subtract.at(force, row, self.blocks @ displacement[self.columns])
        return force

    def directions(self) -> tuple[NDArray[np.int64], Array]:
        """Nodes (r,) and directions (r, 2) in which the springs resist."""
        own = self.rows == self.columns
        nodes, row = np.unique(self.rows[own], return_inverse=True)
        stiffness = np.zeros((len(nodes), 2, 2))
        np.add.at(stiffness, row, self.blocks[own])
        size, axes = np.linalg.eigh(stiffness)
        node, axis = np.nonzero(size > NO_STIFFNESS * size[:, 1:])
        return nodes[node], axes[node, :, axis]

    @property
    def nodes(self) -> NDArray[np.int64]:
        """Numbers of the nodes on which springs act, ascending."""
        return np.unique(self.rows)


def spring_blocks(support: Support, selection: Selection, mesh: Mesh) -> SpringBlocks:
    """Stiffness of the springs of one support on what it caught; empty if it has none.

    Along a side the springs are spread and consistent: k N N^T ds. At a point they act on the
    node.

    Raises
    ------
    MeshError   the target is an area, or a point that has no normal.
    """
    if support.spring is None:
        return SpringBlocks(np.empty(0, np.int64), np.empty(0, np.int64), np.empty((0, 2, 2)))
    if isinstance(support.on, Named) and support.on.name in mesh.regions:
        raise MeshError(
            [
                Fault(
                    support.pointer,
                    f"a spring acts on a side or at a point; {support.on.name!r} is a region",
                )
            ]
        )
    if len(selection.facets):
        return _side_springs(support.spring, mesh, selection.facets)
    return _point_springs(support, selection)


def _point_springs(support: Support, selection: Selection) -> SpringBlocks:
    spring = support.spring
    assert spring is not None
    if spring.normal or spring.tangential:
        raise MeshError(
            [Fault(support.pointer, "a point has no normal; give the spring's x and y instead")]
        )
    nodes = selection.nodes.astype(np.int64)
    blocks = np.tile(np.diag([spring.x, spring.y]), (len(nodes), 1, 1))
    return SpringBlocks(nodes, nodes, blocks)


def _side_springs(spring: Spring, mesh: Mesh, facets: Facets) -> SpringBlocks:
    normals = facet_normals(mesh, facets)
    parts = [
        _facet_springs(spring, mesh, group, normals[group.rows])
        for group in mesh.facet_groups(facets)
    ]
    return SpringBlocks(*(np.concatenate(arrays) for arrays in zip(*parts, strict=True)))


def _facet_springs(
    spring: Spring, mesh: Mesh, group: FacetGroup, normals: Array
) -> tuple[NDArray[np.int64], NDArray[np.int64], Array]:
    """Integral of N_i N_j ds times (kx x x^T + ky y y^T + kn n_i n_j^T + kt t_i t_j^T).

    The displacement along the side's normal is interpolated from that at the nodes, along their
    true normals (f, 3, 2). With the normals of chords a plate that turns about the centre of a
    circular side would stretch its normal springs.
    """
    block = mesh.blocks[group.block]
    local = list(block.element.sides[group.side])
    nodes = block.connectivity[group.elements]
    _, tangent = block.element.side_points(mesh.nodes[nodes], group.side)
    weights = np.linalg.norm(tangent, axis=2) * block.element.side_rule().weights
    N = block.element.shape_functions(block.element.side_natural_points(group.side))[:, local]
    shared = np.einsum("qi,qj,mq->mij", N, N, weights)
    k = len(local)
    n = normals[:, :k]
    t = np.stack((-n[..., 1], n[..., 0]), axis=-1)
    stiffness = (
        np.diag([spring.x, spring.y])
        + spring.normal * n[:, :, None, :, None] * n[:, None, :, None, :]
        + spring.tangential * t[:, :, None, :, None] * t[:, None, :, None, :]
    )
    blocks = shared[..., None, None] * stiffness
    side_nodes = nodes[:, local].astype(np.int64)
    rows, columns = np.repeat(side_nodes, k, axis=1), np.tile(side_nodes, (1, k))
    return rows.ravel(), columns.ravel(), blocks.reshape(-1, 2, 2)

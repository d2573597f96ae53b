"""The order in which nodes are eliminated: nested dissection, few fill-ins.

Nodes are first put along a space-filling curve (METIS then works on near memory), METIS dissects
the graph of the corner nodes, and every other node goes just before the earlier of the corners of
its side: four times cheaper than dissecting all nodes of quadratic elements, and no worse.

References
----------
Karypis & Kumar, "A fast and high quality multilevel scheme for partitioning irregular graphs",
SIAM J. Sci. Comput. 20 (1998).
"""

from dataclasses import dataclass

import numpy as np
import pymetis
from numpy.typing import NDArray

from workers.analysis.assembly import NodePairs
from workers.analysis.mesh import Mesh

Indices = NDArray[np.int64]

NAME = "METIS nested dissection"
CURVE_BITS = 16  # cells of the space-filling curve across the plate: 2^16


@dataclass(frozen=True, eq=False)
class NodeOrder:
    """An elimination order of the nodes.

    order : (N,) node number at each position.
    position : (N,) position of each node.
    """

    name: str
    order: Indices
    position: Indices

    @classmethod
    def from_order(cls, name: str, order: NDArray) -> "NodeOrder":
        position = np.empty(len(order), np.int64)
        position[order] = np.arange(len(order))
        return cls(name, np.asarray(order, np.int64), position)


def order_nodes(mesh: Mesh) -> NodeOrder:
    """Nested-dissection order of the nodes of a mesh."""
    return NodeOrder.from_order(NAME, with_mid_sides(mesh, dissected_corners(mesh)))


def dissected_corners(mesh: Mesh) -> Indices:
    """Numbers of the corner nodes, in nested-dissection order."""
    corner = np.zeros(mesh.node_count, dtype=bool)
    for block in mesh.blocks:
        corner[block.connectivity[:, : block.element.corners]] = True
    corners = np.flatnonzero(corner)
    corners = corners[along_curve(mesh.nodes[corners])]
    return corners[dissect(corner_graph(mesh, corners))]


def corner_graph(mesh: Mesh, corners: Indices) -> NodePairs:
    """Which corner nodes share an element; vertices in the order of `corners`."""
    rank = np.full(mesh.node_count, -1, np.int64)
    rank[corners] = np.arange(len(corners))
    cells = [rank[block.connectivity[:, : block.element.corners]] for block in mesh.blocks]
    return NodePairs.build(cells, len(corners))


def with_mid_sides(mesh: Mesh, corners: Indices) -> Indices:
    """All nodes: the corners as they come, each mid-side node before the earlier of its two."""
    return np.argsort(_keys(mesh, corners), kind="stable")


def along_curve(points: NDArray[np.float64]) -> Indices:
    """Order of points (k, 2) along the Z-shaped space-filling curve (Morton 1966)."""
    extent = np.ptp(points, axis=0).max(initial=0.0)
    scale = (2**CURVE_BITS - 1) / extent if extent > 0 else 0.0
    cells = ((points - points.min(axis=0)) * scale).astype(np.uint64)
    return np.argsort(_spread(cells[:, 0]) | (_spread(cells[:, 1]) << np.uint64(1)), kind="stable")


def _spread(bits: NDArray[np.uint64]) -> NDArray[np.uint64]:
    """Put a zero bit between the bits of 16-bit numbers."""
    for shift, mask in ((8, 0x00FF00FF), (4, 0x0F0F0F0F), (2, 0x33333333), (1, 0x55555555)):
        bits = (bits | (bits << np.uint64(shift))) & np.uint64(mask)
    return bits


def dissect(graph: NodePairs) -> Indices:
    """METIS order of the vertices of a graph: the vertex at each position."""
    rows = np.repeat(np.arange(graph.node_count, dtype=np.int32), np.diff(graph.indptr))
    apart = rows != graph.indices  # METIS wants no loops
    counts = np.bincount(rows[apart], minlength=graph.node_count)
    starts = np.concatenate(([0], np.cumsum(counts))).astype(np.int32)
    adjacency = pymetis.CSRAdjacency(starts, graph.indices[apart])
    order, _ = pymetis.nested_dissection(adjacency)
    return np.asarray(order, np.int64)


def _keys(mesh: Mesh, corners: Indices) -> NDArray[np.float64]:
    """Sorting key of every node: corners by rank, mid-side nodes half a step before a corner."""
    keys = np.full(mesh.node_count, np.nan)
    keys[corners] = np.arange(len(corners))
    for block in mesh.blocks:
        nodes = block.connectivity
        for a, b, *middle in block.element.sides:
            for mid in middle:
                earlier = np.minimum(keys[nodes[:, a]], keys[nodes[:, b]]) - 0.5
                # A node that is a corner elsewhere keeps its rank.
                known = np.isnan(keys[nodes[:, mid]])
                keys[nodes[known, mid]] = earlier[known]
    return keys

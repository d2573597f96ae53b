"""A straight-sided mesh on its way to becoming a `Mesh`: split once, boundary on the true curves.

Meshing coarsely and splitting every element is several times faster than asking the library for the
fine mesh, and turns triangles into quadrilaterals on the way.
"""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.drawing import Drawing

Array = NDArray[np.float64]
Indices = NDArray[np.int32]


@dataclass(frozen=True, eq=False)
class FlatMesh:
    """Corner nodes, triangles and quadrilaterals, and the pieces of the drawing's edges.

    nodes : (N, 2) [L]
    triangles : (m, 3), quadrilaterals : (k, 4)         counter-clockwise node numbers
    triangle_domain, quadrilateral_domain : (m,), (k,)  domains of the drawing, from 1
    segments : (s, 2) node numbers, along the direction of the edge that they lie on
    segment_edge : (s,) index into drawing.edges
    """

    nodes: Array
    triangles: Indices
    quadrilaterals: Indices
    triangle_domain: Indices
    quadrilateral_domain: Indices
    segments: Indices
    segment_edge: Indices

    @property
    def cells(self) -> tuple[Indices, Indices]:
        return self.triangles, self.quadrilaterals

    @property
    def element_count(self) -> int:
        return len(self.triangles) + len(self.quadrilaterals)


def side_keys(sides: NDArray[np.int64]) -> NDArray[np.int64]:
    """One number for each side (..., 2), whichever way it runs."""
    low, high = sides.min(axis=-1), sides.max(axis=-1)
    return np.asarray((low << 32) | high)


def cell_edges(cells: NDArray[np.integer[Any]]) -> NDArray[np.int64]:
    """Both ends of every side of every cell, (m, n, 2); side i runs from corner i to i + 1."""
    return np.stack((cells, np.roll(cells, -1, axis=1)), axis=2).astype(np.int64)


def middles(mesh: FlatMesh, drawing: Drawing) -> tuple[Array, list[Indices], Indices]:
    """One middle for every side of the mesh, on the true curve where the side lies on an edge.

    Returns
    -------
    places : (e, 2) [L]
    of_cells : for triangles and quadrilaterals (m, n), the middle of each side of each cell
    of_segments : (s,)
    """
    sides = [cell_edges(cells).reshape(-1, 2) for cells in mesh.cells]
    ends = np.concatenate((*sides, mesh.segments.astype(np.int64)))
    keys, inverse = np.unique(side_keys(ends), return_inverse=True)
    places = (mesh.nodes[keys >> 32] + mesh.nodes[keys & 0xFFFFFFFF]) / 2
    m, k = mesh.triangles.size, mesh.quadrilaterals.size
    of_segments = inverse[m + k :].astype(np.int32)
    places[of_segments] = drawing.table.project(mesh.segment_edge, places[of_segments])
    of_cells = [
        inverse[:m].reshape(-1, 3).astype(np.int32),
        inverse[m : m + k].reshape(-1, 4).astype(np.int32),
    ]
    return places, of_cells, of_segments


def split_into_triangles(mesh: FlatMesh, drawing: Drawing) -> FlatMesh:
    """Every triangle into four. The mesh has no quadrilaterals."""
    places, (of_triangles, _), of_segments = middles(mesh, drawing)
    (a, b, c), (ab, bc, ca) = mesh.triangles.T, (of_triangles + len(mesh.nodes)).T
    corners = [(a, ab, ca), (ab, b, bc), (ca, bc, c), (ab, bc, ca)]
    return replace(
        mesh,
        nodes=np.concatenate((mesh.nodes, places)),
        triangles=np.concatenate([np.stack(own, axis=1) for own in corners]).astype(np.int32),
        triangle_domain=np.tile(mesh.triangle_domain, 4),
        **_split_segments(mesh, of_segments),
    )


def split_into_quadrilaterals(mesh: FlatMesh, drawing: Drawing) -> FlatMesh:
    """Every triangle into three quadrilaterals, every quadrilateral into four."""
    places, of_cells, of_segments = middles(mesh, drawing)
    count = len(mesh.nodes) + len(places)
    new, domains, centres = [], [], []
    for cells, mids, domain in zip(
        mesh.cells, of_cells, (mesh.triangle_domain, mesh.quadrilateral_domain), strict=True
    ):
        centre = count + np.arange(len(cells))
        count += len(cells)
        centres.append(mesh.nodes[cells].mean(axis=1))
        sides = mids + len(mesh.nodes)
        for i in range(cells.shape[1]):
            new.append(np.stack((cells[:, i], sides[:, i], centre, sides[:, i - 1]), axis=1))
            domains.append(domain)
    return replace(
        mesh,
        nodes=np.concatenate((mesh.nodes, places, *centres)),
        triangles=np.empty((0, 3), np.int32),
        triangle_domain=np.empty(0, np.int32),
        quadrilaterals=np.concatenate(new).astype(np.int32),
        quadrilateral_domain=np.concatenate(domains),
        **_split_segments(mesh, of_segments),
    )


def _split_segments(mesh: FlatMesh, of_segments: Indices) -> dict[str, Indices]:
    middle = of_segments + np.int32(len(mesh.nodes))
    first = np.stack((mesh.segments[:, 0], middle), axis=1)
    last = np.stack((middle, mesh.segments[:, 1]), axis=1)
    return {
        "segments": np.concatenate((first, last)),
        "segment_edge": np.tile(mesh.segment_edge, 2),
    }

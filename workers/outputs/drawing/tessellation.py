"""Elements cut into small straight pieces, so that curved sides and quadratic fields look right.

Every element is cut on its own by its own shape functions: neighbours meet because they share the
nodes of their common side, and a stress that jumps between regions stays a jump.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from elements.contract import ElementType
from workers.analysis.mesh import Facets, Mesh

Array = NDArray[np.floating[Any]]

PIECE = 9.0  # length of a piece that the eye does not see as straight [pixels]
MOST_TRIANGLES = 300_000  # more cost time and are smaller than pixels
FINEST = 8  # pieces along the side of an element
CURVE_PIECES = 8  # pieces of a curved outline side


@dataclass(frozen=True, eq=False)
class Surface:
    """Triangles with values at their corners.

    values : (n, k)   whatever was interpolated; elements do not share corners
    triangles : (t, 3)
    counts : how many of the n belong to each block
    nearest : (t,)   number of the node of its element that is nearest to each triangle
    """

    values: Array
    triangles: NDArray[np.int64]
    counts: tuple[int, ...]
    nearest: NDArray[np.int64]


@cache
def lattice(triangle: bool, pieces: int) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Natural points (q, 2) and counter-clockwise triangles (t, 3) that cut an element."""
    i, j = np.meshgrid(np.arange(pieces + 1), np.arange(pieces + 1))
    number = np.full(i.shape, -1)
    inside = (i + j <= pieces) if triangle else np.ones_like(i, bool)
    number[inside] = np.arange(inside.sum())
    at = np.column_stack((i[inside], j[inside])) / pieces
    a, b, c, d = number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1]
    lower, upper = np.stack((a, b, d), -1).reshape(-1, 3), np.stack((b, c, d), -1).reshape(-1, 3)
    triangles = np.concatenate((lower, upper))
    return (at if triangle else 2 * at - 1), triangles[(triangles >= 0).all(axis=1)]


def tessellate(
    elements: Sequence[ElementType],
    connectivity: Sequence[NDArray[np.int32]],
    nodal: Array,
    pixels_per_length: float,
) -> Surface:
    """Interpolate nodal rows over all elements.

    Parameters
    ----------
    elements, connectivity : the type and the (m, n) node numbers of each block
    nodal : (P, k)   per node; the first two columns are the position where it is drawn [L]
    pixels_per_length : decides how finely elements are cut
    """
    room = MOST_TRIANGLES / max(1, sum(len(c) for c in connectivity))
    values, triangles, nearest, start = [], [], [], 0
    for element, nodes in zip(elements, connectivity, strict=True):
        pieces = _pieces(nodal[nodes[:, : element.corners], :2] * pixels_per_length, room)
        points, cut = lattice(element.is_triangle, pieces)
        shape = element.shape_functions(points)
        block = np.matmul(shape, nodal[nodes])  # (m, q, k)
        triangles.append(
            (cut + len(points) * np.arange(len(nodes))[:, None, None]).reshape(-1, 3) + start
        )
        values.append(block.reshape(-1, nodal.shape[1]))
        nearest.append(nodes[:, _nearest(element, points[cut].mean(axis=1))].ravel())
        start += len(values[-1])
    return Surface(
        np.concatenate(values),
        np.concatenate(triangles),
        tuple(len(v) for v in values),
        np.concatenate(nearest),
    )


def _nearest(element: ElementType, points: Array) -> NDArray[np.intp]:
    """Local number of the node nearest to each natural point."""
    away = np.linalg.norm(points[:, None] - element.natural_nodes, axis=2)
    return np.asarray(away.argmin(axis=1))


def _pieces(corners: Array, room: float) -> int:
    """Pieces along a side: none longer than the eye allows, as far as there is room."""
    sides = np.linalg.norm(corners - np.roll(corners, 1, axis=1), axis=2)
    wanted = int(np.ceil(sides.max() / PIECE))
    affordable = int(np.sqrt(room / 2))  # two triangles for each square of pieces
    return max(1, min(wanted, affordable, FINEST))


# --- sides of elements ---------------------------------------------------------------------------


def facet_curves(mesh: Mesh, facets: Facets, positions: Array, pieces: int = CURVE_PIECES) -> Array:
    """Points along facets, material on the left, (f, pieces + 1, 2).

    positions : (N, 2)   where the mesh nodes are drawn
    """
    t = np.linspace(0.0, 1.0, pieces + 1)
    line = np.column_stack((1 - t, t))
    parabola = np.column_stack(((1 - t) * (1 - 2 * t), t * (2 * t - 1), 4 * t * (1 - t)))
    curves = np.empty((len(facets), pieces + 1, 2))
    for group in mesh.facet_groups(facets):
        block = mesh.blocks[group.block]
        local = list(block.element.sides[group.side])
        nodes = block.connectivity[group.elements][:, local]
        curves[group.rows] = np.matmul(line if len(local) == 2 else parabola, positions[nodes])
    return curves


def loops(mesh: Mesh, facets: Facets) -> list[NDArray[np.intp]]:
    """Rows of the facets in the order in which they follow each other, one array for each run.

    A run that closes comes back to where it starts. Where several runs touch in one node, any
    way through is as good as another for drawing.
    """
    ends = mesh.facet_ends(facets).tolist()
    leaving: dict[int, list[int]] = {}
    for row, (start, _) in enumerate(ends):
        leaving.setdefault(start, []).append(row)
    reached = {end for _, end in ends}
    firsts = [row for row, (start, _) in enumerate(ends) if start not in reached]
    runs: list[NDArray[np.intp]] = []
    taken = [False] * len(ends)
    for first in firsts + list(range(len(ends))):
        if taken[first]:
            continue
        run, row = [], first
        while True:
            taken[row] = True
            run.append(row)
            following = [r for r in leaving.get(ends[row][1], ()) if not taken[r]]
            if not following:
                break
            row = following[0]
        runs.append(np.array(run, np.intp))
    return runs


def runs_of(mesh: Mesh, facets: Facets, positions: Array) -> list[Array]:
    """Polylines (n, 2) along the facets, joined where they follow each other."""
    curves = facet_curves(mesh, facets, positions)
    return [
        np.vstack((curves[run][:, :-1].reshape(-1, 2), curves[run[-1], -1:]))
        for run in loops(mesh, facets)
    ]


def region_borders(mesh: Mesh) -> Facets:
    """One facet of each pair that lies between two regions."""
    one, other = mesh.shared_facets()
    return one[mesh.facet_regions(one) != mesh.facet_regions(other)]


def all_sides(mesh: Mesh) -> Facets:
    """One facet for each element side of the mesh."""
    return mesh.facet_of(mesh.edges.facets[mesh.edges.first[:-1]])

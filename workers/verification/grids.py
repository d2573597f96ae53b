"""Structured meshes as the geometry of a job document, made here and not by the program's meshers.

A rectangle of nx by ny cells, carried over by a map; mid-side nodes follow the map too, unless the
sides are to be straight. Sides "bottom", "right", "top", "left" and points "SW", "SE", "NE", "NW"
are those of the rectangle.
"""

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from elements.registry import get

Array = NDArray[np.float64]
Map = Callable[[Array, Array], tuple[Array, Array]]
Json = dict[str, Any]

# Corners and mid-sides in half steps of a cell. Triangles: two to a cell, diagonals alternating.
_QUAD = [[(0, 0), (2, 0), (2, 2), (0, 2), (1, 0), (2, 1), (1, 2), (0, 1)]]
_RISING = [
    [(0, 0), (2, 0), (2, 2), (1, 0), (2, 1), (1, 1)],
    [(0, 0), (2, 2), (0, 2), (1, 1), (1, 2), (0, 1)],
]
_FALLING = [
    [(0, 0), (2, 0), (0, 2), (1, 0), (1, 1), (0, 1)],
    [(2, 0), (2, 2), (0, 2), (2, 1), (1, 2), (1, 1)],
]


def rectangle(length: float, height: float) -> Map:
    return lambda x, y: (length * x, height * y)


def annular(inner: float, outer: float) -> Map:
    """A quarter ring: x runs outwards, y from the x axis to the y axis."""

    def shape(x: Array, y: Array) -> tuple[Array, Array]:
        r, angle = inner + (outer - inner) * x, np.pi / 2 * y
        return r * np.cos(angle), r * np.sin(angle)

    return shape


def grid(kinds: str, nx: int, ny: int, shape: Map, *, straight: bool = False) -> Json:
    """A mesh on the unit square carried over by `shape`.

    kinds : an element name, or two as in "T3+Q4": the first fills the left half
    straight : mid-side nodes in the middle between their corners
    """
    names = kinds.split("+")
    pitch = 2 * ny + 1
    blocks: list[tuple[str, NDArray[np.int64]]] = []
    for number, name in enumerate(names):
        first, last = (nx * k // len(names) for k in (number, number + 1))
        blocks.append((name, _cells(name, range(first, last), ny, pitch)))
    used = np.unique(np.concatenate([cells.ravel() for _, cells in blocks]))
    place = np.full((2 * nx + 1) * pitch, -1)
    place[used] = np.arange(len(used))
    i, j = np.divmod(used, pitch)
    nodes = np.column_stack(shape(i / (2.0 * nx), j / (2.0 * ny)))
    if straight:
        for name, cells in blocks:
            _straighten(nodes, place[cells], name)
    return {
        "mesh": {
            "nodes": nodes,
            "blocks": [{"element": n, "connectivity": place[cells]} for n, cells in blocks],
            "sides": _sides(place, nx, ny, pitch),
            "points": {
                "SW": int(place[0]),
                "SE": int(place[2 * nx * pitch]),
                "NE": int(place[2 * nx * pitch + 2 * ny]),
                "NW": int(place[2 * ny]),
            },
        }
    }


def _cells(name: str, columns: range, ny: int, pitch: int) -> NDArray[np.int64]:
    """Lattice numbers of the nodes of all elements in some columns of cells, (m, n)."""
    element = get(name)
    i, j = (a.ravel() for a in np.meshgrid(np.array(columns), np.arange(ny), indexing="ij"))
    corner = 2 * i * pitch + 2 * j
    found = []
    rising = (i + j) % 2 == 1
    patterns = [(_QUAD, rising | True)]
    if element.is_triangle:
        patterns = [(_RISING, rising), (_FALLING, ~rising)]
    for pattern, chosen in patterns:
        for local in pattern:
            steps = np.array([a * pitch + b for a, b in local[: element.node_count]])
            found.append(corner[chosen][:, None] + steps)
    return np.concatenate(found)


def _straighten(nodes: Array, connectivity: NDArray[np.int64], name: str) -> None:
    for a, b, *middle in get(name).sides:
        for mid in middle:
            nodes[connectivity[:, mid]] = nodes[connectivity[:, [a, b]]].mean(axis=1)


def _sides(place: NDArray[np.int64], nx: int, ny: int, pitch: int) -> Json:
    """Node numbers of each element side, the mid-side node last where there is one."""
    along, up = np.arange(0, 2 * nx, 2) * pitch, np.arange(0, 2 * ny, 2)
    starts = {
        "bottom": (along, pitch),
        "top": (along + 2 * ny, pitch),
        "left": (up, 1),
        "right": (up + 2 * nx * pitch, 1),
    }
    return {
        name: [
            [int(place[node]) for node in (s, s + 2 * step, s + step) if place[node] >= 0]
            for s in first.tolist()
        ]
        for name, (first, step) in starts.items()
    }

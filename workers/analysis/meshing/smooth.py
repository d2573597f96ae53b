"""Guarded smoothing: corner nodes move to where the worst element around them is better.

Nodes are visited in independent sets (no two of a set share an element), so that each move is
judged alone and exactly, whatever the order: the result is deterministic and no element ever gets
worse than the worst of its neighbours was.
"""

from collections.abc import Callable
from dataclasses import replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.flat_mesh import FlatMesh

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# (k, 2) places, (k, 2) means of their neighbours and (k,) distances give (k, 2) places to try.
Candidates = Callable[[Array, Array, Array], list[Array]]

SWEEPS = 4  # of moves towards the middle of the neighbours; more gains little
SEARCH_SWEEPS = 12  # of the search around nodes whose elements stay poor
POOR = 0.6  # scaled Jacobian below which a node is worth a search
GOOD = 0.95  # nodes all of whose elements are better stay where they are
STEPS = (0.3, 0.1, 0.03)  # of the search, over the mean length of the node's elements
GAIN = 1e-6  # of the worst element around a node: less is not worth a move


# --- how good an element is ----------------------------------------------------------------------


def triangle_quality(corners: Array) -> Array:
    """Scaled Jacobian of triangles (..., 3, 2): 2/sqrt(3) times the sine of the smallest angle."""
    return _triangles(np.moveaxis(corners[..., 0], -1, 0), np.moveaxis(corners[..., 1], -1, 0))


def quadrilateral_quality(corners: Array) -> Array:
    """Scaled Jacobian of quadrilaterals (..., 4, 2): the least sine of the four corner angles."""
    return _quadrilaterals(np.moveaxis(corners[..., 0], -1, 0), np.moveaxis(corners[..., 1], -1, 0))


def _triangles(x: Array, y: Array) -> Array:
    """Corners x, y, (3, ...)."""
    ax, ay, bx, by = x[1] - x[0], y[1] - y[0], x[2] - x[0], y[2] - y[0]
    a, b, c = ax * ax + ay * ay, bx * bx + by * by, (bx - ax) ** 2 + (by - ay) ** 2
    # The product of the two longest sides: of all three over the shortest.
    longest = np.sqrt(a * b * c / np.minimum(np.minimum(a, b), c))
    return np.asarray(2.0 / np.sqrt(3.0) * (ax * by - ay * bx) / longest)


def _quadrilaterals(x: Array, y: Array) -> Array:
    """Corners x, y, (4, ...)."""
    dx = [x[i - 3] - x[i] for i in range(4)]  # of side i, from corner i to i + 1
    dy = [y[i - 3] - y[i] for i in range(4)]
    square = [u * u + v * v for u, v in zip(dx, dy, strict=True)]
    sines = [
        (dx[i - 1] * dy[i] - dy[i - 1] * dx[i]) / np.sqrt(square[i - 1] * square[i])
        for i in range(4)
    ]
    return np.minimum(np.minimum(sines[0], sines[1]), np.minimum(sines[2], sines[3]))


QUALITY = (triangle_quality, quadrilateral_quality)
_BY_COMPONENT = (_triangles, _quadrilaterals)


def qualities(mesh: FlatMesh) -> tuple[Array, Array]:
    """Scaled Jacobian of each triangle and each quadrilateral, 1 ideal."""
    return (
        triangle_quality(mesh.nodes[mesh.triangles]),
        quadrilateral_quality(mesh.nodes[mesh.quadrilaterals]),
    )


# --- smoothing -----------------------------------------------------------------------------------


def smooth(mesh: FlatMesh) -> FlatMesh:
    """Move the nodes that lie on no edge of the drawing; connectivity stays as it is."""
    free = np.ones(len(mesh.nodes), bool)
    free[mesh.segments] = False
    work = _Smoothing(mesh)
    groups = _groups(mesh, free)
    with np.errstate(divide="ignore", invalid="ignore"):  # trial places may flatten an element
        for _ in range(SWEEPS):
            for group in groups:
                work.visit(group, _to_the_middle, GOOD)
        for step in np.repeat(STEPS, SEARCH_SWEEPS // len(STEPS)):
            for group in groups:
                work.visit(group, _around(float(step)), POOR)
    return replace(mesh, nodes=work.nodes)


class _Part(NamedTuple):
    """Pairs of a node of a group and a cell of one kind around it, sorted by node.

    cell : (p,)       number of the cell
    corners : (n, p)  its nodes, the pair's own first
    row : (p,)        which node of the group
    """

    cell: Index
    corners: Index
    row: Index

    def least(self, values: Array, worst: Array) -> None:
        """Lower `worst` (k,) to the least of the values (p,) around each node."""
        if len(self.row):
            first = np.flatnonzero(np.diff(self.row, prepend=-1))
            rows = self.row[first]
            worst[rows] = np.minimum(worst[rows], np.minimum.reduceat(values, first))

    def restricted(self, seen: NDArray[np.bool_]) -> "_Part":
        """To nodes that are seen, (k,)."""
        kept = seen[self.row]
        row = (np.cumsum(seen) - 1)[self.row[kept]]
        return _Part(self.cell[kept], self.corners[:, kept], row)


class _Group(NamedTuple):
    """An independent set of nodes (k,), and what is around them, kind by kind."""

    nodes: Index
    parts: list[_Part]


class _Smoothing:
    """Node places, and the quality of every cell, kept up to date."""

    def __init__(self, mesh: FlatMesh) -> None:
        self.nodes = mesh.nodes.copy()
        self._quality = list(qualities(mesh))

    def visit(self, group: _Group, candidates: Candidates, enough: float) -> None:
        """Try places for every node of the group whose worst element is below `enough`."""
        worst = np.full(len(group.nodes), np.inf)
        for part, quality in zip(group.parts, self._quality, strict=True):
            part.least(quality[part.cell], worst)
        seen = worst < enough
        if not seen.any():
            return
        nodes, best = group.nodes[seen], worst[seen]
        parts = [part.restricted(seen) for part in group.parts]
        x, y = ([self.nodes[part.corners, axis] for part in parts] for axis in (0, 1))
        kept = [q[part.cell] for part, q in zip(parts, self._quality, strict=True)]
        places = self.nodes[nodes].copy()
        for tried in candidates(places.copy(), *_surroundings(parts, x, y, places)):
            self._try(parts, x, y, tried, best, places, kept)
        self.nodes[nodes] = places
        for part, quality, values in zip(parts, self._quality, kept, strict=True):
            quality[part.cell] = values

    @staticmethod
    def _try(
        parts: list[_Part],
        x: list[Array],
        y: list[Array],
        tried: Array,
        best: Array,
        places: Array,
        kept: list[Array],
    ) -> None:
        """Put nodes to the tried places where their worst element gets better."""
        least, found = np.full(len(best), np.inf), []
        for part, corner_x, corner_y, kind in zip(parts, x, y, _BY_COMPONENT, strict=True):
            corner_x[0], corner_y[0] = tried[part.row].T
            values = np.nan_to_num(kind(corner_x, corner_y), nan=-1.0)
            part.least(values, least)
            found.append(values)
        better = least > best + GAIN
        best[better], places[better] = least[better], tried[better]
        for part, values, new in zip(parts, kept, found, strict=True):
            rows = better[part.row]
            values[rows] = new[rows]


def _surroundings(
    parts: list[_Part], x: list[Array], y: list[Array], places: Array
) -> tuple[Array, Array]:
    """Mean of each node's neighbours (k, 2), and their mean distance (k,)."""
    count = len(places)
    total, number, reach = np.zeros((2, count)), np.zeros(count), np.zeros(count)
    for part, corner_x, corner_y in zip(parts, x, y, strict=True):
        number += 2 * np.bincount(part.row, minlength=count)
        for k in (1, -1):
            total[0] += np.bincount(part.row, corner_x[k], count)
            total[1] += np.bincount(part.row, corner_y[k], count)
            distance = np.hypot(corner_x[k] - corner_x[0], corner_y[k] - corner_y[0])
            reach += np.bincount(part.row, distance, count)
    return (total / number).T, reach / number


def _to_the_middle(now: Array, middle: Array, reach: Array) -> list[Array]:
    return [middle, (now + middle) / 2]


def _around(step: float) -> Candidates:
    """Eight places around the node, and the middle of its neighbours."""

    def candidates(now: Array, middle: Array, reach: Array) -> list[Array]:
        angles = np.arange(8) * np.pi / 4
        arms = np.stack((np.cos(angles), np.sin(angles)), axis=1)
        return [middle, *(now + step * reach[:, None] * arm for arm in arms)]

    return candidates


# --- independent sets -----------------------------------------------------------------------------


def _groups(mesh: FlatMesh, free: NDArray[np.bool_]) -> list[_Group]:
    """Free nodes in independent sets, each with the cells around them."""
    colour = _colours(mesh, free)
    groups: list[_Group] = [
        _Group(np.flatnonzero(colour == c), []) for c in range(colour.max(initial=-1) + 1)
    ]
    row = np.empty(len(free), np.intp)
    for group in groups:
        row[group.nodes] = np.arange(len(group.nodes))
    for cells in mesh.cells:
        n = cells.shape[1]
        flat = cells.ravel()
        inner = np.flatnonzero(colour[flat] >= 0)
        # By colour, then by node: each group is a slice.
        order = inner[np.lexsort((flat[inner], colour[flat[inner]]))]
        ends = np.searchsorted(colour[flat[order]], np.arange(len(groups) + 1))
        for c, group in enumerate(groups):
            cell, local = np.divmod(order[ends[c] : ends[c + 1]], n)
            turned = cells[cell, (local + np.arange(n)[:, None]) % n].astype(np.intp)
            group.parts.append(_Part(cell, turned, row[turned[0]]))
    return groups


def _colours(mesh: FlatMesh, free: NDArray[np.bool_]) -> NDArray[np.intp]:
    """A number for every free node, -1 for others; none twice in one cell.

    Each round numbers the nodes that come first, by lot, among all neighbours that still wait.

    References
    ----------
    Jones & Plassmann, "A parallel graph coloring heuristic", SIAM J. Sci. Comput. 14 (1993).
    """
    neighbours = []
    for cells in mesh.cells:
        n = cells.shape[1]
        neighbours += [cells[:, [i, j]] for i in range(n) for j in range(i)]
    pairs = np.concatenate(neighbours)
    pairs = pairs[free[pairs].all(axis=1)]
    lot = np.random.default_rng(0).permutation(len(free))
    colour = np.full(len(free), -1)
    waiting, number = free.copy(), 0
    while waiting.any():
        first, second = pairs.T
        behind = np.where(lot[first] < lot[second], first, second)
        chosen = waiting.copy()
        chosen[behind] = False
        colour[chosen] = number
        waiting &= ~chosen
        pairs = pairs[waiting[first] & waiting[second]]
        number += 1
    return colour

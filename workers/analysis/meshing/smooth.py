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
# (k, 2) places, (k, 2) means of their neighbours and (k,) distances give (k, 2) places to try.
Candidates = Callable[[Array, Array, Array], list[Array]]

SWEEPS = 4  # of moves towards the middle of the neighbours; more gains little
SEARCH_SWEEPS = 12  # of the search around nodes whose elements stay poor
POOR = 0.6  # scaled Jacobian below which a node is worth a search
GOOD = 0.95  # nodes all of whose elements are better stay where they are
STEPS = (0.3, 0.1, 0.03)  # of the search, over the mean length of the node's elements


def triangle_quality(corners: Array) -> Array:
    """Scaled Jacobian of triangles (..., 3, 2): 2/sqrt(3) times the sine of the smallest angle."""
    a, b, c = corners[..., 0, :], corners[..., 1, :], corners[..., 2, :]
    lengths = np.stack([np.linalg.norm(v, axis=-1) for v in (b - a, c - b, a - c)], axis=-1)
    longest = lengths.prod(axis=-1) / lengths.min(axis=-1)
    return 2.0 / np.sqrt(3.0) * _cross(b - a, c - a) / longest


def quadrilateral_quality(corners: Array) -> Array:
    """Scaled Jacobian of quadrilaterals (..., 4, 2): the least sine of the four corner angles."""
    sides = np.roll(corners, -1, axis=-2) - corners
    lengths = np.linalg.norm(sides, axis=-1)
    before = np.roll(sides, 1, axis=-2)
    return (_cross(before, sides) / (lengths * np.roll(lengths, 1, axis=-1))).min(axis=-1)


QUALITY = (triangle_quality, quadrilateral_quality)


def qualities(mesh: FlatMesh) -> tuple[Array, Array]:
    """Scaled Jacobian of each triangle and each quadrilateral, 1 ideal."""
    return (
        triangle_quality(mesh.nodes[mesh.triangles]),
        quadrilateral_quality(mesh.nodes[mesh.quadrilaterals]),
    )


def smooth(mesh: FlatMesh) -> FlatMesh:
    """Move the nodes that lie on no edge of the drawing; connectivity stays as it is."""
    nodes = mesh.nodes.copy()
    free = np.ones(len(nodes), bool)
    free[mesh.segments] = False
    incidence = _incidence(mesh)
    groups = [
        [_restrict(pairs, group) for pairs in incidence] for group in _independent(mesh, free)
    ]
    with np.errstate(divide="ignore", invalid="ignore"):  # trial places may flatten an element
        for _ in range(SWEEPS):
            for parts in groups:
                _visit(nodes, parts, _to_the_middle, GOOD)
        for step in np.repeat(STEPS, SEARCH_SWEEPS // len(STEPS)):
            for parts in groups:
                _visit(nodes, parts, _around(float(step)), POOR)
    return replace(mesh, nodes=nodes)


# --- incidence and independent sets ---------------------------------------------------------------


class _Pairs(NamedTuple):
    """Nodes and the cells of one kind around them: one row for each pair, sorted by node.

    node, cell, local : (p,) node number, its cell's corners (p, n), its place among them
    """

    node: NDArray[np.intp]
    corners: NDArray[np.intp]
    local: NDArray[np.intp]


def _incidence(mesh: FlatMesh) -> list[_Pairs]:
    pairs = []
    for cells in mesh.cells:
        order = np.argsort(cells, axis=None, kind="stable")
        cell, local = np.divmod(order, cells.shape[1])
        pairs.append(
            _Pairs(cells.ravel()[order].astype(np.intp), cells[cell].astype(np.intp), local)
        )
    return pairs


def _restrict(pairs: _Pairs, group: NDArray[np.bool_]) -> _Pairs:
    rows = group[pairs.node]
    return _Pairs(pairs.node[rows], pairs.corners[rows], pairs.local[rows])


def _independent(mesh: FlatMesh, free: NDArray[np.bool_]) -> list[NDArray[np.bool_]]:
    """Sets of free nodes, no two of a set in one element (Jones & Plassmann 1993)."""
    neighbours = []
    for cells in mesh.cells:
        n = cells.shape[1]
        neighbours += [cells[:, [i, j]] for i in range(n) for j in range(i)]
    pairs = np.concatenate(neighbours)
    pairs = pairs[free[pairs].all(axis=1)]
    priority = np.random.default_rng(0).permutation(len(free))
    waiting, groups = free.copy(), []
    while waiting.any():
        first, second = pairs.T
        behind = np.where(priority[first] < priority[second], first, second)
        group = waiting.copy()
        group[behind] = False
        groups.append(group)
        waiting &= ~group
        pairs = pairs[waiting[first] & waiting[second]]
    return groups


# --- one visit to an independent set --------------------------------------------------------------


def _visit(nodes: Array, parts: list[_Pairs], candidates: Candidates, enough: float) -> None:
    """Try candidate places for every node of the set whose worst element is below `enough`."""
    worst = np.full(len(nodes), np.inf)
    for pairs, quality in zip(parts, QUALITY, strict=True):
        np.minimum.at(worst, pairs.node, quality(nodes[pairs.corners]))
    seen = np.flatnonzero(worst < enough)
    if not len(seen):
        return
    chosen = np.zeros(len(nodes), bool)
    chosen[seen] = True
    parts = [_restrict(pairs, chosen) for pairs in parts]
    middle, reach = _surroundings(nodes, parts, seen)
    places = candidates(nodes[seen], middle, reach)
    row = np.empty(len(nodes), np.intp)
    row[seen] = np.arange(len(seen))
    best, at = worst[seen].copy(), nodes[seen].copy()
    for place in places:
        least = np.full(len(seen), np.inf)
        for pairs, quality in zip(parts, QUALITY, strict=True):
            rows = row[pairs.node]
            corners = nodes[pairs.corners]
            corners[np.arange(len(rows)), pairs.local] = place[rows]
            np.minimum.at(least, rows, np.nan_to_num(quality(corners), nan=-1.0))
        better = least > best + 1e-6
        best[better], at[better] = least[better], place[better]
    nodes[seen] = at


def _surroundings(nodes: Array, parts: list[_Pairs], seen: NDArray[np.intp]) -> tuple[Array, Array]:
    """Mean of each node's neighbours (k, 2), and their mean distance (k,)."""
    total, count = np.zeros_like(nodes), np.zeros(len(nodes))
    reach = np.zeros(len(nodes))
    for pairs in parts:
        n, rows = pairs.corners.shape[1], np.arange(len(pairs.node))
        for turn in (1, -1):
            other = nodes[pairs.corners[rows, (pairs.local + turn) % n]]
            for axis in (0, 1):
                total[:, axis] += np.bincount(pairs.node, other[:, axis], len(nodes))
            distance = np.linalg.norm(other - nodes[pairs.node], axis=1)
            reach += np.bincount(pairs.node, distance, len(nodes))
            count += np.bincount(pairs.node, minlength=len(nodes))
    return total[seen] / count[seen, None], reach[seen] / count[seen]


def _to_the_middle(now: Array, middle: Array, reach: Array) -> list[Array]:
    return [middle, (now + middle) / 2]


def _around(step: float) -> Candidates:
    """Eight places around the node, and the middle of its neighbours."""

    def candidates(now: Array, middle: Array, reach: Array) -> list[Array]:
        angles = np.arange(8) * np.pi / 4
        arms = np.stack((np.cos(angles), np.sin(angles)), axis=1)
        return [middle, *(now + step * reach[:, None] * arm for arm in arms)]

    return candidates


def _cross(a: Array, b: Array) -> Array:
    return a[..., 0] * b[..., 1] - a[..., 1] * b[..., 0]

"""Where everything goes: matrix entries into fronts, and what a front leaves into its parent.

All positions are found at once, before the factorisation; they hold for every matrix of one
pattern. A front of k own and b border dofs has a panel of k rows (own dofs) and k + b columns, and
leaves a b x b matrix to its parent. From here on everything is counted in dofs.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.multifrontal.symbolic import Fronts

Indices = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Layout:
    """Positions for the numerical factorisation, two dofs for each node.

    own, border : (s,)             dofs eliminated by each front, and on its border
    parent : (s,)                  -1 for a root
    border_dofs : (b,)             border dofs of all fronts, front by front
    border_first : (s + 1,)        where the border of each front starts
    entries : (e,)                 blocks of the matrix on and right of the diagonal
    targets : (4 e,)               place of each number of these blocks in the panel of its front
    entry_first : (s + 1,)         where the blocks of each front start
    in_parent : (b,)               place of each border dof among all dofs of the parent
    run_first : (s + 1,)           runs of each border that are contiguous in the parent too:
    run_source, run_target, run_length : (r,)
    """

    own: Indices
    border: Indices
    parent: Indices
    border_dofs: Indices
    border_first: Indices
    entries: Indices
    targets: NDArray[np.int32]
    entry_first: Indices
    in_parent: Indices
    run_first: Indices
    run_source: Indices
    run_target: Indices
    run_length: Indices


def lay_out(fronts: Fronts, indptr: NDArray, indices: NDArray) -> Layout:
    """Find all positions for a matrix of 2x2 blocks with the given pattern, in the fronts' order.

    Raises
    ------
    LookupError   the pattern has an entry that the fronts have no place for.
    """
    own, border = np.diff(fronts.first), np.diff(fronts.border_first)
    keys = np.repeat(np.arange(fronts.count), border) * fronts.node_count + fronts.border
    entries, targets, entry_first = _entries(fronts, keys, indptr, indices)
    owner = np.repeat(np.arange(fronts.count), border)
    in_parent = _places(fronts, keys, fronts.parent[owner], fronts.border)
    in_parent = _dofs(in_parent)
    first = 2 * fronts.border_first
    runs = _runs(in_parent, first, fronts.parent, 2 * own)
    return Layout(
        own=2 * own,
        border=2 * border,
        parent=fronts.parent,
        border_dofs=_dofs(fronts.border),
        border_first=first,
        entries=entries,
        targets=targets,
        entry_first=entry_first,
        in_parent=in_parent,
        run_first=np.searchsorted(runs, first),
        run_source=runs - np.repeat(first[:-1], 2 * border)[runs],
        run_target=in_parent[runs],
        run_length=np.diff(runs, append=len(in_parent)),
    )


def _dofs(nodes: Indices) -> Indices:
    return (2 * nodes[:, None] + np.arange(2)).ravel()


def _places(fronts: Fronts, keys: Indices, front: Indices, node: Indices) -> Indices:
    """Place of nodes among the own, then border nodes of given fronts."""
    inside = node < fronts.first[front + 1]
    place = node - fronts.first[front]
    outside = np.flatnonzero(~inside)
    wanted = front[outside] * fronts.node_count + node[outside]
    found = np.searchsorted(keys, wanted)
    if len(wanted) and (found.max() >= len(keys) or not np.array_equal(keys[found], wanted)):
        raise LookupError("the matrix has an entry outside the fronts of its own mesh")
    owner = front[outside]
    place[outside] = (
        found - fronts.border_first[owner] + fronts.first[owner + 1] - fronts.first[owner]
    )
    return place


def _entries(
    fronts: Fronts, keys: Indices, indptr: NDArray, indices: NDArray
) -> tuple[Indices, NDArray[np.int32], Indices]:
    """Blocks on and right of the diagonal, and where their numbers go in the panels."""
    row = np.repeat(np.arange(fronts.node_count), np.diff(indptr))
    entries = np.flatnonzero(indices >= row)
    row, column = row[entries], indices[entries].astype(np.int64)
    front = fronts.front_of[row]
    width = 2 * (np.diff(fronts.first) + np.diff(fronts.border_first))[front]
    corner = 2 * (row - fronts.first[front]) * width
    corner += 2 * _places(fronts, keys, front, column)
    targets = np.empty((len(entries), 2, 2), np.int32)
    for i in (0, 1):
        for j in (0, 1):
            targets[:, i, j] = corner + i * width + j
    entry_first = np.searchsorted(front, np.arange(fronts.count + 1))
    return entries, targets.ravel(), entry_first


def _runs(in_parent: Indices, first: Indices, parent: Indices, own: Indices) -> Indices:
    """Where contiguous runs start; a run ends with its front, and with the parent's own dofs."""
    starts = np.ones(len(in_parent), dtype=bool)
    starts[1:] = in_parent[1:] != in_parent[:-1] + 1
    starts[first[:-1][first[:-1] < len(in_parent)]] = True
    owner = np.repeat(np.arange(len(own)), np.diff(first))
    starts |= in_parent == own[parent[owner]]
    return np.flatnonzero(starts)

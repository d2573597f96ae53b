"""The numerical factorisation: fronts are filled, eliminated and handed up, children first.

Panels are stored by rows of own dofs, so the same memory read by columns is the lower triangle that
LAPACK works on: row-major upper is column-major lower.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg.blas import dsyrk, dtrsm
from scipy.linalg.lapack import dpotrf

from elements.errors import FishplateError
from workers.analysis.multifrontal.layout import Layout

Array = NDArray[np.float64]

# Adding a child run by run costs about 1 us for each pair of runs, adding it by index lists 6 ns
# for each number and 3 us at once (measured).
PAIR_COST, NUMBER_COST, LIST_COST = 1e-6, 6e-9, 3e-6


class NotPositiveDefiniteError(FishplateError, ArithmeticError):
    """A pivot is not positive.

    row : the dof, in elimination order.
    """

    def __init__(self, row: int) -> None:
        self.row = row
        super().__init__(f"the pivot of row {row} is not positive")


@dataclass(frozen=True, eq=False)
class Triangles:
    """The factor, front by front.

    diagonal : (k, k) lower triangle of the front's own dofs
    below : (b, k) rows of its border dofs; None where it has no border
    """

    diagonal: list[Array]
    below: list[Array | None]


def eliminate(layout: Layout, blocks: Array) -> Triangles:
    """Factorise the matrix with the blocks (nnz, 2, 2) of its pattern.

    Raises
    ------
    NotPositiveDefiniteError   names the dof at which the factorisation ends.
    """
    values = blocks[layout.entries].ravel()
    own, border = layout.own.tolist(), layout.border.tolist()
    first = (4 * layout.entry_first).tolist()
    children = _children(layout)
    left: dict[int, Array] = {}  # what each front leaves to its parent, until that takes it
    diagonal: list[Array] = []
    below: list[Array | None] = []
    merge = _Merge(layout)
    for front, (k, b) in enumerate(zip(own, border, strict=True)):
        panel = np.zeros(k * (k + b))
        entries = slice(first[front], first[front + 1])
        panel[layout.targets[entries]] = values[entries]
        panel = panel.reshape(k, k + b)
        update = None
        if children[front]:
            update = np.zeros((b, b))
            for child in children[front]:
                merge(child, left.pop(child), panel, update)
        L, info = dpotrf(panel[:, :k].T, lower=1, clean=0)
        if info:
            raise NotPositiveDefiniteError(sum(own[:front]) + info - 1)
        diagonal.append(L)
        rows = None
        if b:
            rows = dtrsm(1.0, L, _columns(panel[:, k:]), side=1, lower=1, trans_a=1, overwrite_b=1)
            if update is None:
                left[front] = dsyrk(-1.0, rows, lower=1).T
            else:
                left[front] = dsyrk(-1.0, rows, beta=1.0, c=update.T, lower=1, overwrite_c=1).T
        below.append(rows)
    return Triangles(diagonal, below)


def _columns(panel: Array) -> Array:
    """The transposed panel, column-major."""
    return np.asfortranarray(panel.T)


def _children(layout: Layout) -> list[list[int]]:
    children: list[list[int]] = [[] for _ in layout.own]
    for front, parent in enumerate(layout.parent.tolist()):
        if parent >= 0:
            children[parent].append(front)
    return children


class _Merge:
    """Adds what a child leaves (upper triangle, by rows) to the panel and update of its parent."""

    def __init__(self, layout: Layout) -> None:
        self._own = layout.own.tolist()
        self._parent = layout.parent.tolist()
        self._first = layout.border_first.tolist()
        self._in_parent = layout.in_parent
        self._run_first = layout.run_first.tolist()
        self._source = layout.run_source.tolist()
        self._target = layout.run_target.tolist()
        self._length = layout.run_length.tolist()

    def __call__(self, child: int, left: Array, panel: Array, update: Array) -> None:
        runs = self._run_first[child + 1] - self._run_first[child]
        by_list = LIST_COST + NUMBER_COST * len(left) ** 2
        if PAIR_COST * runs * (runs + 1) / 2 < by_list:
            self._by_runs(child, left, panel, update)
        else:
            self._by_list(child, left, panel, update)

    def _by_runs(self, child: int, left: Array, panel: Array, update: Array) -> None:
        k = self._own[self._parent[child]]
        part = slice(self._run_first[child], self._run_first[child + 1])
        runs = list(zip(self._source[part], self._target[part], self._length[part], strict=True))
        for i, (source, target, length) in enumerate(runs):
            rows = left[source : source + length]
            into, shift = (panel, 0) if target < k else (update, k)
            place = into[target - shift : target - shift + length]
            for from_, to, width in runs[i:]:
                place[:, to - shift : to - shift + width] += rows[:, from_ : from_ + width]

    def _by_list(self, child: int, left: Array, panel: Array, update: Array) -> None:
        k = self._own[self._parent[child]]
        places = self._in_parent[self._first[child] : self._first[child + 1]]
        inside = int(np.searchsorted(places, k))
        panel[places[:inside, None], places] += left[:inside]
        border = places[inside:] - k
        if len(border):
            update[border[:, None], border] += left[inside:, inside:]

"""Sizes in narrow gaps: between edges of a drawing that come close without touching.

The mesh library follows chords, so its boundary crosses itself where two edges come closer than a
chord's rise; and a ligament deserves elements across it. Gaps through nothing (a slot's width) need
only the first.
"""

from typing import NamedTuple

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.curve_table import CurveTable, cross, norm
from workers.analysis.meshing.drawing import OUTSIDE, Drawing

Array = NDArray[np.float64]
Index = NDArray[np.intp]

FINEST = (2e-5, 2e-4)  # of the diagonal: elements across a gap do not get smaller than this;
MANY = 20_000  # the second, if the first makes more points
POINTS_LIMIT = 200_000  # bounds the time
PAIRS = 2_000_000  # of places and edges looked at together; bounds the memory


def gap_points(drawing: Drawing, general: float, per_gap: int) -> Array:
    """Where the size must be less than the general one: x, y, size; (k, 3).

    Every edge is looked at from its middle, then from the middles of its halves, and so on where
    it comes near another.

    Parameters
    ----------
    drawing : in the mesher's coordinates, whose diagonal is 1
    per_gap : elements wanted across the material in a gap
    """
    found = _points(drawing, general, per_gap, FINEST[0], MANY)
    if len(found) >= MANY:
        found = _points(drawing, general, per_gap, FINEST[1], POINTS_LIMIT)
    return found


def _points(drawing: Drawing, general: float, per_gap: int, finest: float, limit: int) -> Array:
    look = _Look(drawing, per_gap, finest)
    lengths = drawing.table.lengths
    owner = np.arange(len(drawing.edges))
    low, high = np.zeros(len(owner)), np.ones(len(owner))
    found, count = [np.empty((0, 3))], 0
    while len(owner) and count < limit:
        middle, reach = (low + high) / 2, (high - low) * lengths[owner]
        places = drawing.table.at(owner, middle)
        seen = look.from_places(owner, middle, places, general * per_gap + reach)
        narrow = seen.size < general
        fine = narrow & (reach <= np.maximum(seen.size, finest))
        found.append(np.column_stack((places, seen.size))[fine])
        count += int(fine.sum())
        # A stretch none of which comes near another edge needs no more places.
        near = ~fine & (seen.gap - reach / 2 < general * per_gap) & (reach > finest)
        owner, low, middle, high = owner[near], low[near], middle[near], high[near]
        owner = np.concatenate((owner, owner))
        low, high = np.concatenate((low, middle)), np.concatenate((middle, high))
    return np.concatenate(found)


class _Seen(NamedTuple):
    """From each place: the narrowest gap that matters, and the size that gaps ask for."""

    gap: Array
    size: Array


class _Look:
    """Looks from places on edges at the other edges that those do not touch."""

    def __init__(self, drawing: Drawing, per_gap: int, finest: float) -> None:
        self._table: CurveTable = drawing.table
        self._per_gap = per_gap
        self._finest = finest
        self._tree = shapely.STRtree(self._table.polylines())
        vertices = np.concatenate((self._table.start, self._table.end))
        numbers = np.unique(vertices, axis=0, return_inverse=True)[1].reshape(2, -1)
        self._ends = numbers.T
        self._left = np.array([edge.left for edge in drawing.edges]) != OUTSIDE
        self._right = np.array([edge.right for edge in drawing.edges]) != OUTSIDE

    def from_places(self, owner: Index, t: Array, places: Array, reach: Array) -> _Seen:
        gap, size = np.full(len(owner), np.inf), np.full(len(owner), np.inf)
        points = shapely.points(places)
        step = max(1, PAIRS // max(1, len(self._table)))
        for first in range(0, len(owner), step):
            part = slice(first, first + step)
            row, other = self._tree.query(
                points[part], predicate="dwithin", distance=reach[part] + self._table.rise
            )
            row += first
            self._pairs(owner[row], t[row], places[row], other, row, gap, size)
        return _Seen(gap, size)

    def _pairs(
        self, one: Index, t: Array, places: Array, other: Index, row: Index, gap: Array, size: Array
    ) -> None:
        """Lower `gap` and `size` at the rows of pairs of a place on an edge and another edge."""
        ends = (self._ends[one][:, :, None], self._ends[other][:, None, :])
        apart = ~(ends[0] == ends[1]).any(axis=(1, 2)) & ~self._back_to_back(one, other)
        one, t, places, other, row = (a[apart] for a in (one, t, places, other, row))
        towards = self._table.nearest(other, places) - places
        width = norm(towards)
        leftward = cross(self._table.tangent(one, t), towards) > 0
        material = np.where(leftward, self._left[one], self._right[one])
        wanted = np.where(material, np.maximum(width / self._per_gap, self._finest), np.inf)
        # The rise of a chord s of radius r is s^2 / 8 r; s is twice the size, since the library
        # meshes coarsely, and a quarter of the width leaves room for chords on both sides.
        radius = np.minimum(_bend(self._table, one), _bend(self._table, other))
        np.minimum.at(gap, row, width)
        np.minimum.at(size, row, np.minimum(wanted, np.sqrt(radius * width / 2)))

    def _back_to_back(self, one: Index, other: Index) -> NDArray[np.bool_]:
        """Pairs of straight edges with nothing but void between them, as seen from the first."""
        table = self._table
        along = table.end[one] - table.start[one]
        sides = [cross(along, p[other] - table.start[one]) for p in (table.start, table.end)]
        left = (sides[0] >= 0) & (sides[1] >= 0) & ~self._left[one]
        right = (sides[0] <= 0) & (sides[1] <= 0) & ~self._right[one]
        return (left | right) & ~table.is_arc[one] & ~table.is_arc[other]


def _bend(table: CurveTable, index: Index) -> Array:
    """Radius of curvature of edges, (p,)."""
    return np.where(table.is_arc[index], table.radius[index], np.inf)

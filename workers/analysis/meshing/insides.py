"""Which loops a place lies in, exactly, arcs included.

A ray to the right of the place crosses an odd number of pieces of a loop that it lies in. Arcs are
cut at their highest and lowest places first, so that each piece crosses a ray at most once.
"""

from collections.abc import Iterator

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.arrangement import Arrangement
from workers.analysis.meshing.curve_table import CurveTable

Array = NDArray[np.float64]
Index = NDArray[np.intp]

CHUNK = 1_000_000  # pairs of place and piece at a time, which bounds the memory


class Insides:
    """Answers for the loops of one arrangement."""

    def __init__(self, arrangement: Arrangement) -> None:
        table = arrangement.table
        self._curves = table
        self._start, self._end, self._of, self._right = _monotone(table)
        count = np.bincount(self._of, minlength=len(table))
        first = np.cumsum(count) - count
        self._rising = [
            np.concatenate([np.arange(first[p], first[p] + count[p]) for p in way])
            if len(way)
            else np.empty(0, np.intp)
            for way in arrangement.ways
        ]
        self._tree = shapely.STRtree([self._box(rows) for rows in self._rising])

    def _box(self, rows: Index) -> shapely.Geometry:
        if not len(rows):
            return shapely.Point()
        places = np.concatenate((self._start[rows], self._end[rows]))
        # An upright half circle reaches beyond its ends sideways.
        curve = self._of[rows]
        reach = self._curves.radius[curve]
        sideways = self._curves.centre[curve, 0]
        low = min(places[:, 0].min(), (sideways - reach).min())
        high = max(places[:, 0].max(), (sideways + reach).max())
        return shapely.box(low, places[:, 1].min(), high, places[:, 1].max())

    def of(self, places: Array) -> tuple[Index, Index]:
        """Pairs (place, loop) with the place inside the loop; no place may lie on a border."""
        place, loop = self._tree.query(shapely.points(places))
        inside = np.zeros(len(place), bool)
        for pairs, rows in self._chunks(loop):
            hit = self._crossed(places[place[pairs]], rows)
            np.logical_xor.at(inside, pairs[hit], True)
        return place[inside], loop[inside]

    def _chunks(self, loop: Index) -> Iterator[tuple[Index, Index]]:
        """Pair numbers and rising pieces, each pair with every piece of its loop."""
        pairs: list[Index] = []
        rows: list[Index] = []
        size = 0
        for number, which in enumerate(loop):
            own = self._rising[which]
            pairs.append(np.full(len(own), number))
            rows.append(own)
            size += len(own)
            if size > CHUNK:
                yield np.concatenate(pairs), np.concatenate(rows)
                pairs, rows, size = [], [], 0
        if size:
            yield np.concatenate(pairs), np.concatenate(rows)

    def _crossed(self, places: Array, rows: Index) -> NDArray[np.bool_]:
        """Whether the ray to the right of each place crosses the piece."""
        x, y = places.T
        start, end = self._start[rows], self._end[rows]
        spans = (start[:, 1] > y) != (end[:, 1] > y)
        crossed = np.zeros(len(rows), bool)
        k = np.flatnonzero(spans)
        start, end, curve = start[k], end[k], self._of[rows[k]]
        rise = end[:, 1] - start[:, 1]
        at_y = start[:, 0] + (y[k] - start[:, 1]) / rise * (end[:, 0] - start[:, 0])
        height = y[k] - self._curves.centre[curve, 1]
        half = np.sqrt(np.maximum(self._curves.radius[curve] ** 2 - height**2, 0.0))
        on_arc = self._curves.centre[curve, 0] + self._right[rows[k]] * half
        at_y = np.where(self._curves.is_arc[curve], on_arc, at_y)
        crossed[k] = at_y > x[k]
        return crossed


def _monotone(curves: CurveTable) -> tuple[Array, Array, Index, Array]:
    """Curves cut where they turn from rising to falling: start, end, curve, which half (+1, -1).

    Ends are shared bitwise, so that no ray slips between two pieces.
    """
    index = np.arange(len(curves))
    low = np.minimum(curves.first, curves.first + curves.sweep)
    high = np.maximum(curves.first, curves.first + curves.sweep)
    # Turns are at pi/2 + k pi.
    k = np.floor(low / np.pi - 0.5) + 1
    turns = []
    while True:
        angle = np.pi / 2 + k * np.pi
        more = curves.is_arc & (angle < high)
        if not more.any():
            break
        turns.append((index[more], angle[more], k[more]))
        k = k + 1
    which = np.concatenate([index, *(t[0] for t in turns)])
    angle = np.concatenate([low, *(t[1] for t in turns)])
    parity = np.concatenate([np.full(len(index), np.nan), *(t[2] for t in turns)])
    order = np.lexsort((angle, which))
    which, angle, parity = which[order], angle[order], parity[order]
    is_end = np.isnan(parity)
    top = curves.centre[which] + np.stack(
        (np.zeros(len(which)), np.where(parity % 2 == 0, 1.0, -1.0) * curves.radius[which]), axis=1
    )
    forward = (curves.sweep[which] >= 0)[:, None]
    first = np.where(forward, curves.start[which], curves.end[which])
    last = np.where(forward, curves.end[which], curves.start[which])
    start = np.where(is_end[:, None], first, top)
    following = np.roll(which, -1) == which
    following[-1:] = False
    end = np.where(following[:, None], np.roll(start, -1, axis=0), last)
    until = np.where(following, np.roll(angle, -1), high[which])
    right = np.sign(np.cos((angle + until) / 2))
    return start, end, which.astype(np.intp), np.where(right == 0, 1.0, right)

"""Which of many points coincide, which of many segments come near each other: sort and sweep.

Both sort along one direction that no drawing uses, so that a row of points on an upright or level
line does not fall together in the sort.
"""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Pairs = NDArray[np.intp]

SKEW = np.array([np.cos(0.7391), np.sin(0.7391)])
ACROSS = np.array([-SKEW[1], SKEW[0]])
CHUNK = 1_000_000  # candidate pairs at a time, which bounds the memory


def close_pairs(points: Array, tolerance: float, most: int | None = None) -> Pairs:
    """Pairs of points at most `tolerance` apart, (k, 2), lower number first, sorted.

    `most` stops the search soon after that many: enough to report, when thousands coincide.
    """
    along = points @ SKEW
    order = np.argsort(along)
    along, across = along[order], (points @ ACROSS)[order]
    found = [np.empty((0, 2), np.intp)]
    count, step, near = 0, 1, np.arange(len(points))
    # What is not within reach of its next neighbour in the sort is not of any further one.
    while len(near) and (most is None or count < most):
        near = near[: np.searchsorted(near, len(points) - step)]
        near = near[along[near + step] - along[near] <= tolerance]
        level = near[np.abs(across[near + step] - across[near]) <= tolerance]
        apart = np.hypot(across[level + step] - across[level], along[level + step] - along[level])
        close = level[apart <= tolerance]
        found.append(np.sort(np.stack((order[close], order[close + step]), axis=1), axis=1))
        count, step = count + len(close), step + 1
    pairs = np.concatenate(found)
    return pairs[np.lexsort((pairs[:, 1], pairs[:, 0]))]


def segment_candidates(start: Array, end: Array, tolerance: float) -> Iterator[Pairs]:
    """Pairs of segments whose skew boxes come within `tolerance`, in chunks of (k, 2), lower first.

    Parameters
    ----------
    start, end : (s, 2)   ends of the segments [L]
    """
    low, high = _extent(start, end, SKEW)
    below, above = _extent(start, end, ACROSS)
    order = np.argsort(low)
    low, high, below, above = low[order], high[order], below[order], above[order]
    # In order of `low`, the partners of segment i are i + 1 ... last[i].
    last = np.searchsorted(low, high + tolerance, side="right")
    counts = last - np.arange(len(low)) - 1
    reached = np.cumsum(counts)
    row = 0
    while row < len(low):
        done = reached[row - 1] if row else 0
        until = max(row + 1, int(np.searchsorted(reached, done + CHUNK, side="right")))
        one = np.repeat(np.arange(row, until), counts[row:until])
        begins = np.repeat(reached[row:until] - counts[row:until], counts[row:until])
        other = one + 1 + np.arange(len(one)) + done - begins
        near = (below[one] <= above[other] + tolerance) & (below[other] <= above[one] + tolerance)
        yield np.sort(np.stack((order[one[near]], order[other[near]]), axis=1), axis=1)
        row = until


def _extent(start: Array, end: Array, direction: Array) -> tuple[Array, Array]:
    one, other = start @ direction, end @ direction
    return np.minimum(one, other), np.maximum(one, other)

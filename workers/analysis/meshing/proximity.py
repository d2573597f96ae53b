"""Where curves come close: crossings and nearest places of pairs of lines and arcs, exactly.

The nearest places of two curves are a crossing, an end of one against the other, or lie on the
common normal (through the centres of arcs). All are worked out in closed form.
"""

from typing import NamedTuple

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.curve_table import CurveTable, cross, dot, norm

Array = NDArray[np.float64]
Index = NDArray[np.intp]


CHUNK = 64  # searches at a time, which bounds the memory where everything is in one place
USUAL = 64  # neighbours of each place or curve, on average, beyond which a drawing is crowded
ALWAYS = 100_000  # pairs that are never too many


class CrowdedError(ValueError):
    """Far too many things are in one place, whose coordinates are `at`, (2,)."""

    def __init__(self, at: Array) -> None:
        self.at = at
        super().__init__(f"too many places or sides near {at}")


class Close(NamedTuple):
    """Nearest places of pairs of curves: (p, 2) on the first and on the second, distance (p,)."""

    first: Array
    second: Array
    distance: Array


def close_pairs(curves: CurveTable, reach: float) -> tuple[Index, Index]:
    """Pairs i < j of curves that may come within a distance of each other (a few too many).

    Raises
    ------
    CrowdedError   nearly every curve is near nearly every other.
    """
    lines = curves.polylines()
    i, j = near_pairs(lines, lines, reach + 2 * curves.rise)
    return i[i < j], j[i < j]


def close_places(curves: CurveTable, places: Array, reach: float) -> tuple[Index, Index]:
    """Pairs (place, curve) with the place within a distance of the curve.

    Raises
    ------
    CrowdedError   nearly every place is near nearly every curve.
    """
    place, curve = near_pairs(shapely.points(places), curves.polylines(), reach + curves.rise)
    near = curves.distance(curve, places[place]) <= reach
    return place[near], curve[near]


def near_pairs(
    one: NDArray[np.object_], other: NDArray[np.object_], reach: float
) -> tuple[Index, Index]:
    """Numbers of shapes, one of each kind, that are within a distance of each other.

    Raises
    ------
    CrowdedError   there are so many that only a mistake, or malice, explains them.
    """
    tree = shapely.STRtree(other)
    pairs: list[NDArray[np.intp]] = [np.empty((2, 0), np.intp)]
    count, most = 0, USUAL * (len(one) + len(other)) + ALWAYS
    for first in range(0, len(one), CHUNK):
        found = tree.query(one[first : first + CHUNK], predicate="dwithin", distance=reach)
        found[0] += first
        pairs.append(found)
        count += found.shape[1]
        if count > most:
            raise CrowdedError(shapely.get_coordinates(one[first])[0])
    i, j = np.concatenate(pairs, axis=1)
    return i, j


def crossings(curves: CurveTable, i: Index, j: Index) -> tuple[Array, NDArray[np.bool_]]:
    """Common places of pairs of curves, (p, 2, 2), and which of them there are, (p, 2)."""
    places = carrier_crossings(curves, i, j)
    there: NDArray[np.bool_] = np.asarray(np.isfinite(places).all(axis=2))
    for way in (0, 1):
        for index in (i, j):
            t = curves.parameter(index, _finite(places[:, way]))
            there[:, way] &= (t >= 0) & (t <= 1)
    return places, there


def closest(curves: CurveTable, i: Index, j: Index, shared: Array, around: float) -> Close:
    """Nearest places of pairs of curves.

    Parameters
    ----------
    shared : (p, 2, 2)   up to two ends that a pair has in common, NaN where there is none
    around : places of both curves that near to a shared end do not count
    """
    best = Close(np.zeros((len(i), 2)), np.zeros((len(i), 2)), np.full(len(i), np.inf))
    for one, other in _candidates(curves, i, j):
        distance = norm(one - other)
        distance[np.isnan(distance)] = np.inf
        for end in (0, 1):
            near = norm(one - shared[:, end]) <= around
            distance[near & (norm(other - shared[:, end]) <= around)] = np.inf
        better = distance < best.distance
        for kept, new in zip(best, (one, other, distance), strict=True):
            kept[better] = new[better]
    return best


def _candidates(curves: CurveTable, i: Index, j: Index) -> list[tuple[Array, Array]]:
    """Pairs of places, one on each curve, among them the nearest; NaN where there is none."""
    places, there = crossings(curves, i, j)
    places[~there] = np.nan
    pairs = [(places[:, way], places[:, way]) for way in (0, 1)]
    for ends in (curves.start, curves.end):
        pairs.append((ends[i], curves.nearest(j, ends[i])))
        pairs.append((curves.nearest(i, ends[j]), ends[j]))
    return pairs + _on_common_normals(curves, i, j)


def _on_common_normals(curves: CurveTable, i: Index, j: Index) -> list[tuple[Array, Array]]:
    """Where the normals of both curves coincide; two lines have no such place of their own."""
    pairs = []
    one, other = _feet(curves, i, j), _feet(curves, j, i)
    between = other - one
    with np.errstate(divide="ignore", invalid="ignore"):
        along = between / norm(between)[:, None]
    for towards in (1.0, -1.0):
        for onwards in (1.0, -1.0):
            p = one + towards * curves.radius[i, None] * along
            q = other + onwards * curves.radius[j, None] * along
            on = np.ones(len(i), bool)
            for index, places in ((i, p), (j, q)):
                t = curves.parameter(index, _finite(places))
                on &= (t >= 0) & (t <= 1)
            pairs.append((np.where(on[:, None], p, np.nan), np.where(on[:, None], q, np.nan)))
    return pairs


def _finite(places: Array) -> Array:
    return np.where(np.isfinite(places), places, 0.0)


def _feet(curves: CurveTable, i: Index, j: Index) -> Array:
    """The centre of an arc; of a line the foot of the other curve's centre."""
    return np.where(curves.is_arc[i, None], curves.centre[i], curves.project(i, curves.centre[j]))


# --- crossings of whole lines and circles ---------------------------------------------------------


def carrier_crossings(curves: CurveTable, i: Index, j: Index) -> Array:
    """Up to two common places of the lines or circles that the curves lie on, (p, 2, 2)."""
    found = np.full((len(i), 2, 2), np.nan)
    arcs = curves.is_arc[i].astype(int) + curves.is_arc[j]
    swap = curves.is_arc[i] & ~curves.is_arc[j]
    i, j = np.where(swap, j, i), np.where(swap, i, j)  # the line first
    with np.errstate(divide="ignore", invalid="ignore"):
        for kind, solve in enumerate((_two_lines, _line_and_circle, _two_circles)):
            rows = arcs == kind
            found[rows] = solve(curves, i[rows], j[rows])
    return found


def _two_lines(curves: CurveTable, i: Index, j: Index) -> Array:
    p, d = curves.start[i], curves.end[i] - curves.start[i]
    q, e = curves.start[j], curves.end[j] - curves.start[j]
    crossing = p + (cross(q - p, e) / cross(d, e))[:, None] * d
    return np.stack((crossing, np.full_like(crossing, np.nan)), axis=1)


def _line_and_circle(curves: CurveTable, i: Index, j: Index) -> Array:
    centre = curves.centre[j]
    along = curves.end[i] - curves.start[i]
    along = along / norm(along)[:, None]
    # From the line's start, so that a long line loses nothing.
    foot = curves.start[i] + dot(centre - curves.start[i], along)[:, None] * along
    return _spread(foot, along, curves.radius[j] ** 2 - dot(foot - centre, foot - centre))


def _two_circles(curves: CurveTable, i: Index, j: Index) -> Array:
    between = curves.centre[j] - curves.centre[i]
    apart = norm(between)
    along = between / apart[:, None]
    foot = (apart**2 + curves.radius[i] ** 2 - curves.radius[j] ** 2) / (2 * apart)
    across = np.stack((-along[:, 1], along[:, 0]), axis=1)
    return _spread(
        curves.centre[i] + foot[:, None] * along, across, curves.radius[i] ** 2 - foot**2
    )


def _spread(foot: Array, along: Array, square: Array) -> Array:
    half = np.sqrt(square)[:, None] * along
    return np.stack((foot - half, foot + half), axis=1)

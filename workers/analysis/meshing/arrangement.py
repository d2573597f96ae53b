"""Loops cut into pieces that meet at their ends only.

A region may share part of its border with the plate's outline, with a hole or with another region,
and a hole may cross a region's border. Every side is cut where a vertex or a crossing lies on it;
pieces that then coincide are one, with all their loops as owners. Vertices closer than a tolerance
are one: the first in the order outline, holes, regions, points gives the place, and is itself moved
onto the side of an earlier loop that it lies on.

What else comes close or crosses is a fault, found afterwards (`contacts.py`).
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.curve_table import CurveTable, norm
from workers.analysis.meshing.curves import Arc, Curve, Line, NoArcError, arc_through
from workers.analysis.meshing.loops import SHORTEST, Loop, Side
from workers.analysis.meshing.proximity import (
    close_pairs,
    close_places,
    crossings,
    near_pairs,
)
from workers.geometry import Vector

Array = NDArray[np.float64]
Index = NDArray[np.intp]

ONE = SHORTEST / 2  # of the diagonal: what is closer than this is one
ON_CIRCLE = 1e-9  # of the diagonal: an end that near to an arc's circle needs no other arc


@dataclass(frozen=True, eq=False)
class Piece:
    """A part of one or several sides that coincide.

    start, end : vertex numbers
    owners : loop number -> whether the loop runs along the curve (True) or against it
    """

    curve: Curve
    start: int
    end: int
    name: str | None
    pointer: str
    owners: Mapping[int, bool]


@dataclass(frozen=True, eq=False)
class Arrangement:
    """Pieces, and the way of each loop over them.

    vertices : (v, 2) places of the vertices, bitwise the ends of the curves
    ways : for each loop the piece numbers in its order, (n,)
    points : vertex number of each named point
    """

    loops: tuple[Loop, ...]
    vertices: Array
    pieces: tuple[Piece, ...]
    ways: tuple[Index, ...]
    points: Mapping[str, int]

    @cached_property
    def table(self) -> CurveTable:
        return CurveTable.of([piece.curve for piece in self.pieces])

    @cached_property
    def ends(self) -> Index:
        """Vertex numbers at the ends of the pieces, (p, 2)."""
        return np.array([(piece.start, piece.end) for piece in self.pieces], np.intp)

    def place(self, point: str) -> Vector:
        """Where a named point is."""
        x, y = self.vertices[self.points[point]]
        return float(x), float(y)

    def starts(self, loop: int) -> Index:
        """Vertex where each piece on the way of a loop starts, in the loop's direction, (n,)."""
        way = self.ways[loop]
        forward = np.array([self.pieces[p].owners[loop] for p in way], bool)
        return self.ends[way, np.where(forward, 0, 1)]


def arrange(loops: Sequence[Loop], points: Mapping[str, Vector], diagonal: float) -> Arrangement:
    """Cut loops into pieces.

    loops : the outline first, then holes, then regions

    Raises
    ------
    CrowdedError   far too many vertices or sides are in one place.
    """
    loops = tuple(loops)
    sides = [side for loop in loops for side in loop.sides]
    owner = np.repeat(np.arange(len(loops)), [len(loop.sides) for loop in loops])
    table = CurveTable.of([side.curve for side in sides])
    crossed = _allowed_crossings(table, owner, loops, diagonal)
    own = np.concatenate((table.start, crossed, np.array(list(points.values())).reshape(-1, 2)))
    vertex, vertices = _merged(own, diagonal)
    on, cut = close_places(table, vertices, ONE * diagonal)
    vertices = _on_earlier_sides(vertices, on, cut, table, owner)
    start, end = vertex[: len(sides)], vertex[: len(sides)][_following(owner)]
    cuts: dict[int, list[int]] = {}
    for v, side in zip(on.tolist(), cut.tolist(), strict=True):
        if v not in (start[side], end[side]):
            cuts.setdefault(side, []).append(v)
    parts = _Parts(vertices, diagonal)
    ways: list[list[int]] = [[] for _ in loops]
    for number, side in enumerate(sides):
        loop = int(owner[number])
        stops = [int(start[number]), *cuts.get(number, ()), int(end[number])]
        ways[loop] += parts.add(side, loop, stops)
    first_point = len(own) - len(points)
    named = {name: int(vertex[first_point + i]) for i, name in enumerate(points)}
    numbers = tuple(np.array(way, np.intp) for way in ways)
    return Arrangement(loops, vertices, tuple(parts.pieces), numbers, named)


def _following(owner: Index) -> Index:
    """Number of the side that follows each side in its loop."""
    following = np.arange(1, len(owner) + 1)
    last = np.flatnonzero(np.diff(owner, append=-1))
    first = np.concatenate(([0], last[:-1] + 1))
    following[last] = first
    return following


def _allowed_crossings(
    table: CurveTable, owner: Index, loops: tuple[Loop, ...], diagonal: float
) -> Array:
    """Where holes cross borders of regions, (k, 2): there the regions end."""
    kinds = np.array([loop.kind for loop in loops])[owner]
    if not (kinds == "region").any() or not (kinds == "hole").any():
        return np.empty((0, 2))
    i, j = close_pairs(table, SHORTEST * diagonal)
    mixed = ((kinds[i] == "hole") & (kinds[j] == "region")) | (
        (kinds[i] == "region") & (kinds[j] == "hole")
    )
    places, there = crossings(table, i[mixed], j[mixed])
    return places[there]


def _merged(places: Array, diagonal: float) -> tuple[Index, Array]:
    """Vertex number of each place, and the places of the vertices; close places are one."""
    points = shapely.points(places)
    one, other = near_pairs(points, points, ONE * diagonal)
    first = np.arange(len(places))
    np.minimum.at(first, one, other)
    while (first[first] != first).any():  # chains of close places
        first = first[first]
    kept, vertex = np.unique(first, return_inverse=True)
    return vertex.reshape(-1), places[kept]


def _on_earlier_sides(
    vertices: Array, on: Index, cut: Index, table: CurveTable, owner: Index
) -> Array:
    """Vertices moved exactly onto the first side that they lie on, unless it ends in them."""
    first = np.full(len(vertices), len(table))
    np.minimum.at(first, on, cut)
    lying = np.flatnonzero(first < len(table))
    side = first[lying]
    ends = (table.start[side] == vertices[lying]).all(axis=1)
    ends |= (table.end[side] == vertices[lying]).all(axis=1)
    lying, side = lying[~ends], side[~ends]
    moved = vertices.copy()
    moved[lying] = table.nearest(side, vertices[lying])
    return moved


class _Parts:
    """Collects pieces, each once."""

    def __init__(self, vertices: Array, diagonal: float) -> None:
        self.pieces: list[Piece] = []
        self._vertices, self._diagonal = vertices, diagonal
        self._found: dict[tuple[int, int], list[int]] = {}

    def add(self, side: Side, loop: int, stops: list[int]) -> list[int]:
        """Cut a side at vertices; returns the piece numbers along it."""
        curve = side.curve
        if len(stops) == 2 and stops[0] != stops[1]:
            return [self._put(self._fitted(curve, 0.0, 1.0, *stops), side, loop, *stops)]
        index = np.zeros(len(stops) - 2, np.intp)
        t = CurveTable.of([curve]).parameter(index, self._vertices[stops[1:-1]])
        order = np.argsort(t)
        stops = [stops[0], *(stops[1 + k] for k in order), stops[-1]]
        along = [0.0, *t[order].tolist(), 1.0]
        return [
            self._put(self._fitted(curve, *along[k : k + 2], *stops[k : k + 2]), side, loop,
                      *stops[k : k + 2])
            for k in range(len(stops) - 1)
            if stops[k] != stops[k + 1]
        ]  # fmt: skip

    def _fitted(self, curve: Curve, low: float, high: float, start: int, end: int) -> Curve:
        """The part of a curve between two vertices, which may lie a little off it."""
        first, last = self._vertices[start], self._vertices[end]
        if isinstance(curve, Line):
            return Line(first, last)
        if low == 0 and high == 1 and (first == curve.start).all() and (last == curve.end).all():
            return curve
        reach = norm(np.stack((first, last)) - curve.centre)
        if (abs(reach - curve.radius) <= ON_CIRCLE * self._diagonal).all():
            return _between(curve, low, high, first, last)
        try:
            return arc_through(first, curve.at(np.array([(low + high) / 2]))[0], last)
        except NoArcError:
            return Line(first, last)

    def _put(self, curve: Curve, side: Side, loop: int, start: int, end: int) -> int:
        same = self._found.setdefault((min(start, end), max(start, end)), [])
        middle = curve.at(np.array([0.5]))[0]
        for number in same:
            piece = self.pieces[number]
            if norm(piece.curve.at(np.array([0.5]))[0] - middle) <= ONE * self._diagonal:
                owners = {**piece.owners, loop: piece.start == start}
                self.pieces[number] = replace(piece, owners=owners)
                return number
        same.append(len(self.pieces))
        self.pieces.append(Piece(curve, start, end, side.name, side.pointer, {loop: True}))
        return len(self.pieces) - 1


def _between(arc: Arc, low: float, high: float, start: Array, end: Array) -> Arc:
    """The part of an arc between two places on it, its angles taken from them."""
    first, last = (float(np.arctan2(*(p - arc.centre)[::-1])) for p in (start, end))
    roughly = (high - low) * arc.sweep
    # The angle from first to last that is nearest to what the parameters say.
    sweep = last - first
    sweep += 2 * np.pi * round((roughly - sweep) / (2 * np.pi))
    return replace(arc, start=start, end=end, first=first, sweep=float(sweep))

"""Loops that share borders become edges between domains.

A region may share part of its border with the plate's outline, with a hole or with another region.
Every side is split where a vertex lies on it; pieces that then coincide are one edge. Which domain
lies on each side of an edge is read off the loops themselves, at a point beside the edge's middle.
Loops that cross are refused before (`drawing_checks.py`).
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.curves import Arc, Curve
from workers.analysis.meshing.drawing import OUTSIDE, Drawing, Edge
from workers.analysis.meshing.loops import SHORTEST, Loop, Side, parameter, part
from workers.job import Vector

Array = NDArray[np.float64]

ASIDE = 2e-6  # of the diagonal: how far beside an edge its domain is asked for
RISE = 2e-7  # of the diagonal: how closely polygons follow arcs; well below ASIDE


def arrange(loops: Sequence[Loop], points: dict[str, Vector], diagonal: float) -> Drawing:
    """The planar arrangement of loops that were checked not to cross.

    loops : the outline first, then holes, then regions; a later region wins over an earlier one.
    """
    sides = [side for loop in loops for side in loop.sides]
    vertices = _vertices(sides, points, diagonal)
    pieces = _merge([piece for side in sides for piece in _split(side, vertices, diagonal)])
    domains = _Domains(loops, diagonal)
    edges = domains.between(pieces)
    snapped = {name: _snap(place, vertices) for name, place in points.items()}
    return _numbered(edges, domains.names, snapped)


def polyline(curve: Curve, rise: float) -> Array:
    """Points on a curve whose chords stay within a distance of it, ends included."""
    if not isinstance(curve, Arc):
        return np.stack((curve.start, curve.end))
    turn = np.sqrt(8 * min(rise / curve.radius, 0.01))
    return curve.at(np.linspace(0.0, 1.0, max(2, int(np.ceil(abs(curve.sweep) / turn))) + 1))


def polygon(loop: Loop, rise: float) -> shapely.Polygon:
    return shapely.Polygon(np.concatenate([polyline(s.curve, rise)[:-1] for s in loop.sides]))


# --- splitting and merging ------------------------------------------------------------------------


def _vertices(sides: Iterable[Side], points: dict[str, Vector], diagonal: float) -> Array:
    """All ends of sides, and the named points; those closer than the tolerance are one."""
    places = np.array(
        [p for side in sides for p in (side.curve.start, side.curve.end)]
        + [np.asarray(p, float) for p in points.values()]
    )
    tree = shapely.STRtree(shapely.points(places))
    near, first = tree.query(
        shapely.points(places), predicate="dwithin", distance=SHORTEST * diagonal / 2
    )
    lowest = np.full(len(places), len(places))
    np.minimum.at(lowest, near, first)
    return places[np.unique(lowest)]


def _split(side: Side, vertices: Array, diagonal: float) -> list[Side]:
    """The side in pieces, wherever a vertex lies on it."""
    curve, tolerance = side.curve, SHORTEST * diagonal / 2
    on = vertices[curve.distance(vertices) <= tolerance]
    at = np.array([parameter(curve, place) for place in on])
    order = np.argsort(at)
    on, at = on[order], at[order]
    return [
        replace(side, curve=part(curve, float(at[i]), float(at[i + 1]), on[i], on[i + 1]))
        for i in range(len(on) - 1)
    ]


def _merge(pieces: list[Side]) -> list[Side]:
    """Pieces that coincide are one; the first to come (outline, holes, regions) names it."""
    found: dict[tuple[Vector, ...], list[Side]] = {}
    for piece in pieces:
        curve = piece.curve
        ends = sorted((float(p[0]), float(p[1])) for p in (curve.start, curve.end))
        middle = curve.at(np.array([0.5]))[0]
        same = found.setdefault(tuple(ends), [])
        if not any(_alike(middle, other.curve) for other in same):
            same.append(piece)
    return [piece for same in found.values() for piece in same]


def _alike(middle: Array, curve: Curve) -> bool:
    return bool(np.linalg.norm(middle - curve.at(np.array([0.5]))[0]) <= 1e-3 * curve.length)


def _snap(place: Vector, vertices: Array) -> Vector:
    gap = np.linalg.norm(vertices - place, axis=1)
    nearest = vertices[int(gap.argmin())]
    return float(nearest[0]), float(nearest[1])


def _numbered(edges: Sequence[Edge], names: Sequence[str], points: dict[str, Vector]) -> Drawing:
    """Domains that have no edge (covered by others altogether) lose their number."""
    used = sorted({d for edge in edges for d in (edge.left, edge.right)} - {OUTSIDE})
    number = {OUTSIDE: OUTSIDE} | {old: new for new, old in enumerate(used, start=1)}
    return Drawing(
        tuple(replace(e, left=number[e.left], right=number[e.right]) for e in edges),
        tuple(names[old - 1] for old in used),
        points,
    )


# --- domains --------------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class _Around:
    """A loop as a polygon, and the domain inside it."""

    shape: shapely.Polygon
    domain: int


class _Domains:
    """Which domain a place is in."""

    def __init__(self, loops: Sequence[Loop], diagonal: float) -> None:
        regions = [loop for loop in loops if loop.kind == "region"]
        self.names = ("plate", *(loop.name for loop in regions))
        self._aside = ASIDE * diagonal
        shapes = [polygon(loop, RISE * diagonal) for loop in loops]
        shapely.prepare(shapes)
        number = {id(loop): 2 + i for i, loop in enumerate(regions)}
        self._outline = shapes[0]
        self._holes = [s for s, loop in zip(shapes, loops, strict=True) if loop.kind == "hole"]
        self._regions = [
            _Around(shape, number[id(loop)])
            for shape, loop in zip(shapes, loops, strict=True)
            if loop.kind == "region"
        ]

    def at(self, places: Array) -> NDArray[np.int64]:
        """Domain of each place, (k,)."""
        x, y = places.T
        domain = np.where(shapely.contains_xy(self._outline, x, y), 1, OUTSIDE)
        for around in self._regions:
            domain[(domain != OUTSIDE) & shapely.contains_xy(around.shape, x, y)] = around.domain
        for hole in self._holes:
            domain[shapely.contains_xy(hole, x, y)] = OUTSIDE
        return domain

    def between(self, pieces: list[Side]) -> tuple[Edge, ...]:
        """Edges with the domains on both sides; pieces that divide nothing are left out."""
        middle = np.array([p.curve.at(np.array([0.5]))[0] for p in pieces])
        along = np.array([p.curve.at(np.array([0.499, 0.501])) for p in pieces])
        direction = along[:, 1] - along[:, 0]
        direction /= np.linalg.norm(direction, axis=1, keepdims=True)
        aside = self._aside * np.stack((-direction[:, 1], direction[:, 0]), axis=1)
        left, right = self.at(middle + aside), self.at(middle - aside)
        return tuple(
            Edge(piece.curve, piece.name, int(one), int(other), piece.pointer)
            for piece, one, other in zip(pieces, left, right, strict=True)
            if one != other
        )

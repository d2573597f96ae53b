"""A loop of vertices or a circle as curves, with arcs and fillets worked out exactly.

What can be wrong inside one loop is found here: sides too short, arcs that do not exist, fillets
that do not fit. What is wrong between loops is found in `drawing_checks.py`.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.curves import Arc, Curve, Line, NoArcError, curve, enclosed
from workers.errors import Fault
from workers.job import CircleShape, Vertex

Array = NDArray[np.float64]

SHORTEST = 1e-5  # of the plate's diagonal: closer vertices and shorter sides are faults
SMOOTH = 1e-6  # sine of the angle below which two sides meet without a corner


@dataclass(frozen=True, eq=False)
class Side:
    """One curve of a loop, the name that it carries, and where it comes from."""

    curve: Curve
    name: str | None
    pointer: str


@dataclass(frozen=True, eq=False)
class Loop:
    """A closed chain of sides, counter-clockwise.

    kind : "outline", "hole" or "region"
    label : for messages, e.g. "hole 'pin'"
    """

    kind: str
    label: str
    name: str
    pointer: str
    sides: tuple[Side, ...]

    @property
    def area(self) -> float:
        """Enclosed area, arcs included [L^2]."""
        return sum(enclosed(side.curve) for side in self.sides)


def reversed_curve(curve: Curve) -> Curve:
    if isinstance(curve, Arc):
        return replace(
            curve,
            start=curve.end,
            end=curve.start,
            first=curve.first + curve.sweep,
            sweep=-curve.sweep,
        )
    return Line(curve.end, curve.start)


def circle_sides(shape: CircleShape, name: str | None, pointer: str) -> tuple[Side, ...]:
    """A circle as four quarter arcs, counter-clockwise from the right."""
    centre = np.asarray(shape.centre, float)
    turns = np.array([[1.0, 0.0], [0.0, 1.0], [-1.0, 0.0], [0.0, -1.0], [1.0, 0.0]])
    corners = centre + shape.radius * turns
    return tuple(
        Side(
            Arc(corners[i], corners[i + 1], centre, shape.radius, i * np.pi / 2, np.pi / 2),
            name,
            pointer,
        )
        for i in range(4)
    )


def vertex_sides(
    vertices: tuple[Vertex, ...], name: str | None, diagonal: float
) -> tuple[tuple[Side, ...], list[Fault]]:
    """The sides of a loop of vertices, counter-clockwise, fillets put in.

    name : of every side that has none of its own (a hole's sides carry the hole's name)
    """
    faults: list[Fault] = []
    curves = [_side(v, w, diagonal, faults) for v, w in zip(vertices, _next(vertices), strict=True)]
    if faults:
        return (), faults
    sides = [
        Side(curve, vertex.side or name, vertex.pointer)
        for curve, vertex in zip(curves, vertices, strict=True)
        if curve is not None
    ]
    rounded = _rounded(vertices, sides, name, diagonal, faults)
    if sum(enclosed(side.curve) for side in rounded) < 0:
        rounded = [replace(s, curve=reversed_curve(s.curve)) for s in reversed(rounded)]
    return tuple(rounded), faults


def _next(vertices: tuple[Vertex, ...]) -> tuple[Vertex, ...]:
    return (*vertices[1:], vertices[0])


def _side(vertex: Vertex, following: Vertex, diagonal: float, faults: list[Fault]) -> Curve | None:
    start, end = np.asarray(vertex.at, float), np.asarray(following.at, float)
    through = None if vertex.through is None else np.asarray(vertex.through, float)
    if np.linalg.norm(end - start) < SHORTEST * diagonal:
        faults.append(
            Fault(
                vertex.pointer,
                f"the side from {_at(start)} to {_at(end)} is too short: vertices must be at "
                f"least {SHORTEST * diagonal:.3g} apart; the loop closes by itself, do not repeat "
                "the first vertex at the end",
            )
        )
        return None
    try:
        return curve(start, end, through)
    except NoArcError:
        faults.append(
            Fault(
                f"{vertex.pointer}/through",
                f"no arc goes from {_at(start)} through {vertex.through} to {_at(end)}: the three "
                "points lie in line or coincide; move the middle one or leave it out",
            )
        )
        return None


# --- fillets ----------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class _Fillet:
    arc: Arc
    before: float  # where it leaves the side before the vertex, as parameter of that side
    after: float  # where it joins the side after the vertex


def _rounded(
    vertices: tuple[Vertex, ...],
    sides: list[Side],
    name: str | None,
    diagonal: float,
    faults: list[Fault],
) -> list[Side]:
    fillets = [
        _fillet(vertex, sides[i - 1].curve, sides[i].curve, diagonal, faults)
        for i, vertex in enumerate(vertices)
    ]
    rounded = []
    for i, (vertex, side) in enumerate(zip(vertices, sides, strict=True)):
        here, there = fillets[i], fillets[(i + 1) % len(fillets)]
        if here is not None:
            pointer = f"{vertex.pointer}/fillet"
            rounded.append(Side(here.arc, vertex.fillet_side or name, pointer))
        low, high = here.after if here else 0.0, there.before if there else 1.0
        left = (high - low) * side.curve.length
        if left < -1e-9 * diagonal:
            faults.append(
                Fault(
                    f"{vertex.pointer}/fillet"
                    if here
                    else vertices[(i + 1) % len(vertices)].pointer,
                    f"the fillets at both ends of the side from {_at(side.curve.start)} to "
                    f"{_at(side.curve.end)} overlap by {-left:.4g}; make a radius smaller",
                )
            )
        elif left > SHORTEST * diagonal:
            rounded.append(replace(side, curve=between(side.curve, low, high, here, there)))
    return rounded


def between(
    curve: Curve, low: float, high: float, here: _Fillet | None, there: _Fillet | None
) -> Curve:
    """The part of a side between its fillets, joined to their arcs exactly."""
    start = here.arc.end if here else curve.start
    end = there.arc.start if there else curve.end
    return part(curve, low, high, start, end)


def part(curve: Curve, low: float, high: float, start: Array, end: Array) -> Curve:
    """The part of a curve between two parameters, with ends given exactly."""
    if isinstance(curve, Arc):
        return replace(
            curve,
            start=start,
            end=end,
            first=curve.first + low * curve.sweep,
            sweep=(high - low) * curve.sweep,
        )
    return Line(start, end)


def _fillet(
    vertex: Vertex, before: Curve, after: Curve, diagonal: float, faults: list[Fault]
) -> _Fillet | None:
    if vertex.fillet is None:
        return None
    arriving, leaving = tangent(before, 1.0), tangent(after, 0.0)
    turn = float(arriving[0] * leaving[1] - arriving[1] * leaving[0])
    pointer, place = f"{vertex.pointer}/fillet", _at(np.asarray(vertex.at))
    if abs(turn) < SMOOTH:
        faults.append(Fault(pointer, f"there is no corner to round at {place}; leave fillet out"))
        return None
    side = 1.0 if turn > 0 else -1.0
    centre = _fillet_centre(before, after, vertex.fillet, side, np.asarray(vertex.at, float))
    if centre is not None:
        touches = [np.asarray(c.project(centre[None])[0]) for c in (before, after)]
        leave, join = parameter(before, touches[0]), parameter(after, touches[1])
        if 0 <= leave < 1 and 0 < join <= 1:
            arc = _tangent_arc(touches[0], touches[1], centre, vertex.fillet, side)
            return _Fillet(arc, leave, join)
    faults.append(
        Fault(
            pointer,
            f"a fillet of radius {vertex.fillet:.6g} does not fit at {place}: it would reach "
            "beyond the sides that meet there; make it smaller",
        )
    )
    return None


def _fillet_centre(
    before: Curve, after: Curve, radius: float, side: float, vertex: Array
) -> Array | None:
    """Where both sides, moved by the radius towards the inside of the corner, cross."""
    first, second = (_moved(c, radius * side) for c in (before, after))
    if first is None or second is None:
        return None
    crossings = _crossings(first, second)
    if not len(crossings):
        return None
    return crossings[np.argmin(np.linalg.norm(crossings - vertex, axis=1))]


def _moved(curve: Curve, left: float) -> tuple[Array, Array] | tuple[Array, float] | None:
    """The infinite line (point, direction) or circle (centre, radius) that much further left."""
    if isinstance(curve, Line):
        along = tangent(curve, 0.0)
        return curve.start + left * np.array([-along[1], along[0]]), along
    radius = curve.radius - left * np.sign(curve.sweep)
    return (curve.centre, float(radius)) if radius > 0 else None


def _crossings(first: tuple, second: tuple) -> Array:
    """Common points of two lines or circles, (k, 2), k = 0, 1 or 2."""
    if isinstance(first[1], float) and not isinstance(second[1], float):
        first, second = second, first
    if not isinstance(second[1], float):
        (p, d), (q, e) = first, second
        cross = d[0] * e[1] - d[1] * e[0]
        t = ((q - p)[0] * e[1] - (q - p)[1] * e[0]) / cross
        return (p + t * d)[None]
    if isinstance(first[1], float):
        return _circle_crossings(first, second)
    (p, d), (centre, radius) = first, second
    foot = p + ((centre - p) @ d) * d
    return _spread(foot, d, radius**2 - float(((foot - centre) ** 2).sum()))


def _circle_crossings(first: tuple[Array, float], second: tuple[Array, float]) -> Array:
    (a, r), (b, s) = first, second
    apart = float(np.linalg.norm(b - a))
    if apart == 0:
        return np.empty((0, 2))
    along = (b - a) / apart
    foot = (apart**2 + r**2 - s**2) / (2 * apart)
    return _spread(a + foot * along, np.array([-along[1], along[0]]), r**2 - foot**2)


def _spread(foot: Array, direction: Array, square: float) -> Array:
    if square < 0:
        return np.empty((0, 2))
    half = np.sqrt(square) * direction
    return np.stack((foot - half, foot + half))


def _tangent_arc(start: Array, end: Array, centre: Array, radius: float, side: float) -> Arc:
    first, last = (float(np.arctan2(*(p - centre)[::-1])) for p in (start, end))
    sweep = side * float(np.mod(side * (last - first), 2 * np.pi))
    return Arc(start, end, centre, radius, first, sweep)


# --- on one curve -----------------------------------------------------------------------------


def tangent(curve: Curve, t: float) -> Array:
    """Unit direction of travel at a parameter, (2,)."""
    if isinstance(curve, Arc):
        angle = curve.first + t * curve.sweep
        return np.sign(curve.sweep) * np.array([-np.sin(angle), np.cos(angle)])
    return np.asarray(curve.end - curve.start) / curve.length


def parameter(curve: Curve, place: Array) -> float:
    """Parameter of a place on the curve; below 0 or above 1 beyond its ends."""
    if isinstance(curve, Arc):
        middle = curve.first + curve.sweep / 2
        angle = float(np.arctan2(*(place - curve.centre)[::-1]))
        # Measured from the middle of the arc, where it is farthest from the jump of the angle.
        turned = float(np.mod(angle - middle + np.pi, 2 * np.pi) - np.pi)
        return 0.5 + turned / curve.sweep
    along = curve.end - curve.start
    return float((place - curve.start) @ along / (along @ along))


def _at(place: Array) -> str:
    return f"({place[0]:.6g}, {place[1]:.6g})"

"""A loop of vertices or a circle as curves, counter-clockwise, arcs and fillets worked out exactly.

What can be wrong inside one loop is found here and in `fillets.py`: sides too short, arcs that do
not exist, fillets that do not fit. Where loops cross is found on the arrangement (`contacts.py`).
"""

import math
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.curves import Arc, Curve, NoArcError, curve, enclosed
from workers.analysis.meshing.fillets import Corner, round_corners
from workers.analysis.meshing.places import at
from workers.errors import Fault
from workers.geometry import CircleShape, Vertex

Array = NDArray[np.float64]

WIDEST = math.pi / 2  # of an arc: what the mesh library's splines follow exactly
SHORTEST = 1e-5  # of the plate's diagonal: closer vertices and shorter sides are faults


@dataclass(frozen=True, eq=False)
class Side:
    """One curve of a loop, the name that it carries, and where it comes from."""

    curve: Curve
    name: str | None
    pointer: str


@dataclass(frozen=True, eq=False)
class Loop:
    """A closed chain of sides, counter-clockwise; each ends bitwise where the next one starts.

    kind : "outline", "hole" or "region"
    label : for messages, e.g. "hole 'pin'"
    """

    kind: str
    label: str
    name: str
    pointer: str
    sides: tuple[Side, ...]

    @cached_property
    def area(self) -> float:
        """Enclosed area, arcs included [L^2]."""
        return sum(enclosed(side.curve) for side in self.sides)


def circle_sides(shape: CircleShape, name: str | None, pointer: str) -> tuple[Side, ...]:
    """A circle as four quarter arcs, counter-clockwise from the right."""
    centre = np.asarray(shape.centre, float)
    turns = np.array([[1.0, 0.0], [0.0, 1.0], [-1.0, 0.0], [0.0, -1.0]])
    corners = centre + shape.radius * turns
    return tuple(
        Side(
            Arc(corners[i], corners[(i + 1) % 4], centre, shape.radius, i * np.pi / 2, np.pi / 2),
            name,
            pointer,
        )
        for i in range(4)
    )


def vertex_sides(
    vertices: tuple[Vertex, ...], name: str | None, shortest: float
) -> tuple[tuple[Side, ...], list[Fault]]:
    """The sides of a loop of vertices, counter-clockwise, fillets put in.

    name : of every side that has none of its own (a hole's sides carry the hole's name)
    shortest : length of the shortest side that is allowed [L]
    """
    faults: list[Fault] = []
    following = (*vertices[1:], vertices[0])
    curves = [_side(v, w, shortest, faults) for v, w in zip(vertices, following, strict=True)]
    sound = [c for c in curves if c is not None]
    if faults:
        return (), faults
    corners = [Corner(np.asarray(v.at, float), v.fillet, v.pointer) for v in vertices]
    rounded, faults = round_corners(corners, sound, shortest)
    if faults:
        return (), faults
    sides = []
    for vertex, (fillet, rest) in zip(vertices, rounded, strict=True):
        if fillet is not None:
            sides.append(Side(fillet, vertex.fillet_side or name, f"{vertex.pointer}/fillet"))
        if rest is not None:
            sides.append(Side(rest, vertex.side or name, vertex.pointer))
    if sum(enclosed(side.curve) for side in sides) < 0:
        sides = [replace(side, curve=side.curve.reverse) for side in reversed(sides)]
    return tuple(part for side in sides for part in _quarters(side)), faults


def _quarters(side: Side) -> list[Side]:
    """The side, an arc of more than a right angle in equal parts of less."""
    arc = side.curve
    if not isinstance(arc, Arc):
        return [side]
    count = max(1, math.ceil(abs(arc.sweep) / WIDEST - 1e-9))
    t = np.arange(count + 1) / count
    places = arc.at(t)
    return [
        replace(side, curve=arc.part(t[i], t[i + 1], places[i], places[i + 1]))
        for i in range(count)
    ]


def _side(vertex: Vertex, following: Vertex, shortest: float, faults: list[Fault]) -> Curve | None:
    start, end = np.asarray(vertex.at, float), np.asarray(following.at, float)
    through = None if vertex.through is None else np.asarray(vertex.through, float)
    if np.linalg.norm(end - start) < shortest:
        faults.append(
            Fault(
                vertex.pointer,
                f"the side from {at(start)} to {at(end)} is too short: vertices must be at least "
                f"{shortest:.3g} apart; the loop closes by itself, do not repeat the first vertex "
                "at the end",
            )
        )
        return None
    try:
        return curve(start, end, through)
    except NoArcError:
        faults.append(
            Fault(
                f"{vertex.pointer}/through",
                f"no arc goes from {at(start)} through {at(vertex.through or start)} to {at(end)}: "
                "the three points lie in line or coincide; move the middle one or leave it out",
            )
        )
        return None

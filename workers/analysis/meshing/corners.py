"""The corners of a drawing: the angle that each domain has in each vertex."""

from collections.abc import Iterator, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.curve_table import CurveTable
from workers.analysis.meshing.drawing import OUTSIDE, Edge
from workers.analysis.meshing.places import at
from workers.errors import Fault
from workers.geometry import Vector

Array = NDArray[np.float64]

SHARPEST = 1.0  # degrees: no element fits into a corner that is sharper
ASIDE = 1e-3  # of an edge's length: where its direction is looked at to tell tangent edges apart


class Corner(NamedTuple):
    """A corner of one domain; OUTSIDE for a notch. degrees is its angle, up to 360."""

    at: Vector
    degrees: float
    domain: int
    pointer: str


def corners(edges: Sequence[Edge]) -> Iterator[Corner]:
    """All corners, vertex by vertex."""
    table = CurveTable.of([edge.curve for edge in edges])
    index = np.arange(len(edges))
    leaving, arriving = table.tangent(index, np.zeros(len(edges))), -table.tangent(
        index, np.ones(len(edges))
    )  # fmt: skip
    # Of a tangent pair the one that bends further to the left comes later.
    bend = np.where(table.is_arc, table.sweep * ASIDE / 2, 0.0)
    away: dict[Vector, list[tuple[float, float, int, str]]] = {}
    for i, edge in enumerate(edges):
        for place, direction, turn, domain in (
            (edge.start, leaving[i], bend[i], edge.left),
            (edge.end, arriving[i], -bend[i], edge.right),
        ):
            angle = float(np.arctan2(direction[1], direction[0]))
            away.setdefault(place, []).append((angle + turn, angle, domain, edge.pointer))
    for place, directions in away.items():
        directions.sort(key=lambda d: d[0])
        for k, (_, angle, domain, pointer) in enumerate(directions):
            to = directions[(k + 1) % len(directions)][1]
            turn = np.degrees(to - angle)
            if k + 1 == len(directions):
                turn += 360.0
            yield Corner(place, float(turn), domain, pointer)


def corner_faults(edges: Sequence[Edge]) -> list[Fault]:
    """Corners into which no element fits, and notches too narrow to be meshed around."""
    faults = []
    for corner in corners(edges):
        if corner.degrees >= SHARPEST:
            continue
        seen = f"of {max(corner.degrees, 0.0):.2f} degrees at {at(corner.at)}"
        if corner.domain == OUTSIDE:
            text = (
                f"there is a notch {seen}; it must open by at least {SHARPEST:g} degree: round its "
                "tip, or draw the crack as a narrow slot"
            )
        else:
            text = (
                f"there is a corner {seen}; no element fits into a corner sharper than "
                f"{SHARPEST:g} degree: cut it off, or let the sides meet at a larger angle"
            )
        faults.append(Fault(corner.pointer, text))
    return faults


def sharp_corners(edges: Sequence[Edge], degrees: float) -> list[Corner]:
    """Corners of the material sharper than an angle, the sharpest first."""
    found = [c for c in corners(edges) if c.domain != OUTSIDE and c.degrees < degrees]
    return sorted(found, key=lambda corner: corner.degrees)

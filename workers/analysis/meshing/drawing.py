"""The drawing: a plate as straight and circular edges between domains, ready to be meshed.

An outline with holes and regions is resolved into a planar arrangement: every edge lies between two
domains and meets others at its ends only. How a document's outline becomes a drawing, and what can
be wrong with it, is in `outline.py`; what meshes it is in `free.py`."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

from workers.analysis.meshing.curve_table import CurveTable
from workers.analysis.meshing.curves import Curve, enclosed
from workers.geometry import Vector

OUTSIDE = 0  # the domain beyond the plate's edge and inside holes


@dataclass(frozen=True, eq=False)
class Edge:
    """A piece of a side between two domains.

    curve : straight line, or arc of at most a right angle.
    side : name of the side or hole that it belongs to, None if it has none.
    left, right : domains seen along the direction of travel; OUTSIDE or 1 + index into
        `Drawing.regions`. Equal domains make an embedded line that nodes follow.
    pointer : JSON pointer of the vertex or shape that it comes from.
    """

    curve: Curve
    side: str | None = None
    left: int = OUTSIDE
    right: int = OUTSIDE
    pointer: str = ""

    @property
    def start(self) -> Vector:
        return float(self.curve.start[0]), float(self.curve.start[1])

    @property
    def end(self) -> Vector:
        return float(self.curve.end[0]), float(self.curve.end[1])


@dataclass(frozen=True)
class Drawing:
    """A plate as a planar arrangement of edges.

    edges : meet at their ends only; vertices that are one are bitwise equal.
    regions : names of the domains 1, 2, ...; "plate" is the one that no region overrides.
    points : named points; those on an edge are vertices.
    inner : domain of each named point that lies on no edge and is to become a node.
    """

    edges: tuple[Edge, ...]
    regions: tuple[str, ...]
    points: Mapping[str, Vector] = field(default_factory=dict)
    inner: Mapping[str, int] = field(default_factory=dict)

    @cached_property
    def table(self) -> CurveTable:
        return CurveTable.of([edge.curve for edge in self.edges])

    @property
    def area(self) -> float:
        """Of the plate, arcs included [L^2]."""
        return sum(
            enclosed(edge.curve) * ((edge.left != OUTSIDE) - (edge.right != OUTSIDE))
            for edge in self.edges
        )

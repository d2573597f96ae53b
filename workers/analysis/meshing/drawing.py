"""The drawing: a plate as straight and circular edges between domains, ready to be meshed.

An outline with holes and regions is resolved into a planar arrangement: every edge lies between two
domains and meets others at its ends only. How a document's outline becomes a drawing, and what can
be wrong with it, is in `outline.py`; what meshes it is in `free.py`. Numpy only.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from workers.job import Vector

Array = NDArray[np.float64]

OUTSIDE = 0  # the domain beyond the plate's edge and inside holes


@dataclass(frozen=True, kw_only=True)
class Edge:
    """What straight and circular edges share.

    side : name of the side, hole or region border that it belongs to, None if it has none.
    left, right : domains seen along the direction of travel; OUTSIDE or 1 + index into
        `Drawing.regions`. Equal domains make an embedded line that nodes follow.
    pointer : JSON pointer of the vertex or shape that it comes from.
    """

    start: Vector
    end: Vector
    side: str | None = None
    left: int = OUTSIDE
    right: int = OUTSIDE
    pointer: str = ""


@dataclass(frozen=True, kw_only=True)
class StraightEdge(Edge):
    @property
    def length(self) -> float:
        return math.dist(self.start, self.end)

    def at(self, parameter: Array) -> Array:
        """Points at parameters in [0, 1], evenly along the edge; (k, 2) [L]."""
        t = np.asarray(parameter, dtype=np.float64)[..., None]
        return np.asarray(self.start) * (1.0 - t) + np.asarray(self.end) * t

    def project(self, points: Array) -> Array:
        """The nearest points of the infinite line; (k, 2) [L]."""
        start = np.asarray(self.start)
        along = (np.asarray(self.end) - start) / self.length
        return start + ((points - start) @ along)[..., None] * along


@dataclass(frozen=True, kw_only=True)
class ArcEdge(Edge):
    """A circular arc of less than a full turn; sweep in radians, positive counter-clockwise."""

    centre: Vector
    radius: float
    sweep: float

    @property
    def length(self) -> float:
        return abs(self.sweep) * self.radius

    def at(self, parameter: Array) -> Array:
        """Points at parameters in [0, 1], evenly along the arc; (k, 2) [L]."""
        first = math.atan2(self.start[1] - self.centre[1], self.start[0] - self.centre[0])
        angle = first + np.asarray(parameter, dtype=np.float64) * self.sweep
        return np.asarray(self.centre) + self.radius * np.stack(
            [np.cos(angle), np.sin(angle)], axis=-1
        )

    def project(self, points: Array) -> Array:
        """The nearest points of the full circle; (k, 2) [L]."""
        outward = points - np.asarray(self.centre)
        return np.asarray(self.centre) + self.radius * outward / np.linalg.norm(
            outward, axis=-1, keepdims=True
        )


AnyEdge = StraightEdge | ArcEdge


@dataclass(frozen=True)
class Drawing:
    """A plate as a planar arrangement of edges.

    edges : meet at their ends only; vertices that are one are bitwise equal.
    regions : names of the domains 1, 2, ...; "plate" is the one that no region overrides.
    points : named points; those on an edge are vertices, those inside are to become nodes.
    """

    edges: tuple[AnyEdge, ...]
    regions: tuple[str, ...]
    points: Mapping[str, Vector] = field(default_factory=dict)

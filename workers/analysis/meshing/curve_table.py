"""Many lines and arcs at once: places on them, projections and distances as arrays.

Every method takes `index`, which of the curves each row is about.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.curves import Arc, Curve

Array = NDArray[np.float64]
Index = NDArray[np.integer[Any]]

WIDEST = 0.05  # radians that one chord of a polyline may span


@dataclass(frozen=True, eq=False)
class CurveTable:
    """Curves as rows: start, end, centre (k, 2); radius, first, sweep (k,); lines have radius 0."""

    start: Array
    end: Array
    centre: Array
    radius: Array
    first: Array
    sweep: Array

    @classmethod
    def of(cls, curves: Sequence[Curve]) -> "CurveTable":
        rows = np.empty((len(curves), 9))
        for row, curve in zip(rows, curves, strict=True):
            row[0:2], row[2:4], row[4:6], row[6:9] = curve.start, curve.end, curve.start, 0.0
            if isinstance(curve, Arc):
                row[4:6], row[6:9] = curve.centre, (curve.radius, curve.first, curve.sweep)
        return cls(rows[:, 0:2], rows[:, 2:4], rows[:, 4:6], *rows[:, 6:9].T)

    def __len__(self) -> int:
        return len(self.start)

    @property
    def is_arc(self) -> NDArray[np.bool_]:
        return self.radius > 0

    @property
    def lengths(self) -> Array:
        return np.where(self.is_arc, np.abs(self.sweep) * self.radius, norm(self.end - self.start))

    def at(self, index: Index, t: Array) -> Array:
        """Places (p, 2) at parameters (p,); ends are exact."""
        start, end, t = self.start[index], self.end[index], np.asarray(t, float)
        straight = (1 - t)[:, None] * start + t[:, None] * end
        turned = self._on_circle(index, self.first[index] + t * self.sweep[index])
        inner = (self.is_arc[index] & (t != 0) & (t != 1))[:, None]
        return np.where(inner, turned, straight)

    def _on_circle(self, index: Index, angle: Array) -> Array:
        direction = np.stack((np.cos(angle), np.sin(angle)), axis=1)
        return self.centre[index] + self.radius[index, None] * direction

    def project(self, index: Index, places: Array) -> Array:
        """The nearest places of the whole line or circle, (p, 2)."""
        start, along = self.start[index], self.end[index] - self.start[index]
        share = dot(places - start, along) / dot(along, along)
        outward = places - self.centre[index]
        outward[norm(outward) == 0] = (1.0, 0.0)  # from the centre all are equally near
        onto = self.centre[index] + outward * (self.radius[index] / norm(outward))[:, None]
        return np.where(self.is_arc[index, None], onto, start + share[:, None] * along)

    def parameter(self, index: Index, places: Array) -> Array:
        """Parameters (p,) of places; below 0 or above 1 beyond the ends."""
        along = self.end[index] - self.start[index]
        straight = dot(places - self.start[index], along) / dot(along, along)
        outward = places - self.centre[index]
        # Measured from the middle of the arc, where it is farthest from the jump of the angle.
        middle = self.first[index] + self.sweep[index] / 2
        turned = np.arctan2(outward[:, 1], outward[:, 0]) - middle
        turned = np.mod(turned + np.pi, 2 * np.pi) - np.pi
        is_arc = self.is_arc[index]
        return np.where(is_arc, 0.5 + turned / np.where(is_arc, self.sweep[index], 1.0), straight)

    def nearest(self, index: Index, places: Array) -> Array:
        """The nearest places on the curves themselves, (p, 2)."""
        t = self.parameter(index, places)
        ends = np.stack((self.start[index], self.end[index]))
        closer = np.argmin(norm(ends - places), axis=0)
        beyond = ((t <= 0) | (t >= 1))[:, None]
        return np.where(beyond, ends[closer, np.arange(len(closer))], self.project(index, places))

    def distance(self, index: Index, places: Array) -> Array:
        """Distance of places from the curves, (p,)."""
        return norm(self.nearest(index, places) - places)

    def tangent(self, index: Index, t: Array) -> Array:
        """Unit directions of travel at parameters, (p, 2)."""
        along = self.end[index] - self.start[index]
        angle = self.first[index] + np.asarray(t) * self.sweep[index]
        turn = np.sign(self.sweep[index])[:, None]
        around = turn * np.stack((-np.sin(angle), np.cos(angle)), axis=1)
        return np.where(self.is_arc[index, None], around, along / norm(along)[:, None])

    def polylines(self) -> NDArray[np.object_]:
        """The curves as chains of chords, (k,) shapely LineStrings."""
        pieces = np.maximum(np.ceil(np.abs(self.sweep) / WIDEST), 1).astype(np.intp)
        index = np.repeat(np.arange(len(self)), pieces + 1)
        first = np.cumsum(pieces + 1) - (pieces + 1)
        t = (np.arange(len(index)) - first[index]) / pieces[index]
        return np.asarray(shapely.linestrings(self.at(index, t), indices=index))

    @property
    def rise(self) -> float:
        """How far a curve may be from its polyline [L]."""
        turn = np.minimum(np.abs(self.sweep), WIDEST)
        return float(np.max(self.radius * (1 - np.cos(turn / 2)), initial=0.0))

    def bounds(self) -> tuple[Array, Array]:
        """Lowest and highest coordinates that all curves reach, (2,) each."""
        quarters = np.arange(4) * np.pi / 2
        index = np.repeat(np.flatnonzero(self.is_arc), 4)
        outermost = self._on_circle(index, np.tile(quarters, len(index) // 4))
        t = self.parameter(index, outermost)
        places = np.concatenate((self.start, self.end, outermost[(t > 0) & (t < 1)]))
        return places.min(axis=0), places.max(axis=0)


def dot(a: Array, b: Array) -> Array:
    return (a * b).sum(axis=-1)


def cross(a: Array, b: Array) -> Array:
    return np.asarray(a[..., 0] * b[..., 1] - a[..., 1] * b[..., 0])


def norm(a: Array) -> Array:
    return np.sqrt((a * a).sum(axis=-1))

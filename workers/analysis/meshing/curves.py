"""Sides of a drawing: straight lines and circular arcs, by a parameter t from 0 to 1.

Equal steps of t are equal lengths.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

FLATTEST = 1e-6  # rise of an arc over its chord, below which three points count as in line


class NoArcError(ValueError):
    """Three points lie in line or coincide: no circle goes through them."""


@dataclass(frozen=True, eq=False)
class Line:
    """The straight side from start to end, (2,) each [L]."""

    start: Array
    end: Array

    @property
    def length(self) -> float:
        return float(np.linalg.norm(self.end - self.start))

    def project(self, points: Array) -> Array:
        """The nearest points of the infinite line, (k, 2)."""
        along = (self.end - self.start) / self.length
        return self.start + ((points - self.start) @ along)[:, None] * along

    def at(self, t: Array) -> Array:
        """Points (k, 2) at parameters (k,)."""
        t = np.asarray(t)[:, None]
        return (1 - t) * self.start + t * self.end

    def distance(self, points: Array) -> Array:
        """Distance of points (k, 2) from the side, (k,)."""
        direction = self.end - self.start
        t = np.clip((points - self.start) @ direction / (direction @ direction), 0, 1)
        return np.linalg.norm(points - self.at(t), axis=1)

    def tangent(self, t: float) -> Array:
        """Unit direction of travel at a parameter, (2,)."""
        return (self.end - self.start) / self.length

    def part(self, low: float, high: float, start: Array, end: Array) -> "Line":
        """The piece between two parameters, whose ends are given exactly."""
        return Line(start, end)

    @property
    def reverse(self) -> "Line":
        return Line(self.end, self.start)


@dataclass(frozen=True, eq=False)
class Arc:
    """The circular side from start to end; sweep is its angle [rad], counter-clockwise positive."""

    start: Array
    end: Array
    centre: Array
    radius: float
    first: float
    sweep: float

    @property
    def length(self) -> float:
        return abs(self.sweep) * self.radius

    def project(self, points: Array) -> Array:
        """The nearest points of the full circle, (k, 2)."""
        outward = points - self.centre
        reach = np.linalg.norm(outward, axis=1, keepdims=True)
        return self.centre + outward * (self.radius / reach)

    def at(self, t: Array) -> Array:
        """Points (k, 2) at parameters (k,); the ends are exact."""
        t = np.asarray(t)[:, None]
        angle = self.first + self.sweep * t
        points = self.centre + self.radius * np.concatenate((np.cos(angle), np.sin(angle)), axis=1)
        return np.where(t == 0, self.start, np.where(t == 1, self.end, points))

    def distance(self, points: Array) -> Array:
        """Distance of points (k, 2) from the side, (k,)."""
        offset = points - self.centre
        turned = np.arctan2(offset[:, 1], offset[:, 0]) - self.first
        t = np.mod(turned * np.sign(self.sweep), 2 * np.pi) / abs(self.sweep)
        on_circle = np.abs(np.linalg.norm(offset, axis=1) - self.radius)
        ends = np.minimum(
            np.linalg.norm(points - self.start, axis=1), np.linalg.norm(points - self.end, axis=1)
        )
        return np.where(t <= 1, on_circle, ends)

    def tangent(self, t: float) -> Array:
        """Unit direction of travel at a parameter, (2,)."""
        angle = self.first + t * self.sweep
        return np.sign(self.sweep) * np.array([-np.sin(angle), np.cos(angle)])

    def part(self, low: float, high: float, start: Array, end: Array) -> "Arc":
        """The piece between two parameters, whose ends are given exactly."""
        first, sweep = self.first + low * self.sweep, (high - low) * self.sweep
        return replace(self, start=start, end=end, first=first, sweep=sweep)

    @property
    def reverse(self) -> "Arc":
        first, sweep = self.first + self.sweep, -self.sweep
        return replace(self, start=self.end, end=self.start, first=first, sweep=sweep)


Curve = Line | Arc


def curve(start: Array, end: Array, through: Array | None) -> Curve:
    """The straight side, or the arc that passes through a third point.

    Raises
    ------
    NoArcError   the three points are in line.
    """
    start, end = np.asarray(start, float), np.asarray(end, float)
    return Line(start, end) if through is None else arc_through(start, np.asarray(through), end)


def arc_through(start: Array, through: Array, end: Array) -> Arc:
    """The arc from start to end that passes through a third point, (2,) each [L].

    Raises
    ------
    NoArcError   the three points are in line.
    """
    # From the start, so that a drawing far from the origin loses nothing.
    a, b = through - start, end - start
    twice_area = float(a[0] * b[1] - a[1] * b[0])
    if abs(twice_area) <= FLATTEST * max(a @ a, b @ b):
        raise NoArcError("the three points are in line")
    to_centre = np.array([b[1] * (a @ a) - a[1] * (b @ b), a[0] * (b @ b) - b[0] * (a @ a)])
    to_centre /= 2 * twice_area
    first, last = np.arctan2(*-to_centre[::-1]), np.arctan2(*(b - to_centre)[::-1])
    # The third point on the right of the chord: the arc runs counter-clockwise.
    turn = 1.0 if twice_area > 0 else -1.0
    sweep = turn * np.mod(turn * (last - first), 2 * np.pi)
    radius = float(np.linalg.norm(to_centre))
    return Arc(start, end, start + to_centre, radius, float(first), float(sweep))


def enclosed(curve: Curve) -> float:
    """What a curve adds to the area on its left: half the integral of x dy - y dx [L^2]."""
    chord = float(curve.start[0] * curve.end[1] - curve.start[1] * curve.end[0]) / 2
    if isinstance(curve, Arc):
        return chord + curve.radius**2 * (curve.sweep - np.sin(curve.sweep)) / 2
    return chord

"""The mesher's own coordinates: from the middle of the drawing, in diagonals, rounded.

All decisions of the free mesher fall in these, so that a drawing in millimetres and the same one in
inches, or moved elsewhere, give the same mesh.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.curves import Arc, Curve, Line
from workers.analysis.meshing.drawing import Drawing
from workers.geometry import Vector

Array = NDArray[np.float64]

# A change of unit moves coordinates by 1e-16 or so: rounded to 2e-10, they move only if they lie
# within that of a rounding limit, one in a million. Sides are at least 1e-5 long.
STEPS = 2.0**32


@dataclass(frozen=True, eq=False)
class Frame:
    """middle (2,), scale [L]: where the coordinates start and what they are measured in."""

    middle: Array
    scale: float

    @classmethod
    def around(cls, drawing: Drawing) -> "Frame":
        low, high = drawing.table.bounds()
        return cls((low + high) / 2, float(np.linalg.norm(high - low)))

    def inward(self, drawing: Drawing) -> Drawing:
        """The drawing in the mesher's coordinates; vertices that are one stay so bitwise."""
        edges = tuple(replace(edge, curve=self._curve(edge.curve)) for edge in drawing.edges)
        points = {name: self.place(place) for name, place in drawing.points.items()}
        return replace(drawing, edges=edges, points=points)

    def _curve(self, curve: Curve) -> Curve:
        start, end = self.places(curve.start), self.places(curve.end)
        if isinstance(curve, Line):
            return Line(start, end)
        radius, first, sweep = (
            float(rounded(x)) for x in (curve.radius / self.scale, curve.first, curve.sweep)
        )
        return Arc(start, end, self.places(curve.centre), radius, first, sweep)

    def places(self, places: Array) -> Array:
        """Places (k, 2) in the mesher's coordinates."""
        return np.asarray(rounded((np.asarray(places) - self.middle) / self.scale))

    def place(self, place: Vector) -> Vector:
        x, y = self.places(np.array(place))
        return float(x), float(y)

    def length(self, length: float) -> float:
        """A size in the mesher's coordinates, to seven digits; none is larger than the plate."""
        return float(np.float32(min(length / self.scale, 1.0)))

    def outward(self, places: Array) -> Array:
        """Places (k, 2) in the drawing's coordinates [L]."""
        return places * self.scale + self.middle


def rounded(values: Array | float) -> Array | float:
    return np.rint(np.asarray(values) * STEPS) / STEPS

"""How fine the free mesh is where: the general size, arcs, and what the job asks.

Sizes are those of the finished mesh, in the mesher's coordinates. What the document gives by name
(`sizes`) replaces the default there; an arc always gets enough elements to be an arc. Narrow gaps
are looked at apart (`gaps.py`).
"""

from collections.abc import Iterator, Mapping
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.corners import sharp_corners
from workers.analysis.meshing.curves import Arc, enclosed
from workers.analysis.meshing.drawing import OUTSIDE, Drawing
from workers.geometry import Vector

Array = NDArray[np.float64]

GRADING = 0.25  # growth of the size away from a fine place; 0.2-0.3 keeps neighbours alike


class Sizes(NamedTuple):
    """Wanted element sizes.

    general : largest anywhere
    edges : (e,) largest along each edge of the drawing; inf where nothing is asked
    domains : (d,) largest in each domain of the drawing
    points : (k, 3) x, y and size
    grading : how much the size grows over a distance away from a fine place
    per_radius : the library's own least fineness along arcs, elements to the length of a radius
    """

    general: float
    edges: Array
    domains: Array
    points: Array
    grading: float = GRADING
    per_radius: float = 2.0

    def scaled(self, factor: float) -> "Sizes":
        """All sizes so much larger; twice as large for a mesh whose elements are split once.

        The same field in larger elements grows faster.
        """
        return self._replace(
            general=factor * self.general,
            edges=factor * self.edges,
            domains=factor * self.domains,
            points=self.points * [1.0, 1.0, factor],
            grading=factor * self.grading,
        )


class Fineness(NamedTuple):
    """Defaults for one order of element.

    elements : that the general size aims at over the plate's area
    per_turn : along a full circle
    least_per_turn : the same, where the document asks for a size
    per_gap : across a narrow gap
    """

    elements: int
    per_turn: int
    least_per_turn: int
    per_gap: int


# Quadratic elements follow an arc and a stress gradient with far fewer elements than linear ones.
DEFAULTS: Mapping[int, Fineness] = {1: Fineness(3000, 48, 24, 4), 2: Fineness(800, 24, 16, 2)}
RINGS = 5  # around a named point, where the size grows back
CORE = 2.0  # sizes from the point up to where it does not grow: one element before the split
SHARP = 50.0  # degrees: a corner between arcs that is sharper needs smaller elements
TRIANGLE = 0.433  # area of an equilateral triangle over the square of its side


def choose_sizes(
    drawing: Drawing, order: int, size: float | None, sizes: Mapping[str, float]
) -> Sizes:
    """Wanted sizes of a drawing in the mesher's coordinates.

    Parameters
    ----------
    order : of the element, 1 or 2
    size : general size that the job asks for, None for the default
    sizes : by name of a side, hole, region or point
    """
    fineness = DEFAULTS[order]
    general = size or float(np.float32(np.sqrt(drawing.area / fineness.elements)))
    domains = np.array([min(sizes.get(name, general), general) for name in drawing.regions])
    turn = np.where(drawing.table.is_arc, 2 * np.pi * drawing.table.radius, np.inf)
    edges = np.minimum(general, turn / fineness.per_turn)
    for number, edge in enumerate(drawing.edges):
        if edge.side is not None and edge.side in sizes:
            edges[number] = min(sizes[edge.side], general, turn[number] / fineness.least_per_turn)
        beside = [domains[d - 1] for d in (edge.left, edge.right) if d != OUTSIDE]
        edges[number] = min(edges[number], *beside)
    fine = [(*drawing.points[n], s) for n, s in sizes.items() if n in drawing.points]
    fine += [(*at, s) for at, s in _sharp_corners(drawing, general)]
    x, y, own = np.array(fine).reshape(-1, 3).T
    return Sizes(general, edges, domains, around(np.column_stack((x, y)), own, general))


def _sharp_corners(drawing: Drawing, general: float) -> Iterator[tuple[Vector, float]]:
    """Sharp corners between arcs, and a size with which an arc turns little against the angle."""
    sharp = sharp_corners(drawing.edges, SHARP)
    if not sharp:
        return
    radius: dict[Vector, float] = {}
    for edge in drawing.edges:
        if isinstance(edge.curve, Arc):
            for place in (edge.start, edge.end):
                radius[place] = min(radius.get(place, np.inf), edge.curve.radius)
    for corner in sharp:
        size = radius.get(corner.at, np.inf) * np.radians(corner.degrees) / 3
        if size < general:
            yield corner.at, size


def around(places: Array, sizes: Array, general: float) -> Array:
    """Size points at places (k, 2) and in rings about each; a lone point would not be followed.

    The elements that meet in a place have its size, of (k,); from their other ends on it grows.
    """
    angles = np.arange(8) * np.pi / 4
    arms = np.stack((np.cos(angles), np.sin(angles)), axis=1)
    radii = sizes[:, None] * 2.0 ** np.arange(RINGS)
    grown = sizes[:, None] + GRADING * np.maximum(radii - CORE * sizes[:, None], 0.0)
    points = np.empty((len(places), 1 + RINGS * len(arms), 3))
    points[:, 0] = np.column_stack((places, sizes))
    rings = points[:, 1:].reshape(len(places), RINGS, len(arms), 3)
    rings[..., :2] = places[:, None, None] + radii[:, :, None, None] * arms
    rings[..., 2] = np.minimum(grown, general)[:, :, None]
    return points.reshape(-1, 3)


def estimate_triangles(drawing: Drawing, sizes: Sizes) -> float:
    """About how many triangles the sizes make, rather too many than too few.

    Over each domain area / (0.433 h^2); beside an edge of length L where the size s grows with
    distance d as s + g d, the integral of L / (0.433 (s + g d)^2) over d on both sides.
    """
    areas = np.zeros(len(drawing.regions))
    for edge in drawing.edges:
        for domain, sign in ((edge.left, 1.0), (edge.right, -1.0)):
            if domain != OUTSIDE:
                areas[domain - 1] += sign * enclosed(edge.curve)
    inside = float((areas / (TRIANGLE * sizes.domains**2)).sum())
    # A place in a gap stands for a stretch of about its own size.
    stretches = np.concatenate((drawing.table.lengths, sizes.points[:, 2]))
    fine = np.concatenate((sizes.edges, sizes.points[:, 2]))
    beside = stretches / (TRIANGLE * sizes.grading) * (1 / fine - 1 / sizes.general)
    return inside + float(np.maximum(beside, 0.0).sum())


def boundary_pieces(drawing: Drawing, sizes: Sizes) -> float:
    """About how many pieces the edges are cut into."""
    along = drawing.table.lengths / sizes.edges
    return float(along.sum()) + len(sizes.points)

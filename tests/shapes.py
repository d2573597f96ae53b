"""Shapes of a job document as shapely polygons, worked out apart from the program.

Fillets are opened and closed with buffers, arcs are circles through three points from the
determinant formula, so that an error in the program's own curves cannot hide here.
"""

import math
from collections.abc import Mapping
from typing import Any

import numpy as np
import shapely
import shapely.ops
from shapely.geometry import Polygon

Json = Mapping[str, Any]

FINE = 2000  # chords that a full circle is drawn with


def polygon(shape: Json | list[Json]) -> Polygon:
    """A circle or a loop of vertices."""
    if isinstance(shape, Mapping):
        circle = shape["circle"]
        return shapely.Point(circle["centre"]).buffer(circle["radius"], quad_segs=FINE // 4)
    sides: list[np.ndarray] = []
    for vertex, following in zip(shape, [*shape[1:], shape[0]], strict=True):
        ends = np.array([vertex["at"], following["at"]], float)
        arc = _arc(vertex["at"], vertex["through"], following["at"]) if "through" in vertex else []
        sides.append(np.insert(ends, 1, arc, axis=0) if len(arc) else ends)
    found = Polygon(np.concatenate([side[:-1] for side in sides]))
    radii = {vertex.get("fillet") for vertex in shape}
    if None not in radii and len(radii) == 1:  # all corners alike, all convex
        radius = radii.pop()
        return found.buffer(-radius, quad_segs=FINE // 4).buffer(radius, quad_segs=FINE // 4)
    for k, vertex in enumerate(shape):
        if "fillet" in vertex:
            found = _rounded(found, sides[k - 1], sides[k], float(vertex["fillet"]))
    return found


def _arc(start: Any, through: Any, end: Any) -> np.ndarray:
    """Places on the arc, without its ends."""
    (ax, ay), (bx, by), (cx, cy) = start, through, end
    d = 2 * (ax * (by - cy) + bx * (cy - ay) + cx * (ay - by))
    a, b, c = ax**2 + ay**2, bx**2 + by**2, cx**2 + cy**2
    x = (a * (by - cy) + b * (cy - ay) + c * (ay - by)) / d
    y = (a * (cx - bx) + b * (ax - cx) + c * (bx - ax)) / d
    radius = math.hypot(ax - x, ay - y)
    first, middle, last = (math.atan2(py - y, px - x) for px, py in (start, through, end))
    up = (last - first) % (2 * math.pi)
    turn = up if (middle - first) % (2 * math.pi) <= up else up - 2 * math.pi
    count = max(2, math.ceil(abs(turn) / (2 * math.pi) * FINE))
    angle = first + turn * np.arange(1, count) / count
    return np.stack((x + radius * np.cos(angle), y + radius * np.sin(angle)), axis=1)


def _rounded(shape: Polygon, before: np.ndarray, after: np.ndarray, radius: float) -> Polygon:
    """The corner between two sides cut off (convex) or filled (concave) by a round.

    Its centre is where the sides, moved by the radius to where the corner turns, cross.
    """
    (ax, ay), (bx, by) = before[-1] - before[-2], after[1] - after[0]
    aside = math.copysign(radius, ax * by - ay * bx)
    moved = [_longer(side).offset_curve(aside, join_style="mitre") for side in (before, after)]
    crossings = moved[0].intersection(moved[1])
    vertex = shapely.Point(before[-1])
    centre = shapely.ops.nearest_points(vertex, crossings)[1]
    # Between the vertex, the two tangent points and the centre, less the round.
    lines = [shapely.LineString(before[::-1]), shapely.LineString(after)]
    legs = [shapely.ops.substring(line, 0, line.project(centre)) for line in lines]
    corner = Polygon([*legs[0].coords[::-1], *legs[1].coords[1:], *centre.coords])
    corner = corner.difference(centre.buffer(radius, quad_segs=FINE // 4))
    is_convex = shape.contains(corner.representative_point())
    corner = corner.buffer(1e-9 * radius)  # over the sides, which rounding has moved
    found = shape.difference(corner) if is_convex else shape.union(corner)
    largest = max(getattr(found, "geoms", [found]), key=lambda part: part.area)
    return Polygon(largest.exterior)  # no slivers


def _longer(side: np.ndarray) -> shapely.LineString:
    """A side made a little longer at both ends, for rounds that take it whole."""
    first, last = (1e-6 * (side[k] - side[j]) for k, j in ((0, 1), (-1, -2)))
    return shapely.LineString([side[0] + first, *side[1:-1], side[-1] + last])


def plate_polygon(geometry: Json) -> Polygon:
    """The material: the outline less its holes."""
    holes = [polygon(_shape(hole)) for hole in geometry.get("holes", ())]
    return polygon(geometry["outline"]).difference(shapely.union_all(holes))


def region_polygons(geometry: Json) -> dict[str, Polygon]:
    """The material of each region, inner regions cut out, and of the rest of the plate."""
    rest = plate_polygon(geometry)
    shapes = {region["name"]: polygon(_shape(region)) for region in geometry.get("regions", ())}
    found = {}
    for name in sorted(shapes, key=lambda name: shapes[name].area):
        found[name] = rest.intersection(shapes[name])
        rest = rest.difference(shapes[name])
    return {"plate": rest, **found}


def _shape(part: Json) -> Json | list[Json]:
    return part if "circle" in part else part["outline"]

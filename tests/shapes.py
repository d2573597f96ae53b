"""Shapes of a job document as shapely polygons, worked out apart from the program.

Fillets are opened and closed with buffers, arcs are circles through three points from the
determinant formula, so that an error in the program's own curves cannot hide here.
"""

import math
from collections.abc import Mapping
from typing import Any

import numpy as np
import shapely
from shapely.geometry import Polygon

Json = Mapping[str, Any]

FINE = 2000  # chords that a full circle is drawn with


def polygon(shape: Json | list[Json]) -> Polygon:
    """A circle or a loop of vertices; arcs may meet fillets only if all corners are alike."""
    if isinstance(shape, Mapping):
        circle = shape["circle"]
        return shapely.Point(circle["centre"]).buffer(circle["radius"], quad_segs=FINE // 4)
    places: list[np.ndarray] = []
    for vertex, following in zip(shape, [*shape[1:], shape[0]], strict=True):
        places.append(np.array([vertex["at"]], float))
        if "through" in vertex:
            places.append(_arc(vertex["at"], vertex["through"], following["at"]))
    found = Polygon(np.concatenate(places))
    radii = {vertex.get("fillet") for vertex in shape}
    if None not in radii and len(radii) == 1:  # all corners alike, all convex
        radius = radii.pop()
        return found.buffer(-radius, quad_segs=FINE // 4).buffer(radius, quad_segs=FINE // 4)
    for vertex in shape:
        if "fillet" in vertex:
            found = _rounded(found, np.array(vertex["at"], float), float(vertex["fillet"]))
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


def _rounded(shape: Polygon, vertex: np.ndarray, radius: float) -> Polygon:
    """The corner at a vertex cut off (convex) or filled (concave) by a round of that radius."""
    ring = np.array(shape.exterior.coords)[:-1]
    k = int(np.argmin(np.linalg.norm(ring - vertex, axis=1)))
    before, after = ring[k - 1] - vertex, ring[(k + 1) % len(ring)] - vertex
    before, after = before / np.linalg.norm(before), after / np.linalg.norm(after)
    half = math.acos(float(np.clip(before @ after, -1, 1))) / 2
    reach = radius / math.tan(half)
    # The kite between the vertex, the two tangent points and the centre, less the round.
    p, q = vertex + reach * before, vertex + reach * after
    along = before + after
    centre = vertex + along / np.linalg.norm(along) * radius / math.sin(half)
    kite = Polygon([vertex, p, centre, q])
    corner = kite.difference(shapely.Point(centre).buffer(radius, quad_segs=FINE // 4))
    corner = corner.buffer(1e-9 * radius)  # over the sides, which rounding has moved
    concave = not shape.buffer(1e-9 * radius).contains(shapely.Point(vertex + 1e-3 * reach * along))
    found = shape.union(corner) if concave else shape.difference(corner)
    largest = max(getattr(found, "geoms", [found]), key=lambda part: part.area)
    return Polygon(largest.exterior)  # no slivers


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

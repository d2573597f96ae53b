"""Random plates, valid and faulty, from any source of random numbers.

`random_plate` draws an outline (rectangle, polygon, slot, disc or angle; with arcs and fillets),
holes at narrow and wide gaps, regions and points. It checks with shapely that what it draws is
valid, so that the program's own checks are put to the test. `spoil` makes a plate faulty.
"""

import math
from collections.abc import Callable
from random import Random
from typing import Any

import numpy as np
import shapely
from shapely.geometry import Polygon

from tests.gallery import Json, circle, disc, loop, polar, rectangle, slot
from tests.shapes import polygon

NARROWEST = 5e-5  # of the size: gaps that must be meshed
LENGTH = 100.0  # of a plate, before it is scaled


def random_plate(rng: Random, *, narrow: float = 0.5, scale: float = 1.0) -> Json:
    """A valid `geometry`; narrow is the share of holes that come close to something."""
    outline = rng.choice((_rectangle, _polygon, _slot, _disc, _angle))(rng)
    plate = polygon(outline)
    holes: list[Json] = []
    for number in range(rng.choice((0, 1, 1, 2, 3, 5))):
        found = _place_hole(rng, plate, is_narrow=rng.random() < narrow)
        if found is not None:
            holes.append({"name": f"hole {number}", **found})
            plate = plate.difference(polygon(_shape(found)))
    geometry: Json = {"outline": outline, "holes": holes}
    if regions := _regions(rng, outline, holes, plate):
        geometry["regions"] = regions
    points = _points(rng, plate, regions)
    if points:
        geometry["points"] = points
    return scaled(geometry, scale)


def _shape(part: Json) -> Any:
    return part if "circle" in part else part["outline"]


# --- outlines --------------------------------------------------------------------------------


def _rectangle(rng: Random) -> list[Json]:
    width, height = LENGTH, LENGTH * rng.choice((0.1, 0.3, 0.6, 1.0))
    outline = rectangle(0, 0, width, height)
    for vertex in outline:
        if rng.random() < 0.3:
            vertex["fillet"] = min(width, height) * rng.choice((0.02, 0.1, 0.3, 0.5))
    if rng.random() < 0.3:
        for vertex in outline:
            vertex.pop("fillet", None)
        outline[1]["through"] = [width + height * rng.choice((0.05, 0.2, 0.5, -0.05)), height / 2]
    return outline


def _polygon(rng: Random) -> list[Json]:
    """Star-shaped, no corner sharper than about 35 degrees."""
    for _ in range(50):
        count = rng.randint(3, 9)
        angles = sorted(rng.uniform(0, 360) for _ in range(count))
        if min(np.diff([*angles, angles[0] + 360])) < 15:
            continue
        if max(np.diff([*angles, angles[0] + 360])) > 150:
            continue
        places = [polar(0, 0, LENGTH / 2 * rng.uniform(0.5, 1), angle) for angle in angles]
        if min(_corner_angles(places)) > 35:
            outline = loop(*places)
            if rng.random() < 0.5:
                outline[0]["fillet"] = 0.2 * min(
                    math.dist(places[0], places[1]), math.dist(places[0], places[-1])
                ) * math.tan(math.radians(min(60.0, _corner_angles(places)[0] / 2)))  # fmt: skip
            return outline
    return loop((0, 0), (LENGTH, 0), (LENGTH / 2, LENGTH))


def _corner_angles(places: list[list[float]]) -> list[float]:
    """Interior or exterior angle, whichever is less, of every corner [degrees]."""
    p = np.array(places)
    before, after = np.roll(p, 1, axis=0) - p, np.roll(p, -1, axis=0) - p
    cosine = (before * after).sum(axis=1)
    cosine /= np.linalg.norm(before, axis=1) * np.linalg.norm(after, axis=1)
    return np.degrees(np.arccos(np.clip(cosine, -1, 1))).tolist()


def _slot(rng: Random) -> list[Json]:
    return slot(0, 0, LENGTH * rng.uniform(0.3, 1), LENGTH * rng.uniform(0.1, 0.4))


def _disc(rng: Random) -> list[Json]:
    return disc(0, 0, LENGTH / 2)


def _angle(rng: Random) -> list[Json]:
    leg, width = LENGTH * rng.uniform(0.4, 1), LENGTH * rng.uniform(0.1, 0.3)
    outline = loop((0, 0), (LENGTH, 0), (LENGTH, width), (width, width), (width, leg), (0, leg))
    if rng.random() < 0.6:
        outline[3]["fillet"] = min(LENGTH - width, leg - width) * rng.choice((0.05, 0.3, 0.9))
    return outline


# --- holes -----------------------------------------------------------------------------------


def _place_hole(rng: Random, plate: Polygon, *, is_narrow: bool) -> Json | None:
    """A hole clear of everything; a narrow one at a small gap from some border."""
    low_x, low_y, high_x, high_y = plate.bounds
    for _ in range(60):
        size = LENGTH * math.exp(rng.uniform(math.log(0.01), math.log(0.25)))
        make = rng.choice((_round, _oblong, _box))
        gap = NARROWEST * LENGTH * math.exp(rng.uniform(0, 6)) if is_narrow else 0.02 * LENGTH
        if is_narrow:
            border = rng.choice([plate.exterior, *plate.interiors])
            along = rng.uniform(0, border.length)
            further = (along + 1e-6) % border.length  # the ring starts again after its end
            at, ahead = (np.array(border.interpolate(s).coords[0]) for s in (along, further))
            direction = (ahead - at) / np.linalg.norm(ahead - at)
            inward = np.array([-direction[1], direction[0]])
            if not plate.contains(shapely.Point(at + 1e-3 * inward)):
                inward = -inward
            place = at + (size + gap) * inward
            make = _round
        else:
            place = np.array([rng.uniform(low_x, high_x), rng.uniform(low_y, high_y)])
        hole = make(rng, float(place[0]), float(place[1]), size)
        shape = polygon(_shape(hole))
        if plate.contains(shape) and min(
            ring.distance(shape.exterior) for ring in (plate.exterior, *plate.interiors)
        ) > min(0.9 * gap, 0.02 * LENGTH):
            return hole
    return None


def _round(rng: Random, x: float, y: float, size: float) -> Json:
    return circle(x, y, size)


def _oblong(rng: Random, x: float, y: float, size: float) -> Json:
    return {"outline": slot(x, y, size * rng.uniform(0.5, 3), size / 2)}


def _box(rng: Random, x: float, y: float, size: float) -> Json:
    turn = rng.uniform(0, 90)
    box = loop(*(polar(x, y, size, turn + a) for a in (0, 70, 180, 250)))
    if rng.random() < 0.5:
        radius = size * rng.choice((0.1, 0.3))
        box = [{**vertex, "fillet": radius} for vertex in box]
    return {"outline": box}


# --- regions and points -------------------------------------------------------------------------


def _regions(rng: Random, outline: list[Json], holes: list[Json], plate: Polygon) -> list[Json]:
    regions = []
    for number, hole in enumerate(holes):
        if "circle" in hole and rng.random() < 0.3:
            (x, y), radius = hole["circle"]["centre"], hole["circle"]["radius"]
            collar = circle(x, y, radius * rng.choice((1.2, 1.5, 2.5)))
            if _clear(polygon(collar), plate, hole, holes):
                regions.append({"name": f"collar {number}", "thickness": 3, **collar})
                break
    if rng.random() < 0.3 and not regions and not any("through" in v or "fillet" in v
                                                      for v in outline):  # fmt: skip
        part = _part(rng, [vertex["at"] for vertex in outline])
        if part and _clear(Polygon(part), plate, {}, holes):
            regions.append({"name": "part", "thickness": 3, "outline": loop(*part)})
    return regions


def _part(rng: Random, places: list[list[float]]) -> list[list[float]] | None:
    """What a diagonal cuts off from a polygon, if it lies inside and both parts are blunt."""
    if len(places) < 4:
        return None
    k = rng.randint(2, len(places) - 2)
    diagonal = shapely.LineString([places[0], places[k]])
    part, rest = places[: k + 1], [*places[k:], places[0]]
    inside = Polygon(places).buffer(1e-9).contains(diagonal)
    clear = all(diagonal.distance(shapely.Point(p)) > 1 for p in (*part[1:-1], *rest[1:-1]))
    blunt = inside and clear and min(_corner_angles(part) + _corner_angles(rest)) > 20
    return part if blunt else None


def _clear(shape: Polygon, plate: Polygon, own: Json, holes: list[Json]) -> bool:
    """Whether a region's border stays away from the plate's, its own hole apart."""
    others = [polygon(_shape(h)).exterior for h in holes if h is not own]
    away = 0.01 * LENGTH
    border = shape.exterior
    inside = Polygon(plate.exterior).buffer(1e-6).contains(shape)
    apart = not own or plate.exterior.distance(border) > away
    return inside and apart and all(ring.distance(border) > away for ring in others)


def _points(rng: Random, plate: Polygon, regions: list[Json]) -> dict[str, list[float]]:
    points: dict[str, list[float]] = {}
    low_x, low_y, high_x, high_y = plate.bounds
    borders = [plate.exterior, *plate.interiors, *(polygon(_shape(r)).exterior for r in regions)]
    for number in range(rng.choice((0, 0, 1, 2, 3))):
        place = shapely.Point(rng.uniform(low_x, high_x), rng.uniform(low_y, high_y))
        apart = all(math.dist(place.coords[0], other) > 0.01 * LENGTH for other in points.values())
        if apart and plate.contains(place) and min(b.distance(place) for b in borders) > 0.05:
            points[f"point {number}"] = list(place.coords[0])
    return points


# --- another size, place, or with a fault ------------------------------------------------------


def scaled(geometry: Json, scale: float) -> Json:
    """All lengths and places times a factor."""
    return _mapped(geometry, lambda place: [c * scale for c in place], lambda size: size * scale)


def _mapped(part: Any, place: Callable[[Any], Any], length: Callable[[float], float]) -> Any:
    if isinstance(part, list):
        return [_mapped(item, place, length) for item in part]
    if not isinstance(part, dict):
        return part
    done = {}
    for key, value in part.items():
        if key in ("at", "through", "centre"):
            done[key] = place(value)
        elif key in ("fillet", "radius", "thickness"):
            done[key] = length(value)
        elif key == "points":
            done[key] = {name: place(at) for name, at in value.items()}
        else:
            done[key] = _mapped(value, place, length)
    return done


def spoil(rng: Random, geometry: Json) -> Json:
    """The plate with one thing changed that mostly, not always, makes it faulty."""
    spoilt = _mapped(geometry, list, float)  # a copy
    rng.choice(SPOILERS)(rng, spoilt)
    return spoilt


def _swap_vertices(rng: Random, geometry: Json) -> None:
    outline = geometry["outline"]
    i, j = rng.sample(range(len(outline)), 2)
    outline[i]["at"], outline[j]["at"] = outline[j]["at"], outline[i]["at"]


def _move_vertex(rng: Random, geometry: Json) -> None:
    vertex = rng.choice(geometry["outline"])
    vertex["at"] = [c + rng.uniform(-LENGTH, LENGTH) for c in vertex["at"]]


def _repeat_vertex(rng: Random, geometry: Json) -> None:
    outline = geometry["outline"]
    i = rng.randrange(len(outline))
    offset = rng.choice((0.0, 1e-9, 1e-4, 3e-3))
    outline.insert(i, {"at": [c + offset for c in outline[i]["at"]]})


def _bad_arc(rng: Random, geometry: Json) -> None:
    vertex = rng.choice(geometry["outline"])
    vertex["through"] = [c + rng.uniform(-LENGTH, LENGTH) for c in vertex["at"]]


def _large_fillet(rng: Random, geometry: Json) -> None:
    rng.choice(geometry["outline"])["fillet"] = LENGTH * rng.choice((0.01, 0.3, 1, 10))


def _add_hole(rng: Random, geometry: Json) -> None:
    x, y = (rng.uniform(-0.6, 1.2) * LENGTH for _ in range(2))
    geometry["holes"].append({"name": "more", **circle(x, y, LENGTH * rng.uniform(0.01, 0.5))})


def _touching_hole(rng: Random, geometry: Json) -> None:
    border = polygon(geometry["outline"]).exterior
    at = border.interpolate(rng.uniform(0, border.length)).coords[0]
    radius = LENGTH * rng.uniform(0.01, 0.1)
    shift = radius + LENGTH * rng.choice((0.0, 1e-9, 1e-6, 1e-5, 1e-4))
    geometry["holes"].append(
        {"name": "touching", **circle(at[0], at[1] + rng.choice((-1, 1)) * shift, radius)}
    )


def _same_hole(rng: Random, geometry: Json) -> None:
    if geometry["holes"]:
        copy = rng.choice(geometry["holes"])
        factor = rng.choice((1.0, 1 + 1e-9, 1 + 1e-4, 0.5))
        geometry["holes"].append({**scaled(copy, factor), "name": "again"})
    else:
        _add_hole(rng, geometry)


def _wild_region(rng: Random, geometry: Json) -> None:
    x, y = (rng.uniform(-0.5, 1) * LENGTH for _ in range(2))
    shape = rng.choice(
        (circle(x, y, LENGTH * rng.uniform(0.01, 0.5)), {"outline": rectangle(x, y, 30, 20)})
    )
    geometry.setdefault("regions", []).append({"name": "wild", "thickness": 3, **shape})


def _wild_loop(rng: Random, geometry: Json) -> None:
    places = [[rng.uniform(-0.3, 1) * LENGTH for _ in range(2)] for _ in range(rng.randint(3, 7))]
    geometry["holes"].append({"name": "wild", "outline": loop(*places)})


def _wild_outline(rng: Random, geometry: Json) -> None:
    places = [[rng.uniform(-0.3, 1) * LENGTH for _ in range(2)] for _ in range(rng.randint(3, 9))]
    geometry["outline"] = loop(*places)


def _wild_point(rng: Random, geometry: Json) -> None:
    place = [rng.uniform(-1, 1) * LENGTH for _ in range(2)]
    geometry.setdefault("points", {})["wild"] = place


SPOILERS: tuple[Callable[[Random, Json], None], ...] = (
    _swap_vertices,
    _move_vertex,
    _repeat_vertex,
    _bad_arc,
    _large_fillet,
    _add_hole,
    _touching_hole,
    _same_hole,
    _wild_region,
    _wild_loop,
    _wild_outline,
    _wild_point,
)

"""A document's outline, holes, regions and points become a drawing, or clear faults.

Runs where a job is accepted: NumPy and shapely only, milliseconds for a usual plate.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import shapely

from workers.analysis.meshing.arrangement import RISE, arrange, polygon
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.drawing_checks import check_loops
from workers.analysis.meshing.loops import SHORTEST, Loop, Side, circle_sides, vertex_sides
from workers.errors import DocumentError, Fault
from workers.job import CircleShape, OutlineGeometry, Vector, Vertex

FARTHEST = 1e5  # diagonals from the origin, beyond which coordinates lose their digits


@dataclass(frozen=True, eq=False)
class _Given:
    """A loop as the document gives it."""

    kind: str
    label: str
    name: str
    pointer: str
    shape: CircleShape | tuple[Vertex, ...]


def draw(geometry: OutlineGeometry) -> Drawing:
    """The drawing of an outline geometry, checked.

    Raises
    ------
    DocumentError   carries every fault, each with its pointer and the coordinates of its place.
    """
    given = list(_given(geometry))
    diagonal = _diagonal(geometry.outline)
    faults = _origin_faults(geometry.outline, diagonal)
    loops = []
    for item in given:
        sides, found = _sides(item, diagonal)
        faults += found
        if not found:
            loops.append(Loop(item.kind, item.label, item.name, item.pointer, sides))
    if not faults:
        faults = check_loops(loops, diagonal)
    if not faults:
        faults = list(_point_faults(geometry.points, loops, diagonal))
    if faults:
        raise DocumentError(faults)
    return arrange(loops, dict(geometry.points), diagonal)


def _given(geometry: OutlineGeometry) -> Iterator[_Given]:
    yield _Given("outline", "the outline", "", "/geometry/outline", geometry.outline)
    for hole in geometry.holes:
        yield _Given("hole", f"hole {hole.name!r}", hole.name, hole.pointer, hole.shape)
    for region in geometry.regions:
        if region.shape is not None:
            label = f"region {region.name!r}"
            yield _Given("region", label, region.name, region.pointer, region.shape)


def _sides(item: _Given, diagonal: float) -> tuple[tuple[Side, ...], list[Fault]]:
    name = item.name if item.kind == "hole" else None
    if isinstance(item.shape, CircleShape):
        if item.shape.radius < SHORTEST * diagonal:
            needed = f"{SHORTEST * diagonal:.3g}"
            return (), [
                Fault(
                    f"{item.pointer}/circle/radius",
                    f"{item.label} of radius {item.shape.radius:.3g} is too small for a plate of "
                    f"this size; at least {needed} is needed",
                )
            ]
        return circle_sides(item.shape, name, f"{item.pointer}/circle"), []
    return vertex_sides(item.shape, name, diagonal)


def _diagonal(outline: tuple[Vertex, ...]) -> float:
    places = np.array([v.at for v in outline] + [v.through for v in outline if v.through])
    return float(np.linalg.norm(np.ptp(places, axis=0)))


def _origin_faults(outline: tuple[Vertex, ...], diagonal: float) -> list[Fault]:
    far = max(abs(c) for vertex in outline for c in vertex.at)
    if far <= FARTHEST * diagonal:
        return []
    return [
        Fault(
            "/geometry/outline",
            f"the plate lies {far:.3g} from the origin but is only {diagonal:.3g} across, which "
            "costs the digits of its coordinates; move the origin nearer",
        )
    ]


def _point_faults(
    points: Mapping[str, Vector], loops: list[Loop], diagonal: float
) -> Iterator[Fault]:
    shapes = [polygon(loop, RISE * diagonal) for loop in loops if loop.kind != "region"]
    for name, place in points.items():
        here = shapely.Point(place)
        outside = shapes[0].distance(here) > SHORTEST * diagonal / 2
        hole = next((h for h in shapes[1:] if _well_inside(h, here, diagonal)), None)
        if outside or hole is not None:
            seen = "in a hole" if not outside else "outside the plate"
            yield Fault(
                f"/geometry/points/{_escaped(name)}",
                f"point {name!r} at ({place[0]:.6g}, {place[1]:.6g}) lies {seen}; a point must "
                "lie on the plate or on its edge",
            )


def _well_inside(shape: shapely.Polygon, here: shapely.Point, diagonal: float) -> bool:
    return shape.contains(here) and shape.exterior.distance(here) > SHORTEST * diagonal / 2


def _escaped(name: str) -> str:
    return name.replace("~", "~0").replace("/", "~1")

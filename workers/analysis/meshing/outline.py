"""A document's outline, holes, regions and points become a drawing, or clear faults.

Runs where a job is accepted: NumPy and shapely only, milliseconds for a usual plate.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import shapely

from workers.analysis.mesh import PLATE
from workers.analysis.meshing.arrangement import Arrangement, arrange
from workers.analysis.meshing.contacts import contact_faults
from workers.analysis.meshing.corners import corner_faults
from workers.analysis.meshing.curve_table import CurveTable, cross, norm
from workers.analysis.meshing.curves import NoArcError, curve
from workers.analysis.meshing.domains import Domains
from workers.analysis.meshing.drawing import OUTSIDE, Drawing, Edge
from workers.analysis.meshing.first_few import first_few
from workers.analysis.meshing.loops import SHORTEST, Loop, Side, circle_sides, vertex_sides
from workers.analysis.meshing.places import at
from workers.analysis.meshing.proximity import CrowdedError, close_places, near_pairs
from workers.errors import DocumentError, Fault
from workers.geometry import CircleShape, OutlineGeometry, Vector, Vertex

GEOMETRY = "/geometry"
FARTHEST = 1e5  # diagonals from the origin, beyond which coordinates lose their digits


def draw(geometry: OutlineGeometry) -> Drawing:
    """The drawing of an outline geometry, checked.

    Raises
    ------
    DocumentError   carries every fault, each with its pointer and the coordinates of its place.
    """
    diagonal = _diagonal(geometry.outline)
    faults = _origin_faults(geometry.outline, diagonal)
    if faults:
        raise DocumentError(faults)
    loops = []
    for item in _given(geometry):
        sides, found = _sides(item, SHORTEST * diagonal)
        loop = Loop(item.kind, item.label, item.name, item.pointer, sides)
        found = found or _flat_faults(loop, SHORTEST * diagonal)
        faults += found
        if not found:
            loops.append(loop)
    if not loops:
        raise DocumentError(faults)
    try:
        arrangement = arrange(loops, geometry.points, diagonal)
        faults += first_few(iter(contact_faults(arrangement, diagonal)), GEOMETRY)
        if faults:
            raise DocumentError(faults)
        return _drawing(arrangement, geometry.points, diagonal)
    except CrowdedError as error:
        raise DocumentError([*faults, _crowded(error)]) from error


def _drawing(arrangement: Arrangement, points: Mapping[str, Vector], diagonal: float) -> Drawing:
    """The drawing of an arrangement whose pieces meet at their ends only; raises as `draw`."""
    domains = Domains(arrangement)
    if faults := list(first_few(iter(domains.faults()), GEOMETRY)):
        raise DocumentError(faults)
    edges = tuple(_edges(arrangement, domains))
    inner = _inner_points(arrangement, domains, edges)
    faults = list(first_few(iter(corner_faults(edges)), GEOMETRY))
    faults += first_few(_point_faults(points, arrangement, inner, diagonal), f"{GEOMETRY}/points")
    if faults:
        raise DocumentError(faults)
    return _numbered(arrangement, edges, inner)


def _crowded(error: CrowdedError) -> Fault:
    return Fault(
        GEOMETRY,
        f"far too many vertices, sides or points lie in one place near {at(error.at)}; is a hole "
        "or a region repeated?",
    )


@dataclass(frozen=True, eq=False)
class _Given:
    """A loop as the document gives it."""

    kind: str
    label: str
    name: str
    pointer: str
    shape: CircleShape | tuple[Vertex, ...]


def _given(geometry: OutlineGeometry) -> Iterator[_Given]:
    yield _Given("outline", "the outline", "", "/geometry/outline", geometry.outline)
    for hole in geometry.holes:
        yield _Given("hole", f"hole {hole.name!r}", hole.name, hole.pointer, hole.shape)
    for region in geometry.regions:
        if region.shape is not None:
            label = f"region {region.name!r}"
            yield _Given("region", label, region.name, region.pointer, region.shape)


# --- loops --------------------------------------------------------------------------------------


def _diagonal(outline: tuple[Vertex, ...]) -> float:
    """Of the upright box around the outline, arcs included [L]; fillets take nothing from it."""
    curves = []
    for vertex, following in zip(outline, (*outline[1:], outline[0]), strict=True):
        start, end = np.asarray(vertex.at, float), np.asarray(following.at, float)
        try:
            curves.append(curve(start, end, np.asarray(vertex.through, float)
                                if vertex.through else None))  # fmt: skip
        except NoArcError:  # found again, as a fault, when the loop is made
            curves.append(curve(start, end, None))
    low, high = CurveTable.of(curves).bounds()
    return float(np.linalg.norm(high - low))


def _origin_faults(outline: tuple[Vertex, ...], diagonal: float) -> list[Fault]:
    far = max(abs(c) for vertex in outline for c in vertex.at)
    if diagonal == 0:
        return [Fault("/geometry/outline", f"all vertices are at {at(outline[0].at)}")]
    if far <= FARTHEST * diagonal:
        return []
    return [
        Fault(
            "/geometry/outline",
            f"the plate lies {far:.3g} from the origin, near {at(outline[0].at)}, but is only "
            f"{diagonal:.3g} across, which costs the digits of its coordinates; move the origin "
            "nearer",
        )
    ]


def _sides(item: _Given, shortest: float) -> tuple[tuple[Side, ...], list[Fault]]:
    name = item.name if item.kind == "hole" else None
    if not isinstance(item.shape, CircleShape):
        return vertex_sides(item.shape, name, shortest)
    if item.shape.radius >= shortest:
        return circle_sides(item.shape, name, f"{item.pointer}/circle"), []
    return (), [
        Fault(
            f"{item.pointer}/circle/radius",
            f"{item.label} of radius {item.shape.radius:.3g} at {at(item.shape.centre)} is too "
            f"small for a plate of this size; at least {shortest:.3g} is needed",
        )
    ]


def _flat_faults(loop: Loop, shortest: float) -> list[Fault]:
    """A loop all of whose sides lie in one line; that they touch each other need not be said."""
    curves = [side.curve for side in loop.sides]
    places = np.concatenate([c.at(np.array([0.0, 0.5])) for c in curves])
    away = places - places[0]
    farthest = away[np.argmax(norm(away))]
    if np.abs(cross(away, farthest)).max() >= shortest * norm(farthest):
        return []
    return [
        Fault(
            loop.pointer,
            f"{loop.label} encloses no area: its sides from {at(places[0])} lie in line",
        )
    ]


# --- the drawing --------------------------------------------------------------------------------


def _edges(arrangement: Arrangement, domains: Domains) -> Iterator[Edge]:
    """The pieces that lie between two domains; those that divide nothing are left out."""
    for number, piece in enumerate(arrangement.pieces):
        left, right = domains.of(number)
        if left != right:
            yield Edge(piece.curve, piece.name, left, right, piece.pointer)


def _inner_points(
    arrangement: Arrangement, domains: Domains, edges: tuple[Edge, ...]
) -> dict[str, int]:
    """Domain of each named point that is no vertex of an edge."""
    on_edges = {place for edge in edges for place in (edge.start, edge.end)}
    names = [n for n in arrangement.points if arrangement.place(n) not in on_edges]
    places = np.array([arrangement.place(name) for name in names]).reshape(-1, 2)
    return dict(zip(names, domains.at(places), strict=True))


def _point_faults(
    given: Mapping[str, Vector], arrangement: Arrangement, inner: Mapping[str, int], diagonal: float
) -> Iterator[Fault]:
    shortest = SHORTEST * diagonal
    names = list(inner)
    places = np.array([given[name] for name in names]).reshape(-1, 2)
    for name, domain in inner.items():
        if domain == OUTSIDE:
            yield Fault(
                _pointer(name),
                f"point {name!r} at {at(given[name])} lies outside the plate or in a hole; a point "
                "must lie on the plate or on its edge",
            )
    near, _ = close_places(arrangement.table, places, shortest)
    for number in np.unique(near):
        if inner[names[number]] != OUTSIDE:
            yield _too_close(names[number], given, "a side", shortest)
    points = shapely.points(places)
    for one, other in zip(*near_pairs(points, points, shortest), strict=True):
        same = arrangement.points[names[one]] == arrangement.points[names[other]]
        if one < other and not same:
            yield _too_close(names[other], given, f"point {names[one]!r}", shortest)


def _too_close(name: str, given: Mapping[str, Vector], what: str, shortest: float) -> Fault:
    return Fault(
        _pointer(name),
        f"point {name!r} at {at(given[name])} is nearly, but not quite, on {what}; put it there, "
        f"or at least {shortest:.3g} away",
    )


def _pointer(name: str) -> str:
    return "/geometry/points/" + name.replace("~", "~0").replace("/", "~1")


def _numbered(
    arrangement: Arrangement, edges: tuple[Edge, ...], inner: Mapping[str, int]
) -> Drawing:
    """Domains get numbers without gaps; the plate's own is left out if regions cover it all."""
    used = sorted({d for edge in edges for d in (edge.left, edge.right)} - {OUTSIDE})
    number = {OUTSIDE: OUTSIDE} | {old: new for new, old in enumerate(used, start=1)}
    loops = arrangement.loops
    return Drawing(
        tuple(Edge(e.curve, e.side, number[e.left], number[e.right], e.pointer) for e in edges),
        tuple(PLATE if old == 1 else loops[old - 2].name for old in used),
        {name: arrangement.place(name) for name in arrangement.points},
        {name: number[domain] for name, domain in inner.items()},
    )

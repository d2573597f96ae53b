"""The shapes that decide whether a plate is thin: parts, holes, arcs and short sides."""

from collections.abc import Iterator
from itertools import pairwise
from typing import NamedTuple

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.connected import label_components
from workers.analysis.mesh import Mesh
from workers.geometry import CircleShape, OutlineGeometry, PatchGeometry, Vector, Vertex
from workers.job import Job

Array = NDArray[np.float64]


CHUNK = 256  # sides of a hull at a time, which bounds the memory


class Feature(NamedTuple):
    """A shape with the length that the thickness is compared with [L]."""

    what: str
    size: float
    at: tuple[float, float]


def parts(mesh: Mesh) -> Iterator[Feature]:
    """In-plane size of each part: the smaller of its width across and 4 area / perimeter."""
    loops = _loops(mesh)
    for part in range(mesh.component_count):
        points = mesh.nodes[mesh.components == part]
        centre = points.mean(axis=0)
        own = [loop for loop in loops if loop.part == part]
        mean_width = 4 * sum(loop.area for loop in own) / sum(loop.perimeter for loop in own)
        size = min(_width(points), mean_width)
        yield Feature("the plate", size, (float(centre[0]), float(centre[1])))


def _width(points: Array) -> float:
    """The smallest distance of two parallel lines with all points between them.

    One of the lines runs along a side of their convex hull (Houle & Toussaint, "Computing the width
    of a set", IEEE Trans. Pattern Analysis and Machine Intelligence 10 (1988)).
    """
    hull = shapely.get_coordinates(shapely.convex_hull(shapely.multipoints(points)))
    side = np.diff(hull, axis=0)
    normal = np.column_stack((-side[:, 1], side[:, 0])) / np.linalg.norm(side, axis=1)[:, None]
    chunks = np.array_split(normal, len(normal) // CHUNK + 1)
    return min(float(np.ptp(hull @ chunk.T, axis=0).min()) for chunk in chunks)


def holes(mesh: Mesh) -> Iterator[Feature]:
    """Radius of each hole, 2 area / perimeter: exact for a circle."""
    for loop in _loops(mesh):
        if loop.area < 0:
            yield Feature("a hole of radius", -2 * loop.area / loop.perimeter, loop.at)


class _Loop(NamedTuple):
    area: float  # negative for holes, because the material is on the left
    perimeter: float
    at: tuple[float, float]  # a point on it
    part: int


def _loops(mesh: Mesh) -> list[_Loop]:
    """Closed loops of the boundary; loops that touch in a node count as one."""
    facets = mesh.boundary
    start, end = mesh.facet_ends(facets).T
    label = label_components(mesh.node_count, start, end)[start]
    _, number = np.unique(label, return_inverse=True)
    area = np.bincount(number, _swept_areas(mesh))
    perimeter = np.bincount(number, mesh.facet_lengths(facets))
    first = np.unique(number, return_index=True)[1]
    where = mesh.nodes[start[first]].tolist()
    part = mesh.components[start[first]].tolist()
    return [
        _Loop(float(area[i]), float(perimeter[i]), (where[i][0], where[i][1]), part[i])
        for i in range(len(first))
    ]


def _swept_areas(mesh: Mesh) -> Array:
    """Area between each boundary facet, along its curve, and the origin; Green's theorem."""
    facets = mesh.boundary
    area = np.empty(len(facets))
    for group in mesh.facet_groups(facets):
        element = mesh.blocks[group.block].element
        coords = mesh.nodes[mesh.blocks[group.block].connectivity[group.elements]]
        x, t = element.side_points(coords, group.side)
        twice = x[..., 0] * t[..., 1] - x[..., 1] * t[..., 0]
        area[group.rows] = twice @ element.side_rule().weights / 2
    return area


def arcs(job: Job) -> Iterator[Feature]:
    """Radius of every fillet and every arc that the geometry draws; circular holes apart."""
    geometry = job.geometry
    if isinstance(geometry, OutlineGeometry):
        for loop in _drawn(geometry):
            yield from _loop_arcs(loop)
    if isinstance(geometry, PatchGeometry):
        for patch in geometry.patches:
            for i, through in enumerate(patch.through):
                if through is not None:
                    yield _arc(patch.corners[i], through, patch.corners[(i + 1) % 4])


def sides(job: Job, mesh: Mesh) -> Iterator[Feature]:
    """Length of every straight side that is drawn, and of every named side of the mesh."""
    if isinstance(job.geometry, OutlineGeometry):
        for loop in _drawn(job.geometry):
            for one, other in pairwise((*loop, loop[0])):
                if one.through is None:
                    length = float(np.hypot(other.at[0] - one.at[0], other.at[1] - one.at[1]))
                    yield Feature(_side_name(one.side), length, _middle(one.at, other.at))
        return
    for name, facets in mesh.sides.items():
        if len(facets):
            ends = mesh.nodes[mesh.facet_ends(facets)[0]]
            length = float(mesh.facet_lengths(facets).sum())
            yield Feature(_side_name(name), length, (float(ends[0, 0]), float(ends[0, 1])))


def _side_name(name: str | None) -> str:
    return f"the side {name!r} of length" if name else "a side of length"


def _drawn(geometry: OutlineGeometry) -> list[tuple[Vertex, ...]]:
    inner = [hole.shape for hole in geometry.holes if not isinstance(hole.shape, CircleShape)]
    return [geometry.outline, *inner]


def _loop_arcs(loop: tuple[Vertex, ...]) -> Iterator[Feature]:
    for one, other in pairwise((*loop, loop[0])):
        if one.fillet:
            yield Feature("a fillet of radius", one.fillet, one.at)
        if one.through is not None:
            yield _arc(one.at, one.through, other.at)


def _arc(start: Vector, through: Vector, end: Vector) -> Feature:
    """Radius of the circle through three points: product of the sides over four times the area."""
    a, b, c = np.array(start), np.array(through), np.array(end)
    ab, bc = b - a, c - b
    area = abs(ab[0] * bc[1] - ab[1] * bc[0]) / 2
    product = np.linalg.norm(ab) * np.linalg.norm(bc) * np.linalg.norm(c - a)
    return Feature("an arc of radius", float(product / (4 * area)) if area else np.inf, through)


def _middle(a: Vector, b: Vector) -> tuple[float, float]:
    return (a[0] + b[0]) / 2, (a[1] + b[1]) / 2

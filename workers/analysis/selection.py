"""What a target catches on a mesh: nodes, boundary facets, elements.

A target that catches nothing is a fault, and so is a segment that ends inside a facet: a load acts
where the document says, or not at all.
"""

from dataclasses import dataclass, field
from difflib import get_close_matches
from functools import singledispatch

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Facets, Mesh
from workers.errors import Fault, MeshError
from workers.job import Box, Named, Nodes, OnCircle, Segment, Target

TOLERANCE = 1e-6  # of the mesh's diagonal, where a selector does not say otherwise
NAMES_SHOWN = 12

Mask = NDArray[np.bool_]
Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Selection:
    """What a target caught.

    nodes : (k,) int32, sorted
    facets : (f, 3) int32   block, element, side
    elements : for each block the numbers of its caught elements, (m,) intp
    """

    nodes: NDArray[np.int32]
    facets: Facets
    elements: tuple[NDArray[np.intp], ...]

    @property
    def element_count(self) -> int:
        return sum(len(numbers) for numbers in self.elements)


def select(mesh: Mesh, target: Target, pointer: str) -> Selection:
    """Find what a target catches.

    Parameters
    ----------
    pointer : JSON pointer of the target in the job document, for the fault

    Raises
    ------
    MeshError   nothing is caught, a name is unknown, or a segment ends inside a facet; says what
        would have been nearest.
    """
    return _catch(target, mesh, pointer)


@dataclass(frozen=True, eq=False)
class Finder:
    """Selections on one mesh, each target looked up once however often it is used."""

    mesh: Mesh
    known: dict[Target, Selection | tuple[Fault, ...]] = field(default_factory=dict)

    def find(self, target: Target, pointer: str) -> Selection:
        """As `select`."""
        if target not in self.known:
            try:
                self.known[target] = select(self.mesh, target, "")
            except MeshError as error:
                self.known[target] = error.faults
        found = self.known[target]
        if isinstance(found, Selection):
            return found
        raise MeshError(Fault(pointer + fault.pointer, fault.message) for fault in found)


@singledispatch
def _catch(target: object, mesh: Mesh, pointer: str) -> Selection:
    raise TypeError(f"{type(target).__name__} is not a target")


# --- by name -----------------------------------------------------------------------------------


@_catch.register
def _named(target: Named, mesh: Mesh, pointer: str) -> Selection:
    if target.name in mesh.sides:
        return _of_facets(mesh, mesh.sides[target.name])
    if target.name in mesh.points:
        return _of_nodes(mesh, np.array([mesh.points[target.name]], np.int32), no_facets())
    if target.name in mesh.regions:
        return _region(mesh, mesh.regions.index(target.name))
    raise _fault(pointer, unknown_name(target.name, mesh))


def unknown_name(name: str, mesh: Mesh) -> str:
    """Sentence that says what there is instead of an unknown name."""
    known = [*mesh.sides, *mesh.points, *mesh.regions]
    close = get_close_matches(name, known, n=1)
    hint = f"; did you mean {close[0]!r}? Known:" if close else "; known:"
    kinds = (("sides", mesh.sides), ("points", mesh.points), ("regions", mesh.regions))
    listed = [f"{kind} {_listed(list(names))}" for kind, names in kinds if len(names)]
    return f"there is no side, point or region {name!r}{hint} {'; '.join(listed)}"


def _listed(names: list[str]) -> str:
    more = f" and {len(names) - NAMES_SHOWN} more" if len(names) > NAMES_SHOWN else ""
    return ", ".join(repr(name) for name in names[:NAMES_SHOWN]) + more


def _region(mesh: Mesh, region: int) -> Selection:
    elements = tuple(np.flatnonzero(block.region == region) for block in mesh.blocks)
    numbers = [
        block.connectivity[caught].ravel()
        for block, caught in zip(mesh.blocks, elements, strict=True)
    ]
    return Selection(np.unique(np.concatenate(numbers)), region_border(mesh, region), elements)


def region_border(mesh: Mesh, region: int) -> Facets:
    """Facets of a region's elements behind which there is nothing or another region, (f, 3)."""
    outer = mesh.boundary[mesh.facet_regions(mesh.boundary) == region]
    one, other = mesh.shared_facets()
    in_one, in_other = mesh.facet_regions(one) == region, mesh.facet_regions(other) == region
    return np.concatenate((outer, one[in_one & ~in_other], other[in_other & ~in_one]))


# --- by place ----------------------------------------------------------------------------------


@_catch.register
def _segment(target: Segment, mesh: Mesh, pointer: str) -> Selection:
    start, end = np.array(target.start), np.array(target.end)
    tolerance = _tolerance(target.tolerance, mesh)
    length = float(np.linalg.norm(end - start))
    if length <= tolerance:
        raise _fault(pointer, f"the segment has no length: both ends are {_at(start)}")
    along, across = _along_and_across(mesh.nodes, start, (end - start) / length)
    on_line = np.abs(across) <= tolerance
    facets = facets_among(mesh, mesh.boundary, on_line)
    reach = np.sort(along[mesh.facet_ends(facets)], axis=1)
    touched = (reach[:, 1] > tolerance) & (reach[:, 0] < length - tolerance)
    inside = (reach[:, 0] >= -tolerance) & (reach[:, 1] <= length + tolerance)
    if (touched & ~inside).any():
        one = mesh.nodes[mesh.facet_ends(facets[touched & ~inside][:1])[0]]
        raise _fault(
            pointer,
            f"the segment from {_at(start)} to {_at(end)} ends inside the element side from "
            f"{_at(one[0])} to {_at(one[1])}; end it at a node, or name the side instead",
        )
    if not inside.any():
        distance = np.hypot(across, np.maximum(0, np.maximum(-along, along - length)))
        what = f"no boundary lies on the segment from {_at(start)} to {_at(end)}"
        raise _fault(pointer, _nearest(mesh, distance, what, tolerance, boundary=True))
    return _of_facets(mesh, facets[inside])


@_catch.register
def _on_circle(target: OnCircle, mesh: Mesh, pointer: str) -> Selection:
    tolerance = _tolerance(target.tolerance, mesh)
    distance = np.abs(np.linalg.norm(mesh.nodes - target.centre, axis=1) - target.radius)
    facets = facets_among(mesh, mesh.boundary, distance <= tolerance)
    if not len(facets):
        circle = f"the circle of radius {target.radius:g} about {_at(target.centre)}"
        what = f"no boundary lies on {circle}"
        raise _fault(pointer, _nearest(mesh, distance, what, tolerance, boundary=True))
    return _of_facets(mesh, facets)


@_catch.register
def _box(target: Box, mesh: Mesh, pointer: str) -> Selection:
    tolerance = _tolerance(target.tolerance, mesh)
    low, high = np.minimum(target.low, target.high), np.maximum(target.low, target.high)
    outside = np.maximum(0, np.maximum(low - mesh.nodes, mesh.nodes - high))
    inside = outside.max(axis=1) <= tolerance
    if not inside.any():
        what = f"no node lies in the box from {_at(low)} to {_at(high)}"
        distance = np.linalg.norm(outside, axis=1)
        raise _fault(pointer, _nearest(mesh, distance, what, tolerance, boundary=False))
    elements = tuple(
        np.flatnonzero(inside[block.connectivity[:, : block.element.corners]].all(axis=1))
        for block in mesh.blocks
    )
    numbers = np.flatnonzero(inside).astype(np.int32)
    return Selection(numbers, facets_among(mesh, mesh.boundary, inside), elements)


@_catch.register
def _nodes(target: Nodes, mesh: Mesh, pointer: str) -> Selection:
    if not target.numbers:
        raise _fault(f"{pointer}/nodes", "the list of nodes is empty")
    last = mesh.node_count - 1
    faults = [
        Fault(f"{pointer}/nodes/{i}", f"there is no node {number}; nodes are numbered 0 to {last}")
        for i, number in enumerate(target.numbers)
        if not 0 <= number <= last
    ]
    if faults:
        raise MeshError(faults)
    numbers = np.unique(np.array(target.numbers, np.int32))
    among = np.zeros(mesh.node_count, bool)
    among[numbers] = True
    return _of_nodes(mesh, numbers, facets_among(mesh, mesh.boundary, among))


def everything(mesh: Mesh) -> Selection:
    """The whole plate: all nodes and elements, no side."""
    elements = tuple(np.arange(block.element_count) for block in mesh.blocks)
    return Selection(np.arange(mesh.node_count, dtype=np.int32), no_facets(), elements)


# --- parts of the above --------------------------------------------------------------------------


def no_facets() -> Facets:
    return np.empty((0, 3), np.int32)


def facets_among(mesh: Mesh, facets: Facets, chosen: Mask) -> Facets:
    """The facets all of whose nodes are chosen; chosen is (N,) bool."""
    table = mesh.facet_table(facets)
    return facets[(chosen[table] | (table < 0)).all(axis=1)]


def _of_facets(mesh: Mesh, facets: Facets) -> Selection:
    return _of_nodes(mesh, mesh.facet_nodes(facets), facets)


def _of_nodes(mesh: Mesh, nodes: NDArray[np.int32], facets: Facets) -> Selection:
    return Selection(nodes, facets, tuple(np.empty(0, np.intp) for _ in mesh.blocks))


def _along_and_across(points: Array, start: Array, direction: Array) -> tuple[Array, Array]:
    offset = points - start
    return offset @ direction, offset @ np.array([-direction[1], direction[0]])


def _tolerance(given: float | None, mesh: Mesh) -> float:
    return given if given is not None else TOLERANCE * mesh.diagonal


def _nearest(mesh: Mesh, distance: Array, what: str, tolerance: float, *, boundary: bool) -> str:
    """Sentence that says what was missed and which node came nearest."""
    numbers = mesh.facet_nodes(mesh.boundary) if boundary else np.arange(mesh.node_count)
    node = numbers[distance[numbers].argmin()]
    kind = "boundary node" if boundary else "node"
    if distance[node] <= tolerance:
        where = f"node {node} at {_at(mesh.nodes[node])} is on it, but no whole element side is"
    else:
        where = (
            f"the nearest {kind} is {node} at {_at(mesh.nodes[node])}, {distance[node]:.6g} away"
        )
    return f"{what} (tolerance {tolerance:.3g}); {where}"


def _at(point: Array | tuple[float, float]) -> str:
    return f"({point[0]:.6g}, {point[1]:.6g})"


def _fault(pointer: str, message: str) -> MeshError:
    return MeshError([Fault(pointer, message)])

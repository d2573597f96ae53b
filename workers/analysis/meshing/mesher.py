"""The mesh library, held in a child process that can be killed.

The library hangs on some inputs and crashes on others; `outline.py` refuses those that are known.
For the rest the child has a limit on time and on memory, and whatever happens to it comes back as
a `MesherFailedError` in plain words. Nothing else in Fishplate imports the library.

Coordinates go to the library relative to the middle of the drawing and over its diagonal, rounded
to 2^-44, so that a drawing in millimetres and the same one in inches give the same mesh.
"""

import itertools
import math
import multiprocessing
import multiprocessing.connection
import resource
from pathlib import Path
from typing import NamedTuple

import numpy as np
from netgen.geom2d import SplineGeometry
from netgen.meshing import MeshingParameters, NgException
from numpy.typing import NDArray

from elements.errors import FishplateError
from workers.analysis.meshing.curves import Arc
from workers.analysis.meshing.drawing import Drawing, Edge
from workers.analysis.meshing.flat_mesh import FlatMesh
from workers.job import Vector

Array = NDArray[np.float64]
Indices = NDArray[np.int32]

WIDEST_PIECE = math.pi / 2  # of an arc; the library's rational splines are exact up to there
ROUNDING = 2.0**44
GRADING = 0.25  # growth of the size away from a fine place; 0.2-0.3 keeps neighbours alike
MEMORY = 4 << 30  # bytes of address space beyond what the parent has
TRIANGLE, QUADRILATERAL = 10, 11  # the library's numbers for its elements


class MesherFailedError(FishplateError, RuntimeError):
    """The library could not mesh the drawing; the message says what happened."""


class Sizes(NamedTuple):
    """Wanted element sizes [L].

    general : largest anywhere
    edges : (e,) largest along each edge of the drawing; inf where nothing is asked
    points : (k, 3) x, y and size; the size grows away from each by `GRADING`
    """

    general: float
    edges: Array
    points: Array


def run_mesher(drawing: Drawing, sizes: Sizes, *, quads: bool, seconds: float) -> FlatMesh:
    """Mesh a checked drawing with straight-sided elements, in a child process.

    quads : quadrilaterals with a few triangles instead of triangles alone.
    seconds : limit on the time.

    Raises
    ------
    MesherFailedError   the library refused, crashed, ran out of memory or out of time.
    """
    context = multiprocessing.get_context("fork")
    receiver, sender = context.Pipe(duplex=False)
    child = context.Process(target=_child, args=(sender, drawing, sizes, quads, seconds))
    child.start()
    sender.close()
    try:
        return _receive(receiver, child, seconds)
    finally:
        if child.is_alive():
            child.kill()
        child.join()
        receiver.close()


def _receive(
    receiver: multiprocessing.connection.Connection,
    child: multiprocessing.process.BaseProcess,
    seconds: float,
) -> FlatMesh:
    if not receiver.poll(seconds):
        raise MesherFailedError(f"the mesher did not end within {seconds:g} s and was stopped")
    try:
        outcome: FlatMesh | str = receiver.recv()
    except EOFError:
        child.join()
        raise MesherFailedError(
            f"the mesher stopped without an answer (exit status {child.exitcode})"
        ) from None
    if isinstance(outcome, str):
        raise MesherFailedError(outcome)
    return outcome


def _child(
    sender: multiprocessing.connection.Connection,
    drawing: Drawing,
    sizes: Sizes,
    quads: bool,
    seconds: float,
) -> None:
    """Everything that runs in the child: limits, the library, the answer."""
    pages = int(Path("/proc/self/statm").read_text().split()[0])
    _lower_limit(resource.RLIMIT_AS, pages * resource.getpagesize() + MEMORY)
    _lower_limit(resource.RLIMIT_CPU, math.ceil(seconds) + 1)
    outcome: FlatMesh | str
    try:
        outcome = _mesh(drawing, sizes, quads)
    except MemoryError:
        outcome = "the mesher ran out of memory"
    except NgException as error:
        outcome = f"the mesher gave up: {str(error).strip() or 'no reason given'}"
    sender.send(outcome)
    sender.close()


def _lower_limit(kind: int, limit: int) -> None:
    """A limit may be lowered, never raised above what the parent was given."""
    _, hard = resource.getrlimit(kind)
    if hard != resource.RLIM_INFINITY:
        limit = min(limit, hard)
    resource.setrlimit(kind, (limit, limit))


class _Frame:
    """The library's coordinates: relative to the middle, over the diagonal, rounded."""

    def __init__(self, edges: tuple[Edge, ...]) -> None:
        places = np.concatenate([edge.curve.at(np.linspace(0.0, 1.0, 9)) for edge in edges])
        low, high = places.min(axis=0), places.max(axis=0)
        self.middle = (low + high) / 2
        self.scale = float(np.linalg.norm(high - low))

    def inward(self, place: Vector | Array) -> tuple[float, float]:
        x, y = np.rint((np.asarray(place) - self.middle) / self.scale * ROUNDING) / ROUNDING
        return float(x), float(y)

    def outward(self, places: Array) -> Array:
        return places * self.scale + self.middle


def _mesh(drawing: Drawing, sizes: Sizes, quads: bool) -> FlatMesh:
    frame = _Frame(drawing.edges)
    geometry, owners = _geometry(drawing, sizes, frame)
    parameters = MeshingParameters(maxh=sizes.general / frame.scale, grading=GRADING)
    for x, y, size in sizes.points:
        parameters.RestrictH(*frame.inward((x, y)), 0.0, size / frame.scale)
    made = geometry.GenerateMesh(mp=parameters, quad_dominated=quads)
    return _read(made, owners, drawing, frame)


def _geometry(drawing: Drawing, sizes: Sizes, frame: _Frame) -> tuple[SplineGeometry, list[int]]:
    """The library's description of the drawing, and the edge that each of its pieces is from."""
    geometry = SplineGeometry()
    vertices: dict[Vector, int] = {}

    def vertex(place: Vector) -> int:
        if place not in vertices:
            vertices[place] = geometry.AppendPoint(*frame.inward(place))
        return vertices[place]

    owners: list[int] = []
    for number, edge in enumerate(drawing.edges):
        size = min(sizes.edges[number], sizes.general) / frame.scale
        places = [edge.start, *_inner_ends(edge), edge.end]
        for start, end in itertools.pairwise(places):
            if isinstance(edge.curve, Arc):
                control = geometry.AppendPoint(*frame.inward(_control(edge.curve, start, end)))
                piece = ["spline3", vertex(start), control, vertex(end)]
            else:
                piece = ["line", vertex(start), vertex(end)]
            geometry.Append(piece, leftdomain=edge.left, rightdomain=edge.right, maxh=size)
            owners.append(number)
    return geometry, owners


def _inner_ends(edge: Edge) -> list[Vector]:
    """Where an arc is divided so that no piece turns by more than a right angle."""
    if not isinstance(edge.curve, Arc):
        return []
    pieces = max(1, math.ceil(abs(edge.curve.sweep) / WIDEST_PIECE - 1e-9))
    return [(float(x), float(y)) for x, y in edge.curve.at(np.arange(1, pieces) / pieces)]


def _control(arc: Arc, start: Vector, end: Vector) -> Array:
    """Where the tangents at both ends meet: the middle control point of the rational spline."""
    middle = (np.asarray(start) + np.asarray(end)) / 2 - arc.centre
    # radius / cos(half angle) along the bisector; cos(half angle) = |middle| / radius
    return arc.centre + middle * (arc.radius / float(np.linalg.norm(middle))) ** 2


def _read(made: object, owners: list[int], drawing: Drawing, frame: _Frame) -> FlatMesh:
    nodes = frame.outward(np.array(made.Coordinates())[:, :2])  # type: ignore[attr-defined]
    cells = made.Elements2D().NumPy()  # type: ignore[attr-defined]
    lines = made.Elements1D().NumPy()  # type: ignore[attr-defined]
    kind, numbers, domain = cells["type"], cells["nodes"] - 1, np.array(cells["index"])
    triangle, quadrilateral = kind == TRIANGLE, kind == QUADRILATERAL
    edge = np.array(owners, np.int32)[np.array(lines["index"]) - 1]
    segments = np.array(lines["nodes"][:, :2] - 1, np.int32)
    return FlatMesh(
        nodes=_onto_edges(nodes, segments, edge, drawing),
        triangles=np.array(numbers[triangle][:, :3], np.int32),
        quadrilaterals=np.array(numbers[quadrilateral][:, :4], np.int32),
        triangle_domain=domain[triangle].astype(np.int32),
        quadrilateral_domain=domain[quadrilateral].astype(np.int32),
        segments=segments,
        segment_edge=edge,
    )


def _onto_edges(nodes: Array, segments: Indices, edge: Indices, drawing: Drawing) -> Array:
    """Boundary nodes moved onto the true edges, vertices exactly onto the drawing's own."""
    nodes = nodes.copy()
    for number in np.unique(edge):
        own = np.unique(segments[edge == number])
        nodes[own] = drawing.edges[number].curve.project(nodes[own])
    ends = np.array([place for e in drawing.edges for place in (e.start, e.end)])
    lone = np.unique(ends, axis=0)
    on_edges = np.unique(segments)
    for place in lone:
        gap = np.linalg.norm(nodes[on_edges] - place, axis=1)
        nodes[on_edges[np.argmin(gap)]] = place
    return nodes

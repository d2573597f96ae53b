"""The mesh library, held in a child process that can be killed.

The library hangs on some inputs and crashes on others; `outline.py` refuses those that are known.
For the rest the child has a limit on time and on memory, and whatever happens to it comes back as
a `MesherFailedError` in plain words. Nothing else in Fishplate imports the library.
"""

import math
import multiprocessing
import multiprocessing.connection
import resource
from pathlib import Path

import numpy as np
from netgen.geom2d import SplineGeometry
from netgen.meshing import MeshingParameters, NgException
from numpy.typing import NDArray

from elements.errors import FishplateError
from workers.analysis.meshing.curves import Arc
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.flat_mesh import FlatMesh
from workers.analysis.meshing.sizing import Sizes
from workers.geometry import Vector

Array = NDArray[np.float64]
Indices = NDArray[np.int32]

MEMORY = 4 << 30  # bytes of address space beyond what the parent has
TRIANGLE, QUADRILATERAL = 10, 11  # the library's numbers for its elements


class MesherFailedError(FishplateError, RuntimeError):
    """The library could not mesh the drawing; the message says what happened."""


def run_mesher(drawing: Drawing, sizes: Sizes, *, quads: bool, seconds: float) -> FlatMesh:
    """Mesh a drawing in the mesher's coordinates with straight-sided elements, in a child process.

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
        raise MesherFailedError(f"the mesher did not end within {seconds:.0f} s and was stopped")
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
    _lower_limit(resource.RLIMIT_CORE, 0)
    outcome: FlatMesh | str
    try:
        outcome = mesh_here(drawing, sizes, quads=quads)
    except MemoryError:
        outcome = "the mesher ran out of memory"
    except NgException as error:
        outcome = f"the mesher gave up: {str(error).strip() or 'no reason given'}"
    except MesherFailedError as error:
        outcome = str(error)
    sender.send(outcome)
    sender.close()


def _lower_limit(kind: int, limit: int) -> None:
    """A limit may be lowered, never raised above what the parent was given."""
    _, hard = resource.getrlimit(kind)
    if hard != resource.RLIM_INFINITY:
        limit = min(limit, hard)
    resource.setrlimit(kind, (limit, limit))


def mesh_here(drawing: Drawing, sizes: Sizes, *, quads: bool) -> FlatMesh:
    """What the child does: only for drawings that are known to be harmless."""
    geometry = library_geometry(drawing, sizes)
    parameters = MeshingParameters(
        maxh=sizes.general, grading=sizes.grading, curvaturesafety=sizes.per_radius
    )
    for x, y, size in sizes.points:
        parameters.RestrictH(float(x), float(y), 0.0, float(size))
    return _read(geometry.GenerateMesh(mp=parameters, quad_dominated=quads), drawing)


def library_geometry(drawing: Drawing, sizes: Sizes) -> SplineGeometry:
    """The library's description of the drawing; its pieces are the edges in their order."""
    geometry = SplineGeometry()
    vertices: dict[Vector, int] = {}
    for edge, size in zip(drawing.edges, sizes.edges, strict=True):
        for place in (edge.start, edge.end):
            if place not in vertices:
                vertices[place] = geometry.AppendPoint(*place)
        ends = vertices[edge.start], vertices[edge.end]
        piece: list[object] = ["line", *ends]
        if isinstance(edge.curve, Arc):
            piece = ["spline3", ends[0], geometry.AppendPoint(*_control(edge.curve)), ends[1]]
        geometry.Append(
            piece,
            leftdomain=edge.left,
            rightdomain=edge.right,
            maxh=float(min(size, sizes.general)),
        )
    for domain, size in enumerate(sizes.domains, start=1):
        if size < sizes.general:
            geometry.SetDomainMaxH(domain, float(size))
    return geometry


def _control(arc: Arc) -> Vector:
    """Where the tangents at both ends meet: the middle control point of the rational spline."""
    middle = (arc.start + arc.end) / 2 - arc.centre
    # radius / cos(half angle) along the bisector; cos(half angle) = |middle| / radius
    x, y = arc.centre + middle * (arc.radius / float(np.linalg.norm(middle))) ** 2
    return float(x), float(y)


def _read(made: object, drawing: Drawing) -> FlatMesh:
    nodes = np.array(made.Coordinates())[:, :2]  # type: ignore[attr-defined]
    cells = made.Elements2D().NumPy()  # type: ignore[attr-defined]
    lines = made.Elements1D().NumPy()  # type: ignore[attr-defined]
    kind, numbers, domain = cells["type"], cells["nodes"] - 1, np.array(cells["index"])
    triangle, quadrilateral = kind == TRIANGLE, kind == QUADRILATERAL
    edge = np.array(lines["index"], np.int32) - 1
    segments = np.array(lines["nodes"][:, :2] - 1, np.int32)
    return FlatMesh(
        nodes=_onto_edges(nodes, segments, edge, drawing),
        triangles=np.array(numbers[triangle][:, :3], np.int32),
        quadrilaterals=np.array(numbers[quadrilateral][:, :4], np.int32).reshape(-1, 4),
        triangle_domain=domain[triangle].astype(np.int32),
        quadrilateral_domain=domain[quadrilateral].astype(np.int32),
        segments=segments,
        segment_edge=edge,
    )


def _onto_edges(nodes: Array, segments: Indices, edge: Indices, drawing: Drawing) -> Array:
    """Nodes on edges moved onto the curves, but for the vertices, which are where they were."""
    vertices = {place for e in drawing.edges for place in (e.start, e.end)}
    on_edges = np.unique(segments)
    is_vertex = np.zeros(len(nodes), bool)
    is_vertex[on_edges] = [tuple(place) in vertices for place in nodes[on_edges].tolist()]
    if is_vertex.sum() != len(vertices):
        raise MesherFailedError(
            f"the mesher lost {len(vertices) - int(is_vertex.sum())} of {len(vertices)} vertices"
        )
    ends, own = segments.ravel(), np.repeat(edge, 2)
    inner = ~is_vertex[ends]
    moved = nodes.copy()
    moved[ends[inner]] = drawing.table.project(own[inner], nodes[ends[inner]])
    return moved

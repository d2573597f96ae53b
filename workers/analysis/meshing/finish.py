"""The last step of free meshing: from corner nodes to a `Mesh` with all its names.

Mid-side nodes are put on the true curves here, and sides and points get their names.
"""

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from elements import registry
from elements.contract import ElementType
from workers.analysis.mesh import Block, Facets, Mesh
from workers.analysis.meshing.drawing import OUTSIDE, Drawing
from workers.analysis.meshing.flat_mesh import FlatMesh, middles
from workers.analysis.meshing.frame import Frame
from workers.analysis.meshing.judge import TRIANGLE_LIKE
from workers.geometry import Vector

Array = NDArray[np.float64]
Indices = NDArray[np.int32]

ROWS = 64  # of nodes with consecutive numbers


def outward(flat: FlatMesh, local: Drawing, frame: Frame, drawing: Drawing) -> FlatMesh:
    """A mesh in the mesher's coordinates moved to the drawing's own, exactly onto its curves.

    local, drawing : the same edges in both coordinates
    """
    nodes = frame.outward(flat.nodes)
    ends, edge = flat.segments.ravel(), np.repeat(flat.segment_edge, 2)
    nodes[ends] = drawing.table.project(edge, nodes[ends])
    vertices: dict[Vector, Vector] = {}
    for one, other in zip(local.edges, drawing.edges, strict=True):
        vertices[one.start], vertices[one.end] = other.start, other.end
    on_edges = np.unique(flat.segments)
    for node, place in zip(on_edges, flat.nodes[on_edges].tolist(), strict=True):
        if (exact := vertices.get((place[0], place[1]))) is not None:
            nodes[node] = exact
    return replace(flat, nodes=nodes)


def finish(flat: FlatMesh, drawing: Drawing, frame: Frame, element: ElementType) -> Mesh:
    """Blocks of the wanted type, with sides and points by name.

    flat, drawing : in the drawing's coordinates
    """
    nodes, cells = flat.nodes, list(flat.cells)
    if element.order > 1:
        places, of_cells, _ = middles(flat, drawing)
        cells = [
            np.concatenate((c, mids + len(nodes)), axis=1)
            for c, mids in zip(cells, of_cells, strict=True)
        ]
        nodes = np.concatenate((nodes, places))
    triangle = element if element.is_triangle else registry.get(TRIANGLE_LIKE[element.order])
    domains = (flat.triangle_domain, flat.quadrilateral_domain)
    blocks = tuple(
        Block(kind, own.astype(np.int32), (domain - 1).astype(np.int32))
        for kind, own, domain in zip((triangle, element), cells, domains, strict=True)
        if len(own)
    )
    nodes, blocks, number = _numbered_by_place(nodes, blocks, frame)
    mesh = Mesh(nodes, blocks, drawing.regions)
    return replace(
        mesh,
        sides=_sides(mesh, number[flat.segments], flat.segment_edge, drawing),
        points=_points(mesh, number[np.unique(flat.segments)], drawing.points),
    )


def _numbered_by_place(
    nodes: Array, blocks: tuple[Block, ...], frame: Frame
) -> tuple[Array, tuple[Block, ...], Indices]:
    """Neighbours get near numbers: faster gathers, and files that compress better."""
    x, y = frame.places(nodes).T
    order = np.lexsort((x, np.rint(y * (ROWS / np.ptp(y)))))
    number = np.empty(len(nodes), np.int32)
    number[order] = np.arange(len(nodes), dtype=np.int32)
    renumbered = tuple(replace(b, connectivity=number[b.connectivity]) for b in blocks)
    return nodes[order], renumbered, number


def _sides(
    mesh: Mesh, segments: Indices, segment_edge: Indices, drawing: Drawing
) -> dict[str, Facets]:
    """Facets of every named side; each has its element on the left."""
    inward = np.array([edge.left != OUTSIDE for edge in drawing.edges])[segment_edge]
    pairs = np.where(inward[:, None], segments, segments[:, ::-1])
    number: dict[str, int] = {}
    side = np.array(
        [-1 if e.side is None else number.setdefault(e.side, len(number)) for e in drawing.edges]
    )[segment_edge]
    named = np.flatnonzero(side >= 0)
    named = named[np.argsort(side[named], kind="stable")]
    facets = mesh.find_facets(pairs[named])
    first = np.cumsum([0, *np.bincount(side[named], minlength=len(number))])
    return {
        name: facets[low:high]
        for name, low, high in zip(number, first[:-1], first[1:], strict=True)
    }


def _points(mesh: Mesh, on_edges: Indices, points: Mapping[str, Vector]) -> dict[str, int]:
    """The node of each named point, which is a vertex of an edge."""
    at = {(x, y): int(n) for n, (x, y) in zip(on_edges, mesh.nodes[on_edges].tolist(), strict=True)}
    return {name: at[place] for name, place in points.items()}

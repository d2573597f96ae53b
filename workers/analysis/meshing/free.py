"""Free meshing: a drawing becomes a mesh of one element type.

Choose sizes, let the library mesh coarsely, split every element once, smooth, put mid-side nodes
on the true curves, and name sides and points.
"""

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from elements import registry
from elements.contract import ElementType
from workers.analysis.mesh import Block, Mesh
from workers.analysis.meshing.drawing import OUTSIDE, Drawing
from workers.analysis.meshing.flat_mesh import (
    FlatMesh,
    middles,
    split_into_quadrilaterals,
    split_into_triangles,
)
from workers.analysis.meshing.mesher import MesherFailedError, Sizes, run_mesher
from workers.analysis.meshing.sizing import choose_sizes
from workers.analysis.meshing.smooth import qualities, smooth, triangle_quality
from workers.errors import Fault, MeshError
from workers.job import Meshing

MOST_ELEMENTS = 2_000_000
SECONDS = 120.0  # for the library; the coarse mesh of a million elements takes about half of it
POOR_QUADRILATERAL = 0.3  # scaled Jacobian below which two triangles may do better

# The element that fills in where a quadrilateral would be too poor, and the reverse.
TRIANGLE_LIKE: Mapping[int, str] = {1: "T3", 2: "T6"}


def mesh_drawing(drawing: Drawing, meshing: Meshing) -> Mesh:
    """Mesh a checked drawing.

    Raises
    ------
    MeshError   too many elements would be needed, or the library failed.
    """
    element, area = registry.get(meshing.element), drawing.area
    sizes = choose_sizes(drawing, element.order, area, meshing.size, meshing.sizes)
    _check_count(area, sizes)
    flat = _flat_mesh(drawing, sizes, quads=not element.is_triangle)
    return _build(flat, drawing, element)


def _check_count(area: float, sizes: Sizes) -> None:
    # An upper bound for triangles of the general size in every run that was measured.
    count = area / (0.433 * sizes.general**2)
    if count > MOST_ELEMENTS:
        raise MeshError(
            [
                Fault(
                    "/meshing/size",
                    f"size {sizes.general:g} would make about {count:.2g} elements; at most "
                    f"{MOST_ELEMENTS} are allowed, which needs a size of at least "
                    f"{np.sqrt(area / (0.433 * MOST_ELEMENTS)):.3g}",
                )
            ]
        )


def _flat_mesh(drawing: Drawing, sizes: Sizes, *, quads: bool) -> FlatMesh:
    coarse = Sizes(2 * sizes.general, 2 * sizes.edges, sizes.points * [1.0, 1.0, 2.0])
    try:
        made = run_mesher(drawing, coarse, quads=quads, seconds=SECONDS)
    except MesherFailedError as error:
        raise MeshError(
            [
                Fault(
                    "/geometry",
                    f"the plate could not be meshed: {error}; try another size, or simplify "
                    "details that are much smaller than it",
                )
            ]
        ) from error
    split = split_into_quadrilaterals if quads else split_into_triangles
    return _split_poor(smooth(split(made, drawing)))


def _split_poor(mesh: FlatMesh) -> FlatMesh:
    """Poor quadrilaterals become two triangles where those are better."""
    quality = qualities(mesh)[1]
    poor = np.flatnonzero(quality < POOR_QUADRILATERAL)
    if not len(poor):
        return mesh
    a, b, c, d = mesh.quadrilaterals[poor].T
    ways = np.stack(
        [
            np.stack((np.stack((a, b, c), axis=1), np.stack((a, c, d), axis=1)), axis=1),
            np.stack((np.stack((a, b, d), axis=1), np.stack((b, c, d), axis=1)), axis=1),
        ]
    )
    worst = triangle_quality(mesh.nodes[ways]).min(axis=2)
    way = worst.argmax(axis=0)
    better = worst.max(axis=0) > quality[poor]
    chosen = ways[way, np.arange(len(poor))][better]
    keep = np.ones(len(mesh.quadrilaterals), bool)
    keep[poor[better]] = False
    domain = np.repeat(mesh.quadrilateral_domain[poor[better]], 2)
    return replace(
        mesh,
        triangles=np.concatenate((mesh.triangles, chosen.reshape(-1, 3))),
        triangle_domain=np.concatenate((mesh.triangle_domain, domain)),
        quadrilaterals=mesh.quadrilaterals[keep],
        quadrilateral_domain=mesh.quadrilateral_domain[keep],
    )


# --- the finished mesh ----------------------------------------------------------------------------


def _build(flat: FlatMesh, drawing: Drawing, element: ElementType) -> Mesh:
    """Blocks of the wanted order, with sides and points by name."""
    nodes, cells = flat.nodes, list(flat.cells)
    if element.order > 1:
        places, of_cells, _ = middles(flat, drawing)
        cells = [
            np.concatenate((c, mids + len(nodes)), axis=1)
            for c, mids in zip(cells, of_cells, strict=True)
        ]
        nodes = np.concatenate((nodes, places))
    if element.is_triangle:
        types = [element, element]
    else:
        types = [registry.get(TRIANGLE_LIKE[element.order]), element]
    domains = (flat.triangle_domain, flat.quadrilateral_domain)
    blocks = tuple(
        Block(kind, own.astype(np.int32), (domain - 1).astype(np.int32))
        for kind, own, domain in zip(types, cells, domains, strict=True)
        if len(own)
    )
    nodes, blocks, renumbered = _numbered_by_place(nodes, blocks)
    mesh = Mesh(nodes, blocks, drawing.regions)
    return replace(
        mesh,
        sides=_sides(mesh, renumbered[flat.segments], flat.segment_edge, drawing),
        points={name: _node_at(nodes, place) for name, place in drawing.points.items()},
    )


def _numbered_by_place(
    nodes: NDArray[np.float64], blocks: tuple[Block, ...]
) -> tuple[NDArray[np.float64], tuple[Block, ...], NDArray[np.int32]]:
    """Neighbours get near numbers: faster gathers, and files that compress better."""
    order = np.lexsort((nodes[:, 0], np.rint(nodes[:, 1] / (np.ptp(nodes[:, 1]) / 64))))
    renumbered = np.empty(len(nodes), np.int32)
    renumbered[order] = np.arange(len(nodes), dtype=np.int32)
    return (
        nodes[order],
        tuple(replace(block, connectivity=renumbered[block.connectivity]) for block in blocks),
        renumbered,
    )


def _sides(
    mesh: Mesh, segments: NDArray[np.int32], segment_edge: NDArray[np.int32], drawing: Drawing
) -> dict[str, NDArray[np.int32]]:
    named: dict[str, list[NDArray[np.int32]]] = {}
    for number, edge in enumerate(drawing.edges):
        if edge.side is None:
            continue
        pairs = segments[segment_edge == number]
        # The facet that runs with the pair has its element on the left.
        named.setdefault(edge.side, []).append(pairs[:, ::-1] if edge.left == OUTSIDE else pairs)
    return {name: mesh.find_facets(np.concatenate(pairs)) for name, pairs in named.items()}


def _node_at(nodes: NDArray[np.float64], place: tuple[float, float]) -> int:
    return int(np.argmin(np.linalg.norm(nodes - place, axis=1)))

"""The client's own mesh, checked as if nothing in it could be trusted.

Checks run from the single number to the whole: numbers, nodes, shapes, edges, overlap. Each stage
needs what the one before it assures. Every fault names the elements and nodes; of each kind the
first few are reported.
"""

from collections.abc import Iterable, Iterator
from dataclasses import replace
from typing import SupportsInt

import numpy as np
from numpy.typing import NDArray

from elements.errors import ElementError
from elements.registry import get
from workers.analysis.mesh import Block, Mesh
from workers.analysis.meshing.explicit_names import named_sides, point_faults
from workers.analysis.meshing.first_few import MOST_FAULTS, first_few
from workers.analysis.meshing.overlap import overlap_faults
from workers.analysis.meshing.regions import region_index
from workers.analysis.meshing.shape import shape_faults
from workers.analysis.nearby import close_pairs
from workers.analysis.selection import TOLERANCE
from workers.errors import Fault, MeshError
from workers.geometry import MeshGeometry

BASE = "/geometry/mesh"


def mesh_explicit(geometry: MeshGeometry) -> Mesh:
    """Check the client's mesh and take it as it is.

    Raises
    ------
    MeshError   anything that would make the analysis wrong or impossible, with all its places.
    """
    regions, region = region_index(geometry.regions, [block.region for block in geometry.blocks])
    mesh = Mesh(geometry.nodes, _blocks(geometry, region), regions)
    _refuse(_number_faults(mesh))
    sides, side_faults = named_sides(geometry, mesh)
    mesh = replace(mesh, sides=sides, points=dict(geometry.points))
    named = [*side_faults, *point_faults(geometry, mesh)]
    _refuse([*named, *_node_faults(mesh), *_element_faults(mesh)])
    _refuse(_edge_faults(mesh))
    _refuse(Fault(_pointer(*fault.facet[:2]), fault.message) for fault in overlap_faults(mesh))
    return mesh


def _refuse(faults: Iterable[Fault]) -> None:
    if listed := list(faults):
        raise MeshError(listed)


def _pointer(block: SupportsInt, element: SupportsInt) -> str:
    return f"{BASE}/blocks/{block}/connectivity/{element}"


def _at(mesh: Mesh, node: np.integer) -> str:
    x, y = mesh.nodes[node]
    return f"({x:.6g}, {y:.6g})"


# --- numbers -------------------------------------------------------------------------------------


def _blocks(geometry: MeshGeometry, region: NDArray[np.int32]) -> tuple[Block, ...]:
    blocks, faults = [], []
    for number, given in enumerate(geometry.blocks):
        try:
            element = get(given.element)
        except ElementError as error:
            faults.append(Fault(f"{BASE}/blocks/{number}/element", str(error)))
            continue
        shape = given.connectivity.shape
        if len(shape) != 2 or shape[1] != element.node_count or not shape[0]:
            faults.append(
                Fault(
                    f"{BASE}/blocks/{number}/connectivity",
                    f"needs rows of {element.node_count} node numbers for {element.name}, and at "
                    f"least one; got an array of shape {shape}",
                )
            )
            continue
        regions = np.full(shape[0], region[number], np.int32)
        blocks.append(Block(element, np.asarray(given.connectivity, np.int32), regions))
    _refuse(faults)
    return tuple(blocks)


def _number_faults(mesh: Mesh) -> Iterator[Fault]:
    for number, block in enumerate(mesh.blocks):
        where = f"{BASE}/blocks/{number}/connectivity"
        yield from first_few(_range_faults(mesh, number, block), where)
        yield from first_few(_repeat_faults(number, block), where)
    strange = np.flatnonzero(~np.isfinite(mesh.nodes).all(axis=1))
    yield from first_few(
        (Fault(f"{BASE}/nodes/{node}", "coordinates must be finite numbers") for node in strange),
        f"{BASE}/nodes",
    )


def _range_faults(mesh: Mesh, number: int, block: Block) -> Iterator[Fault]:
    wrong = (block.connectivity < 0) | (block.connectivity >= mesh.node_count)
    for element, place in np.argwhere(wrong):
        yield Fault(
            f"{_pointer(number, element)}/{place}",
            f"there is no node {block.connectivity[element, place]}; nodes are numbered 0 to "
            f"{mesh.node_count - 1}",
        )


def _repeat_faults(number: int, block: Block) -> Iterator[Fault]:
    ordered = np.sort(block.connectivity, axis=1)
    for element in np.flatnonzero((ordered[:, 1:] == ordered[:, :-1]).any(axis=1)):
        nodes = block.connectivity[element].tolist()
        twice = next(node for node in nodes if nodes.count(node) > 1)
        yield Fault(
            _pointer(number, element),
            f"node {twice} stands twice in {block.element.name} {nodes}; an element needs "
            f"{block.element.node_count} different nodes",
        )


# --- nodes and shapes ----------------------------------------------------------------------------


def _node_faults(mesh: Mesh) -> Iterator[Fault]:
    used = np.zeros(mesh.node_count, bool)
    for block in mesh.blocks:
        used[block.connectivity] = True
    orphans = (
        Fault(
            f"{BASE}/nodes/{node}",
            f"node {node} at {_at(mesh, node)} belongs to no element; remove it, or list the "
            "element that should use it",
        )
        for node in np.flatnonzero(~used)
    )
    yield from first_few(orphans, f"{BASE}/nodes")
    tolerance = TOLERANCE * mesh.diagonal
    doubles = (
        Fault(
            f"{BASE}/nodes/{other}",
            f"nodes {one} and {other} are at the same place, {_at(mesh, one)} (less than "
            f"{tolerance:.3g} apart): the plate is split there; make them one node",
        )
        for one, other in close_pairs(mesh.nodes, tolerance, most=MOST_FAULTS + 1)
    )
    yield from first_few(doubles, f"{BASE}/nodes")


def _element_faults(mesh: Mesh) -> Iterator[Fault]:
    for number, block in enumerate(mesh.blocks):
        faults = (
            Fault(_pointer(number, fault.element), f"element {fault.element}, {fault.message}")
            for fault in shape_faults(block.element, block.connectivity, mesh.nodes)
        )
        yield from first_few(faults, f"{BASE}/blocks/{number}/connectivity")


# --- edges ---------------------------------------------------------------------------------------


def _edge_faults(mesh: Mesh) -> Iterator[Fault]:
    blocks = f"{BASE}/blocks"
    yield from first_few(_crowded_edges(mesh), blocks)
    yield from first_few(_unlike_edges(mesh), blocks)
    yield from first_few(_double_roles(mesh), blocks)


def _crowded_edges(mesh: Mesh) -> Iterator[Fault]:
    edges = mesh.edges
    for edge in np.flatnonzero(edges.counts > 2):
        facets = mesh.facet_of(np.sort(edges.facets[edges.first[edge] : edges.first[edge + 1]]))
        a, b = mesh.facet_ends(facets)[0]
        named = ", ".join(_name(mesh, facet) for facet in facets)
        yield Fault(
            _pointer(*facets[-1, :2]),
            f"the side between nodes {a} and {b} belongs to {len(facets)} elements ({named}); in a "
            "plane at most two elements share a side",
        )


def _unlike_edges(mesh: Mesh) -> Iterator[Fault]:
    """Sides on which two elements disagree: both on the same side of it, or another mid node."""
    edges, table = mesh.edges, mesh.flat_table()
    first = edges.first[:-1][edges.counts == 2]
    one, other = edges.facets[first], edges.facets[first + 1]
    same_way = table[one, 0] == table[other, 0]
    for row in np.flatnonzero(same_way | (table[one, 2] != table[other, 2])):
        pair = mesh.facet_of(np.array([one[row], other[row]]))
        both = " and ".join(_name(mesh, facet) for facet in pair)
        a, b, mid = table[one[row]]
        if same_way[row]:
            what = f"{both} lie on the same side of the line from node {a} to {b}: they overlap"
        else:
            mids = [f"node {m}" if m >= 0 else "none" for m in (mid, table[other[row], 2])]
            what = (
                f"{both} share the side between nodes {a} and {b}, but its mid-side node is "
                f"{mids[0]} in one and {mids[1]} in the other; it must be the same"
            )
        yield Fault(_pointer(*pair[1, :2]), what)


def _double_roles(mesh: Mesh) -> Iterator[Fault]:
    """Nodes that are a corner here and a mid-side node there: the elements are not joined."""
    corner, middle = np.zeros((2, mesh.node_count), bool)
    for block in mesh.blocks:
        corner[block.connectivity[:, : block.element.corners]] = True
        middle[block.connectivity[:, block.element.corners :]] = True
    for node in np.flatnonzero(corner & middle):
        yield Fault(
            f"{BASE}/nodes/{node}",
            f"node {node} at {_at(mesh, node)} is a corner of one element and a mid-side node of "
            "another; elements must share whole sides",
        )


def _name(mesh: Mesh, facet: NDArray[np.int32]) -> str:
    block, element, _ = facet.tolist()
    where = f" of block {block}" if len(mesh.blocks) > 1 else ""
    return f"{mesh.blocks[block].element.name} {element}{where}"

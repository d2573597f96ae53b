"""Named sides and points of the client's own mesh."""

from collections.abc import Iterator

import numpy as np

from workers.analysis.mesh import Facets, Mesh
from workers.analysis.meshing.first_few import first_few
from workers.errors import Fault
from workers.geometry import MeshGeometry

BASE = "/geometry/mesh"


def named_sides(geometry: MeshGeometry, mesh: Mesh) -> tuple[dict[str, Facets], list[Fault]]:
    """Facets of each named side; an edge inside the mesh is taken in the direction given."""
    counts = [len(edges) for edges in geometry.sides.values()]
    pairs = [edge[:2] for edges in geometry.sides.values() for edge in edges]
    strange = _side_number_faults(geometry, mesh)
    if strange or not geometry.sides:
        return {}, strange
    facets = np.split(mesh.find_facets(np.array(pairs, np.intp)), np.cumsum(counts)[:-1])
    sides = dict(zip(geometry.sides, facets, strict=True))
    faults = [
        fault
        for name, edges in geometry.sides.items()
        for fault in first_few(_side_faults(mesh, name, edges, sides[name]), f"{BASE}/sides/{name}")
    ]
    return sides, faults


def _side_number_faults(geometry: MeshGeometry, mesh: Mesh) -> list[Fault]:
    return [
        Fault(
            f"{BASE}/sides/{name}/{i}",
            f"there is no node {number}; nodes are numbered 0 to {mesh.node_count - 1}",
        )
        for name, edges in geometry.sides.items()
        for i, edge in enumerate(edges)
        for number in edge
        if not 0 <= number < mesh.node_count
    ]


def _side_faults(
    mesh: Mesh, name: str, edges: tuple[tuple[int, ...], ...], facets: Facets
) -> Iterator[Fault]:
    here = f"{BASE}/sides/{name}"
    if not edges:
        yield Fault(here, f"side {name!r} has no edges")
        return
    missing = facets[:, 0] < 0
    mids = np.full(len(edges), -1)
    mids[~missing] = mesh.facet_table(facets[~missing])[:, 2]
    seen: set[frozenset[int]] = set()
    for i, edge in enumerate(edges):
        a, b = edge[:2]
        if missing[i]:
            yield Fault(
                f"{here}/{i}",
                f"no element has a side from corner node {a} {_at(mesh, a)} to corner node {b} "
                f"{_at(mesh, b)}; give [corner, corner] or [corner, corner, mid-side node]",
            )
        elif len(edge) == 3 and edge[2] != mids[i]:
            has = f"node {mids[i]}" if mids[i] >= 0 else "none"
            yield Fault(
                f"{here}/{i}/2",
                f"the mid-side node between nodes {a} and {b} is {has}, not node {edge[2]}",
            )
        elif frozenset((a, b)) in seen:
            yield Fault(f"{here}/{i}", f"the edge between nodes {a} and {b} is listed twice")
        seen.add(frozenset((a, b)))


def point_faults(geometry: MeshGeometry, mesh: Mesh) -> Iterator[Fault]:
    for name, node in geometry.points.items():
        if not 0 <= node < mesh.node_count:
            yield Fault(
                f"{BASE}/points/{name}",
                f"there is no node {node}; nodes are numbered 0 to {mesh.node_count - 1}",
            )


def _at(mesh: Mesh, node: int) -> str:
    x, y = mesh.nodes[node]
    return f"({x:.6g}, {y:.6g})"

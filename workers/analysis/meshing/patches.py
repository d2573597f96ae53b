"""Mapped meshing: four-sided patches, each with its own divisions, joined along whole sides.

A patch is mapped by transfinite interpolation of its four sides (Coons), so that doubling the
divisions gives a mesh of which every element of the coarse one is a union: the base for a
convergence record. What patches share is decided in `patch_sides.py`.
"""

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from elements.contract import ElementType
from workers.analysis.connected import label_components
from workers.analysis.mesh import Block, Facets, Mesh
from workers.analysis.meshing.curves import Curve
from workers.analysis.meshing.overlap import overlap_faults
from workers.analysis.meshing.patch_sides import patch_curves, patch_faults
from workers.analysis.meshing.regions import region_index
from workers.analysis.meshing.shape import shape_faults
from workers.analysis.nearby import close_pairs
from workers.analysis.selection import TOLERANCE
from workers.errors import Fault, MeshError
from workers.geometry import Patch, PatchGeometry, Vector

Array = NDArray[np.float64]


class Grid(NamedTuple):
    """One patch on nodes of its own.

    nodes : (k, 2) positions [L]
    connectivity : (m, n)
    sides : for each of the four sides its corner nodes, in order
    rim : (r,) all nodes on the four sides, sorted
    """

    nodes: Array
    connectivity: NDArray[np.intp]
    sides: tuple[NDArray[np.intp], ...]
    rim: NDArray[np.intp]


# --- one patch -----------------------------------------------------------------------------------


def graded(divisions: int, grading: float) -> Array:
    """Division points from 0 to 1, (divisions + 1,).

    t(s) = (G^s - 1)/(G - 1) at equal steps of s: spacings in geometric progression, the size of
    the elements at the end G times that at the start, and the points of n divisions among those
    of 2n.
    """
    s = np.arange(divisions + 1) / divisions
    # Next to 1 the quotient loses its figures, and the grading its effect.
    if abs(grading - 1) < 1e-12:
        return s
    return np.expm1(s * np.log(grading)) / np.expm1(np.log(grading))


def with_middles(t: Array) -> Array:
    """The points and the middles between them, in order, (2n - 1,)."""
    both = np.empty(2 * len(t) - 1)
    both[0::2] = t
    both[1::2] = (t[:-1] + t[1:]) / 2
    return both


def coons(sides: tuple[Curve, Curve, Curve, Curve], u: Array, v: Array) -> Array:
    """Transfinite interpolation of four sides, (len(u), len(v), 2) [L].

    References
    ----------
    Gordon & Hall, "Construction of curvilinear co-ordinate systems and applications to mesh
    generation", Int. J. Numer. Meth. Eng. 7 (1973).
    """
    low, right, high, left = sides[0].at(u), sides[1].at(v), sides[2].at(1 - u), sides[3].at(1 - v)
    U, V = u[:, None, None], v[None, :, None]
    grid = (1 - V) * low[:, None] + V * high[:, None] + (1 - U) * left[None] + U * right[None]
    c1, c2, c3, c4 = (side.start for side in sides)
    grid -= (1 - U) * (1 - V) * c1 + U * (1 - V) * c2 + U * V * c3 + (1 - U) * V * c4
    # Rounding must not take a node off its side.
    grid[:, 0], grid[:, -1], grid[0], grid[-1] = low, high, left, right
    return grid


def mesh_patch(patch: Patch, element: ElementType) -> Grid:
    """Elements of one patch: quadrilaterals, or each of them cut into two triangles."""
    (m, n), (g, h) = patch.divisions, patch.grading
    u, v = graded(m, g), graded(n, h)
    if element.order > 1:
        u, v = with_middles(u), with_middles(v)
    positions = coons(patch_curves(patch), u, v).reshape(-1, 2)
    number = np.arange(len(positions)).reshape(len(u), len(v))
    places = triangles(m, n) if element.is_triangle else quadrilaterals(m, n)
    if element.order > 1:
        places = np.concatenate((2 * places, places + np.roll(places, -1, axis=1)), axis=1)
    connectivity = number[places[..., 0], places[..., 1]]
    # A Q8 has no node in its middle.
    used = np.zeros(len(positions), bool)
    used[connectivity] = True
    renumbered = np.cumsum(used) - 1
    number = renumbered[number]
    sides = (number[:, 0], number[-1], number[::-1, -1], number[0, ::-1])
    return Grid(
        positions[used],
        renumbered[connectivity],
        tuple(side[:: element.order] for side in sides),
        np.unique(np.concatenate(sides)),
    )


def quadrilaterals(m: int, n: int) -> NDArray[np.intp]:
    """Grid places (i, j) of the corners of m n cells, (m n, 4, 2)."""
    i, j = np.divmod(np.arange(m * n), n)
    corners = np.array([[0, 0], [1, 0], [1, 1], [0, 1]])
    return np.stack((i, j), axis=1)[:, None] + corners


def triangles(m: int, n: int) -> NDArray[np.intp]:
    """Grid places of the corners of the 2 m n halves of the cells, (2 m n, 3, 2).

    The diagonal changes from cell to cell, so that no direction is preferred.
    """
    cells = quadrilaterals(m, n)
    rising = np.array([[0, 1, 2], [0, 2, 3]])
    falling = np.array([[0, 1, 3], [1, 2, 3]])
    even = cells[:, 0].sum(axis=1) % 2 == 0
    halves = np.where(even[:, None, None], rising, falling)
    return np.take_along_axis(cells[:, None], halves[..., None], axis=2).reshape(-1, 3, 2)


# --- all patches together ------------------------------------------------------------------------


def join(grids: Sequence[Grid]) -> tuple[Array, list[NDArray[np.intp]]]:
    """Nodes of all grids, those that coincide made one, and each grid's nodes in new numbers."""
    nodes = np.concatenate([grid.nodes for grid in grids])
    first = np.cumsum([0] + [len(grid.nodes) for grid in grids])
    rims = np.concatenate([grid.rim + start for grid, start in zip(grids, first[:-1], strict=True)])
    tolerance = TOLERANCE * float(np.linalg.norm(np.ptp(nodes, axis=0)))
    same = rims[close_pairs(nodes[rims], tolerance)]
    group = label_components(len(nodes), same[:, 0], same[:, 1])
    _, kept = np.unique(group, return_index=True)
    return nodes[kept], np.split(group.astype(np.intp), first[1:-1])


def mesh_patches(geometry: PatchGeometry, element: ElementType) -> Mesh:
    """Mesh every patch and join them where their sides coincide.

    Raises
    ------
    MeshError   a patch is clockwise or folded, patches overlap or do not match where they touch,
        a named point is not a node.
    """
    patches = geometry.patches
    if faults := patch_faults(patches):
        raise MeshError(faults)
    grids = [mesh_patch(patch, element) for patch in patches]
    nodes, numbers = join(grids)
    connectivity = np.concatenate(
        [new[grid.connectivity] for grid, new in zip(grids, numbers, strict=True)]
    ).astype(np.int32)
    owner = np.repeat(np.arange(len(patches)), [len(grid.connectivity) for grid in grids])
    regions, region = region_index(geometry.regions, [patch.region for patch in patches])
    mesh = Mesh(nodes, (Block(element, connectivity, region[owner]),), regions)
    points, strays = _points(geometry.points, mesh)
    mesh = replace(mesh, sides=_sides(patches, grids, numbers, mesh), points=points)
    if faults := [*_element_faults(mesh, patches, owner), *strays]:
        raise MeshError(faults)
    return mesh


def _element_faults(mesh: Mesh, patches: Sequence[Patch], owner: NDArray) -> list[Fault]:
    """Folded patches, or if there are none, patches that lie on top of each other."""
    block = mesh.blocks[0]
    seen = [
        (fault.element, f"is folded: {fault.message}")
        for fault in shape_faults(block.element, block.connectivity, mesh.nodes)
    ] or [
        (fault.facet[1], f"touches or covers another: {fault.message}")
        for fault in overlap_faults(mesh)
    ]
    first: dict[str, Fault] = {}
    for element, what in seen:
        patch = patches[owner[element]]
        first.setdefault(patch.pointer, Fault(patch.pointer, f"patch {patch.name!r} {what}"))
    return list(first.values())


def _points(points: Mapping[str, Vector], mesh: Mesh) -> tuple[dict[str, int], list[Fault]]:
    found, strays = {}, []
    for name, place in points.items():
        distance = np.linalg.norm(mesh.nodes - place, axis=1)
        node = int(distance.argmin())
        found[name] = node
        if distance[node] > TOLERANCE * mesh.diagonal:
            x, y = mesh.nodes[node]
            strays.append(
                Fault(
                    f"/geometry/points/{name}",
                    f"point {name!r} at ({place[0]:.6g}, {place[1]:.6g}) is not a node; the "
                    f"nearest node is at ({x:.6g}, {y:.6g}), {distance[node]:.6g} away",
                )
            )
    return found, strays


def _sides(
    patches: Sequence[Patch], grids: Sequence[Grid], numbers: Sequence[NDArray], mesh: Mesh
) -> dict[str, Facets]:
    """Facets of the named sides; a name that several patches use means all of them."""
    pairs: dict[str, list[NDArray]] = defaultdict(list)
    for patch, grid, new in zip(patches, grids, numbers, strict=True):
        for name, side in zip(patch.sides, grid.sides, strict=True):
            if name is not None:
                pairs[name].append(np.stack((new[side[:-1]], new[side[1:]]), axis=1))
    return {name: _once(mesh, mesh.find_facets(np.concatenate(p))) for name, p in pairs.items()}


def _once(mesh: Mesh, facets: Facets) -> Facets:
    """Drop the second facet of an edge that the patches on both sides of it have named."""
    edges = np.sort(mesh.facet_ends(facets), axis=1)
    _, first = np.unique(edges, axis=0, return_index=True)
    return facets[np.sort(first)]

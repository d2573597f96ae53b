"""The normals that a side would have if its facets were arcs, not chords or parabolas.

A roller on a circular side lets the plate turn about the circle's centre. Normals averaged over
facets miss the centre a little at the ends of the side and where facets differ in length, and so
lock that rotation. Through three neighbouring nodes of an arc there is one circle, and its radii
are the true normals.
"""

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Facets, Mesh

Array = NDArray[np.float64]
Numbers = NDArray[np.intp]

IN_LINE = 1e-9  # rise over chord below which three points count as in line
# Cosine of a turn beyond which two chords are no one curve: an octagon is eight straight sides, a
# circle of nine chords or more is a circle.
KINK = np.cos(np.radians(42))


def facet_normals(mesh: Mesh, facets: Facets) -> Array:
    """Outward normals of each facet at its start, end and mid-side node, (f, 3, 2).

    In the order of `Mesh.facet_table`; zero where there is no mid-side node. Facets that meet at a
    node of one straight line or circle agree there, others need not.
    """
    table = mesh.facet_table(facets).astype(np.intp)
    normals = np.zeros((*table.shape, 2))
    quadratic = table[:, 2] >= 0
    normals[quadratic] = _quadratic(mesh, table[quadratic])
    normals[~quadratic, :2] = _linear(mesh, table[~quadratic, :2])
    return normals


def node_normals(mesh: Mesh, facets: Facets) -> tuple[Numbers, Array]:
    """Nodes (r,) of a side and the outward unit normals (r, 2) there.

    A node of one curve stands once, with the mean over its facets by their lengths; a node at a
    corner stands as often as there are facets, with the normal of each.
    """
    table, normals = mesh.facet_table(facets).astype(np.intp), facet_normals(mesh, facets)
    there = table >= 0
    nodes, normals = table[there], normals[there]
    weight = np.repeat(mesh.facet_lengths(facets), there.sum(axis=1))
    one = np.zeros((mesh.node_count, 2))
    one[nodes] = normals
    at_corner = np.zeros(mesh.node_count, bool)
    at_corner[nodes[(normals * one[nodes]).sum(axis=1) < KINK]] = True
    mean = np.zeros((mesh.node_count, 2))
    np.add.at(mean, nodes, weight[:, None] * normals)
    corner = at_corner[nodes]
    smooth = np.unique(nodes[~corner])
    return (
        np.concatenate((smooth, nodes[corner])),
        np.concatenate((_unit(mean[smooth]), normals[corner])),
    )


def _quadratic(mesh: Mesh, table: Numbers) -> Array:
    """Normals (f, 3, 2) of facets with mid-side nodes; table (f, 3) start, end, middle."""
    return _circle_normals(mesh.nodes[table[:, [0, 2, 1]]])[:, [0, 2, 1]]


def _linear(mesh: Mesh, ends: Numbers) -> Array:
    """Normals (f, 2, 2) at the ends (f, 2) of facets without mid-side nodes.

    The third node of the circle is the one before the facet or the one behind it.
    """
    before, behind = np.full((2, mesh.node_count), -1)
    behind[ends[:, 0]], before[ends[:, 1]] = ends[:, 1], ends[:, 0]
    a, b = ends.T
    chord = _right_of(mesh.nodes[b] - mesh.nodes[a])
    early, is_early = _arc_normals(mesh, np.column_stack((before[a], a, b)))
    late, is_late = _arc_normals(mesh, np.column_stack((a, b, behind[b])))
    at_a = np.where(is_early, early[:, 1], np.where(is_late, late[:, 0], chord))
    at_b = np.where(is_late, late[:, 1], np.where(is_early, early[:, 2], chord))
    return np.stack((at_a, at_b), axis=1)


def _arc_normals(mesh: Mesh, triples: Numbers) -> tuple[Array, NDArray[np.bool_]]:
    """Normals at three nodes in a row (k, 3, 2), and whether they are there and on one curve."""
    points = mesh.nodes[triples]
    u, v = _unit(points[:, 1] - points[:, 0]), _unit(points[:, 2] - points[:, 1])
    smooth = (triples >= 0).all(axis=1) & ((u * v).sum(axis=1) > KINK)
    normals = np.zeros(points.shape)
    normals[smooth] = _circle_normals(points[smooth])
    return normals, smooth[:, None]


def _circle_normals(points: Array) -> Array:
    """Normals to the right of the way along the circle through three points, (k, 3, 2)."""
    a, b = points[:, 0] - points[:, 1], points[:, 2] - points[:, 1]
    twice_area = a[:, 1] * b[:, 0] - a[:, 0] * b[:, 1]  # positive where the way turns left
    size = np.maximum((a**2).sum(axis=1), (b**2).sum(axis=1))
    straight = np.abs(twice_area) <= IN_LINE * size
    normals = np.repeat(_right_of(b - a)[:, None], 3, axis=1)
    a, b, area = a[~straight], b[~straight], twice_area[~straight, None]
    a2, b2 = (a**2).sum(axis=1, keepdims=True), (b**2).sum(axis=1, keepdims=True)
    to_centre = (_quarter_turn(b) * a2 - _quarter_turn(a) * b2) / (2 * area)
    outward = points[~straight] - (points[~straight, 1] + to_centre)[:, None]
    normals[~straight] = _unit(outward) * np.sign(area)[:, None]
    return normals


def _quarter_turn(vectors: Array) -> Array:
    """Turned by 90 degrees to the left."""
    return np.stack((-vectors[..., 1], vectors[..., 0]), axis=-1)


def _right_of(vectors: Array) -> Array:
    return -_quarter_turn(_unit(vectors))


def _unit(vectors: Array) -> Array:
    length = np.linalg.norm(vectors, axis=-1, keepdims=True)
    return vectors / np.where(length > 0, length, 1)

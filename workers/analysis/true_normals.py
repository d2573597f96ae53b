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
KINK = np.cos(np.radians(45))  # cosine of a turn beyond which two chords are no one curve


def true_normals(mesh: Mesh, facets: Facets) -> tuple[Numbers, Array]:
    """Nodes (k,) of a side and the mean outward normals (k, 2) there.

    The mean is over the facets that meet at a node, by their lengths: of length 1 where they agree,
    shorter at kinks, none where the side folds back.
    """
    table = mesh.facet_table(facets).astype(np.intp)
    weight = mesh.facet_lengths(facets)
    quadratic = table[:, 2] >= 0
    total, size = np.zeros((mesh.node_count, 2)), np.zeros(mesh.node_count)
    for chosen, find in ((quadratic, _quadratic), (~quadratic, _linear)):
        nodes, normals = find(mesh, table[chosen])
        np.add.at(total, nodes, weight[chosen, None, None] * normals)
        np.add.at(size, nodes, weight[chosen, None])
    nodes = mesh.facet_nodes(facets).astype(np.intp)
    return nodes, total[nodes] / size[nodes, None]


def _quadratic(mesh: Mesh, table: Numbers) -> tuple[Numbers, Array]:
    """Start, middle and end (f, 3) of facets with mid-side nodes, and normals there, (f, 3, 2)."""
    triples = table[:, [0, 2, 1]]
    return triples, _circle_normals(mesh.nodes[triples])


def _linear(mesh: Mesh, table: Numbers) -> tuple[Numbers, Array]:
    """Ends (f, 2) of facets without mid-side nodes, and the normals there, (f, 2, 2).

    The third node of the circle is the one before the facet or the one behind it.
    """
    ends = table[:, :2]
    before, behind = np.full((2, mesh.node_count), -1)
    behind[ends[:, 0]], before[ends[:, 1]] = ends[:, 1], ends[:, 0]
    a, b = ends.T
    chord = _right_of(mesh.nodes[b] - mesh.nodes[a])
    early, is_early = _arc_normals(mesh, np.column_stack((before[a], a, b)))
    late, is_late = _arc_normals(mesh, np.column_stack((a, b, behind[b])))
    at_a = np.where(is_early, early[:, 1], np.where(is_late, late[:, 0], chord))
    at_b = np.where(is_late, late[:, 1], np.where(is_early, early[:, 2], chord))
    return ends, np.stack((at_a, at_b), axis=1)


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

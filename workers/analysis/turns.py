"""Where a line of facets turns: the angles of its corners, and which of them are true corners.

An arc that is meshed with straight facets turns at every node, and so does the border of a round
region; such turns look like their neighbours. A true corner stands out. Where a straight facet is a
chord of an arc, the arc leaves its end at half the angle by which the next chord turns away.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Facets, Mesh

Array = NDArray[np.float64]
Rows = NDArray[np.intp]

LEAST = np.radians(10.0)  # a smaller turn raises the stress by no more than the mesh itself
PLAIN = np.radians(60.0)  # nobody meshes an arc with six facets to the circle
STANDS_OUT = 2.0  # times the turns at both its neighbours


class Turns(NamedTuple):
    """The nodes at which one facet of a line follows another, t of them.

    incoming, outgoing : (t,) rows of the facets that end and start there
    node : (t,)
    angle : (t,) of the material on the left of the line [rad], 0 to 2 pi
    is_corner : (t,) whether it is a corner, not a joint of a meshed curve
    """

    incoming: Rows
    outgoing: Rows
    node: Rows
    angle: Array
    is_corner: NDArray[np.bool_]


def turns(mesh: Mesh, facets: Facets) -> Turns:
    """Turns of the lines that facets (f, 3) form, the material on their left."""
    table = mesh.facet_table(facets)
    leaving, arriving = _end_tangents(mesh, table)
    incoming, outgoing = _follow(table, leaving, arriving)
    turn = np.pi - _opening(leaving[outgoing], arriving[incoming])
    # The turns at both ends of each facet; an open end counts as none.
    at_start, at_end = np.zeros(len(facets)), np.zeros(len(facets))
    at_start[outgoing], at_end[incoming] = turn, turn
    beside = np.maximum(np.abs(at_start[incoming]), np.abs(at_end[outgoing]))
    size = np.abs(turn)
    is_corner = (size >= LEAST) & ((size >= PLAIN) | (size > STANDS_OUT * beside))
    is_joint = np.zeros((2, len(facets)), bool)
    is_joint[0, outgoing], is_joint[1, incoming] = ~is_corner, ~is_corner
    chord = table[:, 2] < 0
    leaving = _turned(leaving, np.where(chord & is_joint[1], -at_end / 2, 0.0))
    arriving = _turned(arriving, np.where(chord & is_joint[0], at_start / 2, 0.0))
    angle = _opening(leaving[outgoing], arriving[incoming])
    is_corner &= np.abs(np.pi - angle) >= LEAST
    return Turns(incoming, outgoing, table[incoming, 1].astype(np.intp), angle, is_corner)


def _turned(directions: Array, angles: Array) -> Array:
    """Directions (f, 2) turned counter-clockwise by angles (f,)."""
    cos, sin = np.cos(angles), np.sin(angles)
    x, y = directions.T
    return np.stack((cos * x - sin * y, sin * x + cos * y), axis=1)


def _end_tangents(mesh: Mesh, table: NDArray[np.int32]) -> tuple[Array, Array]:
    """Directions of travel at the start and at the end of each facet, (f, 2), any length."""
    a, b = mesh.nodes[table[:, 0]], mesh.nodes[table[:, 1]]
    middle = np.where(table[:, 2:] < 0, (a + b) / 2, mesh.nodes[table[:, 2]])
    return 4 * middle - 3 * a - b, 3 * b + a - 4 * middle


def _opening(leaving: Array, arriving: Array) -> Array:
    """Angle from the outgoing direction counter-clockwise to the way back, (t,)."""
    to = np.arctan2(-arriving[:, 1], -arriving[:, 0])
    return np.mod(to - np.arctan2(leaving[:, 1], leaving[:, 0]), 2 * np.pi)


def _follow(table: NDArray[np.int32], leaving: Array, arriving: Array) -> tuple[Rows, Rows]:
    """Pairs of facets that follow each other.

    Where several lines touch in a node, the next facet is the one that encloses no other.
    """
    order = np.argsort(table[:, 0], kind="stable")
    starts = table[order, 0]
    first = np.searchsorted(starts, table[:, 1])
    count = np.searchsorted(starts, table[:, 1], side="right") - first
    incoming = np.flatnonzero(count > 0)
    outgoing = order[first[incoming]]
    for place in np.flatnonzero(count[incoming] > 1):
        row = incoming[place]
        several = order[first[row] : first[row] + count[row]]
        opening = _opening(leaving[several], np.repeat(arriving[[row]], len(several), axis=0))
        outgoing[place] = several[opening.argmin()]
    return incoming, outgoing

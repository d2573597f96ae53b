"""Does the mesh lie on top of itself, or touch itself without being joined?

A mesh of well-shaped elements is sound when its boundary neither crosses nor touches itself and has
material on its left side only. Faults of the plate as a whole (a doubled patch, a hanging node, a
part drawn over another) all show there, so no pair of elements needs to be compared.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.border import Border, border_of, windings
from workers.analysis.connected import label_components
from workers.analysis.mesh import Mesh
from workers.analysis.nearby import segment_candidates
from workers.analysis.selection import TOLERANCE

Array = NDArray[np.float64]
Numbers = NDArray[np.intp]
Mask = NDArray[np.bool_]


class OverlapFault(NamedTuple):
    """A boundary facet (block, element, side) where the mesh is not sound, and what was seen."""

    facet: NDArray[np.int32]
    message: str


def overlap_faults(mesh: Mesh, most: int = 20) -> list[OverlapFault]:
    """Places where the mesh overlaps or touches itself, the first `most` of them.

    Expects elements of sound shape, edges of at most two elements and no coincident nodes.
    """
    border = border_of(mesh)
    # Where the boundary crosses itself, what lies inside what has no clear answer.
    return (_contact_faults(mesh, border, most) or _buried_faults(mesh, border))[:most]


# --- the boundary touches or crosses itself ------------------------------------------------------


def _contact_faults(mesh: Mesh, border: Border, most: int) -> list[OverlapFault]:
    tolerance = TOLERANCE * mesh.diagonal
    faults: list[OverlapFault] = []
    for near in segment_candidates(border.start, border.end, tolerance):
        pairs = near[border.row[near[:, 0]] != border.row[near[:, 1]]]
        for one, other in (pairs.T, pairs.T[::-1]):
            on = np.flatnonzero(_starts_on(border, one, other, tolerance))
            faults += [_say_hanging(mesh, border, one[k], other[k]) for k in on[:most]]
        one, other = pairs.T
        crossing = np.flatnonzero(_crosses(border, one, other))
        faults += [_say_crossing(mesh, border, one[k], other[k]) for k in crossing[:most]]
        if len(faults) >= most:
            break
    return faults


def _starts_on(border: Border, one: Numbers, other: Numbers, tolerance: float) -> Mask:
    """Does chord `one` start on chord `other` without sharing that end? Chords form loops, so
    that every end is the start of one of them.
    """
    apart = (border.first[one] != border.first[other]) & (border.first[one] != border.last[other])
    a, b, point = border.start[other], border.end[other], border.start[one]
    along = ((point - a) * (b - a)).sum(axis=1) / ((b - a) ** 2).sum(axis=1)
    foot = a + np.clip(along, 0, 1)[:, None] * (b - a)
    return apart & (np.linalg.norm(point - foot, axis=1) <= tolerance)


def _crosses(border: Border, one: Numbers, other: Numbers) -> Mask:
    """Do two chords cross inside both?"""
    a, b, c, d = border.start[one], border.end[one], border.start[other], border.end[other]
    apart = (_turn(a, b, c) > 0) != (_turn(a, b, d) > 0)
    crossed = apart & ((_turn(c, d, a) > 0) != (_turn(c, d, b) > 0))
    ends = (border.first[one], border.last[one])
    for end in (border.first[other], border.last[other]):
        crossed &= (end != ends[0]) & (end != ends[1])
    return crossed


def _turn(a: Array, b: Array, c: Array) -> Array:
    """Twice the area of the triangle a, b, c; positive when c is on the left of a-b."""
    u, v = b - a, c - a
    return u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0]


def _say_hanging(mesh: Mesh, border: Border, one: int, other: int) -> OverlapFault:
    facet = mesh.boundary[border.row[other]]
    number, place = border.first[one], _at(border.start[one])
    if number < mesh.node_count:
        return OverlapFault(
            facet,
            f"node {number} at {place} lies on the {_side(mesh, border, other)} without being a "
            "node of it; elements must share whole sides",
        )
    return OverlapFault(
        facet,
        f"the {_side(mesh, border, one)} touches the {_side(mesh, border, other)} at {place}; "
        "elements must share whole sides or stay apart",
    )


def _say_crossing(mesh: Mesh, border: Border, one: int, other: int) -> OverlapFault:
    a, b = border.start[[one]], border.end[[one]]
    before, behind = (_turn(border.start[[other]], border.end[[other]], end) for end in (a, b))
    place = (a + (b - a) * before / (before - behind))[0]
    return OverlapFault(
        mesh.boundary[max(border.row[one], border.row[other])],
        f"the {_side(mesh, border, one)} crosses the {_side(mesh, border, other)} at "
        f"{_at(place)}; the mesh must not lie on top of itself",
    )


# --- the boundary has material on both sides -----------------------------------------------------


def _buried_faults(mesh: Mesh, border: Border) -> list[OverlapFault]:
    """Parts of the boundary that lie inside an element.

    Nothing crosses here, so that one chord of each loop speaks for the loop. Where loops share a
    node each chord at it is asked.
    """
    faults = []
    for chord in _speakers(border):
        middle = (border.start[chord] + border.end[chord]) / 2
        # The material is on the left: above a chord that runs to the right.
        expected = int(border.end[chord, 0] > border.start[chord, 0])
        if windings(border, middle, besides=chord) != expected:
            faults.append(
                OverlapFault(
                    mesh.boundary[border.row[chord]],
                    f"the {_side(mesh, border, chord)} lies inside another element, near "
                    f"{_at(middle)}; the mesh must not lie on top of itself",
                )
            )
    return faults


def _speakers(border: Border) -> Numbers:
    """For each loop its chord of widest reach in x, and all chords at nodes that loops share."""
    numbers, ends = np.unique(np.stack((border.first, border.last)), return_inverse=True)
    first, last = ends.reshape(2, -1)
    loop = label_components(len(numbers), first, last)[first]
    reach = np.abs(border.end[:, 0] - border.start[:, 0])
    order = np.lexsort((reach, loop))
    widest = order[np.flatnonzero(np.append(np.diff(loop[order]) != 0, True))]
    leaving = np.bincount(first, minlength=len(numbers))
    shared = np.flatnonzero(((leaving[first] > 1) | (leaving[last] > 1)) & (reach > 0))
    return np.union1d(widest, shared)


# --- words ---------------------------------------------------------------------------------------


def _side(mesh: Mesh, border: Border, chord: int) -> str:
    facet = mesh.boundary[border.row[chord]]
    block, element, _ = facet.tolist()
    a, b = mesh.facet_ends(facet[None])[0]
    where = f" of block {block}" if len(mesh.blocks) > 1 else ""
    return f"side {a}-{b} of element {element}{where}"


def _at(point: Array) -> str:
    return f"({point[0]:.6g}, {point[1]:.6g})"

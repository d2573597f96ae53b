"""Does the mesh lie on top of itself, or touch itself without being joined?

A mesh of well-shaped elements is sound when its boundary neither crosses nor touches itself and has
material on its left side only. Faults of the plate as a whole (a doubled patch, a hanging node, a
part drawn over another) all show there, so no pair of elements needs to be compared.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.connected import label_components
from workers.analysis.mesh import Mesh
from workers.analysis.nearby import segment_candidates
from workers.analysis.selection import TOLERANCE

Array = NDArray[np.float64]
Numbers = NDArray[np.intp]
Mask = NDArray[np.bool_]

PIECES = 4  # chords for a curved facet: they leave its curve by a sixteenth of its rise
STRAIGHT = 1e-9  # rise over length below which one chord is enough


class OverlapFault(NamedTuple):
    """A boundary facet (block, element, side) where the mesh is not sound, and what was seen."""

    facet: NDArray[np.int32]
    message: str


class Outline(NamedTuple):
    """The boundary as s chords.

    row : (s,) place of the facet in `mesh.boundary`
    start, end : (s, 2) positions of the ends [L]
    first, last : (s,) numbers of the ends: nodes, or beyond them the joints of a curved facet
    """

    row: Numbers
    start: Array
    end: Array
    first: Numbers
    last: Numbers


def overlap_faults(mesh: Mesh, most: int = 20) -> list[OverlapFault]:
    """Places where the mesh overlaps or touches itself, the first `most` of them.

    Expects elements of sound shape, edges of at most two elements and no coincident nodes.
    """
    outline = _outline(mesh)
    # Where the boundary crosses itself, what lies inside what has no clear answer.
    return (_contact_faults(mesh, outline, most) or _buried_faults(mesh, outline))[:most]


def _outline(mesh: Mesh) -> Outline:
    """Chords of the boundary facets: one for a straight facet, PIECES for a curved one."""
    table = mesh.facet_table(mesh.boundary).astype(np.intp)
    a, b = mesh.nodes[table[:, 0]], mesh.nodes[table[:, 1]]
    rise = np.where(table[:, 2:] < 0, 0, mesh.nodes[table[:, 2]] - (a + b) / 2)
    curved = np.linalg.norm(rise, axis=1) > STRAIGHT * np.linalg.norm(b - a, axis=1)
    straight, bent = np.flatnonzero(~curved), np.flatnonzero(curved)
    t = np.arange(PIECES + 1)[:, None] / PIECES
    points = (1 - t) * a[bent, None] + t * b[bent, None] + 4 * t * (1 - t) * rise[bent, None]
    joints = mesh.node_count + np.arange(len(bent) * (PIECES + 1)).reshape(-1, PIECES + 1)
    joints[:, 0], joints[:, -1] = table[bent, 0], table[bent, 1]
    return Outline(
        np.concatenate((straight, np.repeat(bent, PIECES))),
        np.concatenate((a[straight], points[:, :-1].reshape(-1, 2))),
        np.concatenate((b[straight], points[:, 1:].reshape(-1, 2))),
        np.concatenate((table[straight, 0], joints[:, :-1].ravel())),
        np.concatenate((table[straight, 1], joints[:, 1:].ravel())),
    )


# --- the boundary touches or crosses itself ------------------------------------------------------


def _contact_faults(mesh: Mesh, outline: Outline, most: int) -> list[OverlapFault]:
    tolerance = TOLERANCE * mesh.diagonal
    faults: list[OverlapFault] = []
    for near in segment_candidates(outline.start, outline.end, tolerance):
        pairs = near[outline.row[near[:, 0]] != outline.row[near[:, 1]]]
        for one, other in (pairs.T, pairs.T[::-1]):
            on = np.flatnonzero(_starts_on(outline, one, other, tolerance))
            faults += [_say_hanging(mesh, outline, one[k], other[k]) for k in on[:most]]
        one, other = pairs.T
        crossing = np.flatnonzero(_crosses(outline, one, other))
        faults += [_say_crossing(mesh, outline, one[k], other[k]) for k in crossing[:most]]
        if len(faults) >= most:
            break
    return faults


def _starts_on(outline: Outline, one: Numbers, other: Numbers, tolerance: float) -> Mask:
    """Does chord `one` start on chord `other` without sharing that end? Chords form loops, so
    that every end is the start of one of them.
    """
    apart = (outline.first[one] != outline.first[other]) & (
        outline.first[one] != outline.last[other]
    )
    a, b, point = outline.start[other], outline.end[other], outline.start[one]
    along = ((point - a) * (b - a)).sum(axis=1) / ((b - a) ** 2).sum(axis=1)
    foot = a + np.clip(along, 0, 1)[:, None] * (b - a)
    return apart & (np.linalg.norm(point - foot, axis=1) <= tolerance)


def _crosses(outline: Outline, one: Numbers, other: Numbers) -> Mask:
    """Do two chords cross inside both?"""
    a, b, c, d = outline.start[one], outline.end[one], outline.start[other], outline.end[other]
    apart = (_turn(a, b, c) > 0) != (_turn(a, b, d) > 0)
    crossed = apart & ((_turn(c, d, a) > 0) != (_turn(c, d, b) > 0))
    ends = (outline.first[one], outline.last[one])
    for end in (outline.first[other], outline.last[other]):
        crossed &= (end != ends[0]) & (end != ends[1])
    return crossed


def _turn(a: Array, b: Array, c: Array) -> Array:
    """Twice the area of the triangle a, b, c; positive when c is on the left of a-b."""
    u, v = b - a, c - a
    return u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0]


def _say_hanging(mesh: Mesh, outline: Outline, one: int, other: int) -> OverlapFault:
    facet = mesh.boundary[outline.row[other]]
    number, place = outline.first[one], _at(outline.start[one])
    if number < mesh.node_count:
        return OverlapFault(
            facet,
            f"node {number} at {place} lies on the {_side(mesh, outline, other)} without being a "
            "node of it; elements must share whole sides",
        )
    return OverlapFault(
        facet,
        f"the {_side(mesh, outline, one)} touches the {_side(mesh, outline, other)} at {place}; "
        "elements must share whole sides or stay apart",
    )


def _say_crossing(mesh: Mesh, outline: Outline, one: int, other: int) -> OverlapFault:
    a, b = outline.start[[one]], outline.end[[one]]
    before, behind = (_turn(outline.start[[other]], outline.end[[other]], end) for end in (a, b))
    place = (a + (b - a) * before / (before - behind))[0]
    return OverlapFault(
        mesh.boundary[outline.row[one]],
        f"the {_side(mesh, outline, one)} crosses the {_side(mesh, outline, other)} at "
        f"{_at(place)}; the mesh must not lie on top of itself",
    )


# --- the boundary has material on both sides -----------------------------------------------------


def _buried_faults(mesh: Mesh, outline: Outline) -> list[OverlapFault]:
    """Parts of the boundary that lie inside an element.

    Nothing crosses here, so that one chord of each loop speaks for the loop. Where loops share a
    node each chord at it is asked.
    """
    faults = []
    for chord in _speakers(outline):
        if _windings_above(outline, chord) != (outline.end[chord, 0] > outline.start[chord, 0]):
            middle = (outline.start[chord] + outline.end[chord]) / 2
            faults.append(
                OverlapFault(
                    mesh.boundary[outline.row[chord]],
                    f"the {_side(mesh, outline, chord)} lies inside another element, near "
                    f"{_at(middle)}; the mesh must not lie on top of itself",
                )
            )
    return faults


def _speakers(outline: Outline) -> Numbers:
    """For each loop its chord of widest reach in x, and all chords at nodes that loops share."""
    numbers, ends = np.unique(np.stack((outline.first, outline.last)), return_inverse=True)
    first, last = ends.reshape(2, -1)
    loop = label_components(len(numbers), first, last)[first]
    reach = np.abs(outline.end[:, 0] - outline.start[:, 0])
    order = np.lexsort((reach, loop))
    widest = order[np.flatnonzero(np.append(np.diff(loop[order]) != 0, True))]
    leaving = np.bincount(first, minlength=len(numbers))
    shared = np.flatnonzero(((leaving[first] > 1) | (leaving[last] > 1)) & (reach > 0))
    return np.union1d(widest, shared)


def _windings_above(outline: Outline, chord: int) -> int:
    """How often the boundary goes round a point just above the middle of a chord.

    Counted on the ray upwards: chords that run to the left count one, to the right minus one.
    """
    x, y = (outline.start[chord] + outline.end[chord]) / 2
    left, right = outline.start[:, 0] <= x, outline.end[:, 0] <= x
    hit = np.flatnonzero(left != right)
    hit = hit[hit != chord]
    a, b = outline.start[hit], outline.end[hit]
    above = a[:, 1] + (x - a[:, 0]) * (b[:, 1] - a[:, 1]) / (b[:, 0] - a[:, 0]) > y
    return int(np.where(right[hit], 1, -1)[above].sum())


# --- words ---------------------------------------------------------------------------------------


def _side(mesh: Mesh, outline: Outline, chord: int) -> str:
    facet = mesh.boundary[outline.row[chord]]
    block, element, _ = facet.tolist()
    a, b = mesh.facet_ends(facet[None])[0]
    where = f" of block {block}" if len(mesh.blocks) > 1 else ""
    return f"side {a}-{b} of element {element}{where}"


def _at(point: Array) -> str:
    return f"({point[0]:.6g}, {point[1]:.6g})"

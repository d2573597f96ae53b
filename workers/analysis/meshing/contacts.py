"""Where pieces of an arrangement cross or come too close: each pair of loops one fault.

The mesh library hangs, crashes or loses area on most of these.
"""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.arrangement import Arrangement
from workers.analysis.meshing.loops import SHORTEST, Loop
from workers.analysis.meshing.places import at
from workers.analysis.meshing.proximity import close_pairs, closest
from workers.errors import Fault

Array = NDArray[np.float64]
Index = NDArray[np.intp]

ADJACENT = 0.2  # of the shortest side: sides that meet in a vertex may come so close beside it
WHOLE = 0.999  # of the shortest side: a side of just that length is not too short by rounding
CROSSING = 1e-9  # of the diagonal: a distance below this is none


def contact_faults(arrangement: Arrangement, diagonal: float) -> list[Fault]:
    """Faults of loops that cross, touch or nearly touch; [] if pieces meet at their ends only."""
    found: dict[tuple[int, ...], Fault] = {}
    for loops, fault in _contacts(arrangement, diagonal):
        found.setdefault(loops, fault)
    return [found[loops] for loops in sorted(found)]


def _contacts(arrangement: Arrangement, diagonal: float) -> Iterator[tuple[tuple[int, ...], Fault]]:
    yield from _crossings(arrangement, diagonal)
    yield from _touches(arrangement, SHORTEST * diagonal)
    yield from _crumbs(arrangement, SHORTEST * diagonal)


def _crossings(
    arrangement: Arrangement, diagonal: float
) -> Iterator[tuple[tuple[int, ...], Fault]]:
    table, ends, pieces = arrangement.table, arrangement.ends, arrangement.pieces
    shortest = SHORTEST * diagonal
    i, j = close_pairs(table, shortest)
    common = (ends[i][:, :, None] == ends[j][:, None, :]).any(axis=2)
    shared = np.where(common[:, :, None], arrangement.vertices[ends[i]], np.nan)
    apart = common.any(axis=1) & ~table.is_arc[i] & ~table.is_arc[j]
    i, j, common, shared = i[~apart], j[~apart], common[~apart], shared[~apart]
    near = closest(table, i, j, shared, shortest)
    least = np.where(common.any(axis=1), ADJACENT, 1.0) * shortest
    for k in np.flatnonzero(near.distance < least):
        one, other = pieces[i[k]], pieces[j[k]]
        loops = min(one.owners), min(other.owners)
        if loops[0] > loops[1]:
            one, other, loops = other, one, loops[::-1]
        gap = float(near.distance[k])
        if gap <= CROSSING * diagonal:
            gap = 0.0
        first, second = (arrangement.loops[n] for n in loops)
        message = _describe(first, second, gap, at(near.second[k]), shortest)
        yield loops, Fault(other.pointer, message)


def _touches(arrangement: Arrangement, shortest: float) -> Iterator[tuple[tuple[int, ...], Fault]]:
    """Vertices through which a loop comes twice, or that two of outline and holes share."""
    visits: dict[int, list[tuple[int, str]]] = {}
    for number, way in enumerate(arrangement.ways):
        for vertex, piece in zip(arrangement.starts(number).tolist(), way, strict=True):
            visits.setdefault(vertex, []).append((number, arrangement.pieces[piece].pointer))
    for vertex, seen in visits.items():
        place = at(arrangement.vertices[vertex])
        for k, (other, pointer) in enumerate(seen):
            for one, _ in seen[:k]:
                first, second = arrangement.loops[one], arrangement.loops[other]
                if one == other or "region" not in (first.kind, second.kind):
                    message = _describe(first, second, 0.0, place, shortest)
                    where = pointer if first is second else second.pointer
                    yield (one, other), Fault(where, message)


def _crumbs(arrangement: Arrangement, shortest: float) -> Iterator[tuple[tuple[int, ...], Fault]]:
    """Pieces too short to mesh: a vertex lies nearly, but not quite, in another one."""
    lengths = arrangement.table.lengths
    for number in np.flatnonzero(lengths < WHOLE * shortest):
        piece = arrangement.pieces[number]
        touching = {
            loop
            for other in arrangement.pieces
            if {piece.start, piece.end} & {other.start, other.end}
            for loop in other.owners
        }
        loops = tuple(sorted(touching))
        labels = " and ".join(arrangement.loops[n].label for n in loops)
        yield (
            loops,
            Fault(
                piece.pointer,
                f"{labels} have vertices {lengths[number]:.3g} apart near "
                f"{at(arrangement.vertices[piece.start])}; make them one, or at least "
                f"{shortest:.3g} apart",
            ),
        )


def _describe(first: Loop, second: Loop, gap: float, place: str, shortest: float) -> str:
    """What is wrong between two loops, the earlier one first; gap 0 where they meet."""
    if first is second:
        seen = (
            f"comes within {gap:.3g} of itself"
            if gap
            else "crosses, touches or nearly touches itself"
        )
        return (
            f"{first.label} {seen} near {place}; its sides may meet at their ends only and must "
            f"stay {shortest:.3g} apart elsewhere"
        )
    kinds = (first.kind, second.kind)
    if "region" not in kinds:
        if gap:
            seen = f"leaves no material to {first.label} near {place} (gap {gap:.3g})"
        else:
            seen = f"crosses, touches or nearly touches {first.label} near {place}"
        notch = "" if kinds == ("hole", "hole") else ", or draw the notch as part of the outline"
        return f"{second.label} {seen}; they must be at least {shortest:.3g} apart: move one{notch}"
    if gap:
        return (
            f"the border of {second.label} comes within {gap:.3g} of {first.label} near {place} "
            f"without touching; share the border exactly, or stay {shortest:.3g} away"
        )
    if first.kind == "outline":
        return f"{second.label} reaches beyond the plate's outline near {place}; keep it inside"
    return (
        f"{second.label} crosses the border of {first.label} near {place}; a region may lie "
        "inside another, hold it or share a border with it, but not cross it"
    )

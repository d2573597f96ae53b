"""What can be wrong between the loops of a plate, found before anything is meshed.

The mesh library hangs or crashes on most of these; each becomes a fault with the place where it is.
"""

from collections.abc import Iterator, Sequence

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.arrangement import RISE, polygon, polyline
from workers.analysis.meshing.loops import SHORTEST, Loop, tangent
from workers.errors import Fault

Array = NDArray[np.float64]

SHARPEST = 1.0  # degrees: a sharper corner is a sliver that no element fits into
SHARED = 1e-9  # of the diagonal squared: common area below this is rounding


def check_loops(loops: Sequence[Loop], diagonal: float) -> list[Fault]:
    """Faults of an outline (first), its holes and its regions; [] if it can be meshed."""
    faults = [fault for loop in loops for fault in _own_faults(loop, diagonal)]
    if faults:
        return faults
    shapes = [polygon(loop, RISE * diagonal) for loop in loops]
    faults = [f for i in range(1, len(loops)) for f in _against_outline(loops, shapes, i, diagonal)]
    return faults + list(_against_each_other(loops, shapes, diagonal))


# --- one loop -------------------------------------------------------------------------------------


def _own_faults(loop: Loop, diagonal: float) -> Iterator[Fault]:
    if abs(loop.area) < (SHORTEST * diagonal) ** 2:
        yield Fault(loop.pointer, f"{loop.label} encloses no area")
        return
    lines = [shapely.LineString(polyline(s.curve, RISE * diagonal)) for s in loop.sides]
    crossings = list(_self_crossings(loop, lines, diagonal))
    yield from crossings
    if not crossings:
        yield from _sharp_corners(loop)


def _self_crossings(
    loop: Loop, lines: list[shapely.LineString], diagonal: float
) -> Iterator[Fault]:
    tree, count = shapely.STRtree(lines), len(lines)
    tolerance = SHORTEST * diagonal
    first, second = tree.query(lines, predicate="dwithin", distance=tolerance)
    for i, j in zip(first, second, strict=True):
        if i >= j:
            continue
        one, other = lines[i], lines[j]
        for end in _common_ends(loop, int(i), int(j), count):
            keep = shapely.Point(end).buffer(4 * tolerance)
            one, other = one.difference(keep), other.difference(keep)
        if one.is_empty or other.is_empty or one.distance(other) > tolerance / 2:
            continue
        where = _place(shapely.shortest_line(one, other).coords[0])
        seen = "crosses or touches itself" if one.intersects(other) else "comes too close to itself"
        yield Fault(
            loop.sides[j].pointer,
            f"{loop.label} {seen} near {where}; its sides may meet at their ends only and must "
            f"stay {tolerance:.3g} apart elsewhere",
        )
        return


def _common_ends(loop: Loop, i: int, j: int, count: int) -> list[Array]:
    ends = []
    if (i + 1) % count == j:
        ends.append(loop.sides[j].curve.start)
    if (j + 1) % count == i:
        ends.append(loop.sides[i].curve.start)
    return ends


def _sharp_corners(loop: Loop) -> Iterator[Fault]:
    for i, side in enumerate(loop.sides):
        arriving, leaving = tangent(loop.sides[i - 1].curve, 1.0), tangent(side.curve, 0.0)
        turn = np.degrees(
            np.arctan2(arriving[0] * leaving[1] - arriving[1] * leaving[0], arriving @ leaving)
        )
        if abs(turn) > 180.0 - SHARPEST:
            yield Fault(
                side.pointer,
                f"{loop.label} has a corner of {180.0 - abs(turn):.2g} degrees at "
                f"{_place(side.curve.start)}; no element fits into a corner sharper than "
                f"{SHARPEST:g} degree",
            )


# --- holes and regions in the plate ---------------------------------------------------------------


def _against_outline(
    loops: Sequence[Loop], shapes: Sequence[shapely.Polygon], number: int, diagonal: float
) -> Iterator[Fault]:
    loop, shape, outline = loops[number], shapes[number], shapes[0]
    beyond = shape.difference(outline)
    if beyond.area > SHARED * diagonal**2 and _thick(beyond, diagonal):
        where = _place(beyond.representative_point().coords[0])
        seen = "lies outside" if not shape.intersects(outline) else "reaches beyond"
        yield Fault(
            loop.pointer, f"{loop.label} {seen} the plate's outline near {where}; keep it inside"
        )
    elif loop.kind == "hole":
        gap = shape.exterior.distance(outline.exterior)
        if gap < SHORTEST * diagonal:
            where = _place(shapely.shortest_line(shape.exterior, outline.exterior).coords[0])
            yield Fault(
                loop.pointer,
                f"{loop.label} leaves no material to the plate's outline near {where} (gap "
                f"{gap:.3g}); move it, make it smaller, or draw the notch as part of the outline",
            )


def _against_each_other(
    loops: Sequence[Loop], shapes: Sequence[shapely.Polygon], diagonal: float
) -> Iterator[Fault]:
    inner = np.array(shapes[1:], dtype=object)
    tree = shapely.STRtree(inner)
    first, second = tree.query(inner, predicate="dwithin", distance=SHORTEST * diagonal)
    for i, j in zip(first + 1, second + 1, strict=True):
        if i < j:
            pair, forms = (loops[i], loops[j]), (shapes[i], shapes[j])
            kinds = {loop.kind for loop in pair}
            if kinds == {"hole"}:
                yield from _two_holes(pair, forms, diagonal)
            else:
                yield from _crossing(pair, forms, diagonal)


def _two_holes(
    pair: tuple[Loop, Loop], forms: tuple[shapely.Polygon, shapely.Polygon], diagonal: float
) -> Iterator[Fault]:
    one, other = pair
    common = forms[0].intersection(forms[1])
    if common.area > 0:
        where = _place(common.representative_point().coords[0])
        yield Fault(
            other.pointer,
            f"{other.label} overlaps {one.label} near {where}; draw them as one hole, or move one",
        )
        return
    where = _place(shapely.shortest_line(*forms).coords[0])
    yield Fault(
        other.pointer,
        f"{other.label} leaves no material to {one.label} near {where}; they must be at least "
        f"{SHORTEST * diagonal:.3g} apart",
    )


def _crossing(
    pair: tuple[Loop, Loop], forms: tuple[shapely.Polygon, shapely.Polygon], diagonal: float
) -> Iterator[Fault]:
    """A region may share borders with, hold, or lie in another loop; it may not cross it."""
    parts = (
        forms[0].intersection(forms[1]),
        forms[0].difference(forms[1]),
        forms[1].difference(forms[0]),
    )
    if not all(p.area > SHARED * diagonal**2 and _thick(p, diagonal) for p in parts):
        if pair[0].kind == pair[1].kind == "region" or _hole_swallows(pair, parts, diagonal):
            yield from _same_or_swallowed(pair, parts, diagonal)
        return
    one, other = pair
    crossing = forms[0].exterior.intersection(forms[1].exterior)
    where = _place(crossing.representative_point().coords[0])
    yield Fault(
        other.pointer,
        f"{other.label} crosses the border of {one.label} at {where}; a region may lie inside, "
        "hold, or share a border with a hole or another region, but not cross it",
    )


def _hole_swallows(
    pair: tuple[Loop, Loop], parts: tuple[shapely.Geometry, ...], diagonal: float
) -> bool:
    return any(
        loop.kind == "region" and not _thick(rest, diagonal)
        for loop, rest in zip(pair, parts[1:], strict=True)
    )


def _same_or_swallowed(
    pair: tuple[Loop, Loop], parts: tuple[shapely.Geometry, ...], diagonal: float
) -> Iterator[Fault]:
    for loop, other, rest in ((pair[0], pair[1], parts[1]), (pair[1], pair[0], parts[2])):
        covered = not _thick(rest, diagonal) and _thick(parts[0], diagonal)
        wins = other.kind == "hole" or other is pair[1]
        if loop.kind == "region" and covered and wins:
            yield Fault(
                loop.pointer,
                f"nothing is left of {loop.label}: {other.label} covers it altogether; leave one "
                "out, or name the outer region first",
            )


def _thick(shape: shapely.Geometry, diagonal: float) -> bool:
    """Whether it is more than the sliver that rounding leaves between two equal borders."""
    return not shape.buffer(-SHORTEST * diagonal / 2).is_empty


def _place(at: Sequence[float] | Array) -> str:
    return f"({at[0]:.6g}, {at[1]:.6g})"

"""What is wrong with patches before they are meshed: each alone, and where they touch.

Patches share whole sides: same two corners, same curve, same divisions, same grading. Anything else
that touches is a fault, because elements on the two sides would not be joined.
"""

from collections import defaultdict
from collections.abc import Iterator, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.connected import label_components
from workers.analysis.meshing.curves import Arc, Curve, NoArcError, curve
from workers.analysis.nearby import SKEW, close_pairs
from workers.analysis.selection import TOLERANCE
from workers.errors import Fault
from workers.geometry import Patch

Array = NDArray[np.float64]

SIDES = ("1-2", "2-3", "3-4", "4-1")
WIDEST = 180.01  # degrees; a smooth joint of two arcs is left to the check of the elements
SAME_GRADING = 1e-9  # relative: gradings are typed, and one of the two may be a reciprocal


class PatchSide(NamedTuple):
    """One side of a patch; grading is in the direction of the side."""

    patch: Patch
    number: int
    curve: Curve
    divisions: int
    grading: float

    def __str__(self) -> str:
        return f"side {SIDES[self.number]} of patch {self.patch.name!r}"

    @property
    def pointer(self) -> str:
        return f"{self.patch.pointer}/sides/{self.number}"


def patch_curves(patch: Patch) -> tuple[Curve, Curve, Curve, Curve]:
    """The four sides, corner 1-2, 2-3, 3-4, 4-1.

    Raises
    ------
    NoArcError   a `through` lies in line with its corners.
    """
    one, two, three, four = (_curve(patch, number) for number in range(4))
    return one, two, three, four


def _curve(patch: Patch, number: int) -> Curve:
    start, end = patch.corners[number], patch.corners[(number + 1) % 4]
    through = patch.through[number]
    return curve(np.array(start), np.array(end), None if through is None else np.array(through))


def patch_faults(patches: Sequence[Patch]) -> list[Fault]:
    """Everything that is wrong with the patches, as far as it shows without elements."""
    corners = np.array([patch.corners for patch in patches], dtype=np.float64).reshape(-1, 2)
    tolerance = TOLERANCE * float(np.linalg.norm(np.ptp(corners, axis=0)))
    same = close_pairs(corners, tolerance)
    vertices = label_components(len(corners), same[:, 0], same[:, 1]).reshape(-1, 4)
    faults = [
        fault
        for patch, numbers in zip(patches, vertices, strict=True)
        for fault in _lone_faults(patch, numbers)
    ]
    if faults:
        return faults
    sides = [side for patch in patches for side in _sides(patch)]
    ends = np.stack((vertices, np.roll(vertices, -1, axis=1)), axis=2).reshape(-1, 2)
    return [
        *_sharing_faults(sides, ends, tolerance),
        *_hanging_corner_faults(patches, sides, vertices, ends, tolerance),
    ]


# --- one patch alone -----------------------------------------------------------------------------


def _lone_faults(patch: Patch, vertices: NDArray) -> Iterator[Fault]:
    if len(set(vertices.tolist())) < 4:
        yield Fault(
            f"{patch.pointer}/corners",
            f"patch {patch.name!r} needs four different corners; got {_listed(patch.corners)}",
        )
        return
    curves = []
    for number in range(4):
        try:
            curves.append(_curve(patch, number))
        except NoArcError:
            yield Fault(
                f"{patch.pointer}/through/{number}",
                f"{_at(patch.through[number])} lies in line with the ends of side {SIDES[number]} "
                f"of patch {patch.name!r}: no arc goes through it; give null for a straight side",
            )
    if len(curves) < 4:
        return
    rim = np.concatenate([side.at(np.array([0.0, 0.25, 0.5, 0.75])) for side in curves])
    rim -= rim[0]
    area = float(np.sum(rim[:-1, 0] * rim[1:, 1] - rim[1:, 0] * rim[:-1, 1]) / 2)
    if area <= 0:
        yield Fault(
            f"{patch.pointer}/corners",
            f"the corners of patch {patch.name!r} run clockwise (area {area:.6g}): "
            f"{_listed(patch.corners)}; list them counter-clockwise",
        )
        return
    for corner in range(4):
        angle = _angle(curves[corner - 1], curves[corner])
        if angle > WIDEST:
            yield Fault(
                f"{patch.pointer}/corners/{corner}",
                f"corner {corner + 1} of patch {patch.name!r}, {_at(patch.corners[corner])}, has "
                f"an angle of {angle:.6g} degrees; it must be below 180 degrees",
            )


def _angle(before: Curve, behind: Curve) -> float:
    """Angle inside the patch between two sides at their common corner [degrees]."""
    back, ahead = -before.tangent(1.0), behind.tangent(0.0)
    turn = np.arctan2(back[1], back[0]) - np.arctan2(ahead[1], ahead[0])
    return float(np.degrees(turn) % 360)


def _sides(patch: Patch) -> list[PatchSide]:
    (m, n), (g, h) = patch.divisions, patch.grading
    return [
        PatchSide(patch, number, side, (m, n)[number % 2], (g, h, 1 / g, 1 / h)[number])
        for number, side in enumerate(patch_curves(patch))
    ]


# --- where patches touch -------------------------------------------------------------------------


def _sharing_faults(sides: Sequence[PatchSide], ends: NDArray, tolerance: float) -> Iterator[Fault]:
    """Sides with the same two ends must be one side in everything."""
    between: dict[tuple[int, int], list[int]] = defaultdict(list)
    for number, (a, b) in enumerate(ends.tolist()):
        between[min(a, b), max(a, b)].append(number)
    for numbers in between.values():
        first, *others = numbers
        if len(others) > 1:
            named = ", ".join(str(sides[number]) for number in numbers)
            yield Fault(sides[others[1]].pointer, f"more than two patches share one side: {named}")
            continue
        for other in others:
            reverse = ends[first, 0] == ends[other, 1]
            message = _mismatch(sides[first], sides[other], reverse, tolerance)
            if message:
                yield Fault(sides[other].pointer, message)


def _mismatch(one: PatchSide, other: PatchSide, reverse: bool, tolerance: float) -> str | None:
    """Why two sides between the same corners cannot be joined, or None."""
    both = f"{one} and {other}"
    middle = np.array([0.5])
    here, there = one.curve.at(middle)[0], other.curve.at(middle)[0]
    if np.linalg.norm(here - there) > tolerance:
        return (
            f"{both} join the same corners along different curves (through {_at(here)} and "
            f"{_at(there)}); give both the same `through`"
        )
    if not reverse:
        return f"{both} run in the same direction, so the patches lie on top of each other"
    if one.divisions != other.divisions:
        return (
            f"{both} are one side, but have {one.divisions} and {other.divisions} divisions; "
            "the numbers must be equal"
        )
    if abs(one.grading * other.grading - 1) > SAME_GRADING:
        return (
            f"{both} are one side, but their gradings differ: {one.grading:.6g} and, in the same "
            f"direction, {1 / other.grading:.6g}"
        )
    return None


def _hanging_corner_faults(
    patches: Sequence[Patch],
    sides: Sequence[PatchSide],
    vertices: NDArray,
    ends: NDArray,
    tolerance: float,
) -> Iterator[Fault]:
    """No corner of a patch may lie inside a side of another."""
    _, first = np.unique(vertices, return_index=True)
    corners = np.array([patches[k // 4].corners[k % 4] for k in first])
    order = np.argsort(corners @ SKEW)
    along = (corners @ SKEW)[order]
    for side, own in zip(sides, ends.tolist(), strict=True):
        low, high = _extent(side.curve)
        start, stop = np.searchsorted(along, (low - tolerance, high + tolerance))
        beside = order[start:stop]
        near = beside[side.curve.distance(corners[beside]) <= tolerance]
        for vertex in near[~np.isin(near, own)]:
            patch, corner = divmod(int(first[vertex]), 4)
            yield Fault(
                f"{patches[patch].pointer}/corners/{corner}",
                f"corner {corner + 1} of patch {patches[patch].name!r}, {_at(corners[vertex])}, "
                f"lies inside {side}; patches must share whole sides: split that patch there",
            )


def _extent(side: Curve) -> tuple[float, float]:
    """Bounds of a side in the direction SKEW; generous for an arc."""
    ends = sorted((float(side.start @ SKEW), float(side.end @ SKEW)))
    bulge = 2 * side.radius if isinstance(side, Arc) else 0.0
    return ends[0] - bulge, ends[1] + bulge


def _at(point: Array | tuple[float, float] | None) -> str:
    return "nothing" if point is None else f"({point[0]:.6g}, {point[1]:.6g})"


def _listed(points: Sequence[tuple[float, float]]) -> str:
    return ", ".join(_at(point) for point in points)

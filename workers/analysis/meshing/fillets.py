"""Fillets: the arc of a given radius that is tangent to the two sides that meet in a corner.

Its centre is where the two sides, moved by the radius towards the inside of the corner, cross.
"""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.curve_table import CurveTable, cross
from workers.analysis.meshing.curves import Arc, Curve, Line
from workers.analysis.meshing.places import at
from workers.analysis.meshing.proximity import carrier_crossings
from workers.errors import Fault

Array = NDArray[np.float64]

SMOOTH = 1e-6  # sine of the angle below which two sides meet without a corner
EXACT = 1e-4  # of the shortest side: rounding of a document's numbers where fillets meet
WHOLE = 1.0 + 1e-9  # parameter that a fillet may reach on a side: rounding where it takes it all


class Corner(NamedTuple):
    """A vertex of a loop: its place (2,), the radius that rounds it if any, and its pointer."""

    place: Array
    radius: float | None
    pointer: str


class _Fillet(NamedTuple):
    arc: Arc
    leaves: float  # where it leaves the side before the corner, as parameter of that side
    joins: float  # where it joins the side after the corner


def round_corners(
    corners: Sequence[Corner], curves: Sequence[Curve], shortest: float
) -> tuple[list[tuple[Arc | None, Curve | None]], list[Fault]]:
    """For each corner its fillet, if any, and what is left of the side that leaves it, if any.

    Parameters
    ----------
    curves : curve i leads from corner i to corner i + 1
    shortest : length of the shortest side that may be left [L]
    """
    faults: list[Fault] = []
    fillets = [
        _fillet(corner, curves[i - 1], curves[i], faults) for i, corner in enumerate(corners)
    ]
    if faults:
        return [], faults
    found: list[tuple[Arc | None, Curve | None]] = []
    arcs = [fillet.arc if fillet else None for fillet in fillets]
    for i, curve in enumerate(curves):
        k = (i + 1) % len(curves)
        here, there = fillets[i], fillets[k]
        low, high = here.joins if here else 0.0, there.leaves if there else 1.0
        left, rest = (high - low) * curve.length, None
        if left >= shortest:
            start = here.arc.end if here else curve.start
            end = there.arc.start if there else curve.end
            rest = curve.part(low, high, start, end)
        elif abs(left) > EXACT * shortest:
            faults.append(_no_room(corners[i if here else k], curve, left, shortest))
        else:  # nothing is left of the side: the next curve starts where this one ends
            _join(arcs, i, k, curve)
        found.append((arcs[i], rest))
    # The last side may have moved the start of the first fillet.
    found[0] = (arcs[0], found[0][1])
    return found, faults


def _join(arcs: list[Arc | None], i: int, k: int, curve: Curve) -> None:
    one, other = arcs[i], arcs[k]
    end = other.start if other is not None else curve.end
    if one is not None:
        arcs[i] = one.part(0.0, 1.0, one.start, end)
    elif other is not None:
        arcs[k] = other.part(0.0, 1.0, curve.start, other.end)


def _no_room(corner: Corner, curve: Curve, left: float, shortest: float) -> Fault:
    ends = f"the side from {at(curve.start)} to {at(curve.end)}"
    if left < 0:
        seen = f"the fillets at the ends of {ends} overlap by {-left:.4g}; make a radius smaller"
    else:
        seen = (
            f"the fillets leave only {left:.3g} of {ends}; leave nothing or at least {shortest:.3g}"
        )
    return Fault(f"{corner.pointer}/fillet", seen)


def _fillet(corner: Corner, before: Curve, after: Curve, faults: list[Fault]) -> _Fillet | None:
    if corner.radius is None:
        return None
    pointer, arriving, leaving = f"{corner.pointer}/fillet", before.tangent(1.0), after.tangent(0.0)
    turn = float(cross(arriving, leaving))
    if abs(turn) < SMOOTH:
        seen = (
            "the sides run back on each other" if arriving @ leaving < 0 else "there is no corner"
        )
        faults.append(
            Fault(pointer, f"{seen} at {at(corner.place)}, nothing to round; leave fillet out")
        )
        return None
    turn = float(np.sign(turn))
    for centre in _centres(before, after, corner, turn):
        fillet = _tangent_arc(before, after, centre, corner.radius, turn)
        if fillet is not None:
            return fillet
    faults.append(
        Fault(
            pointer,
            f"a fillet of radius {corner.radius:.6g} does not fit at {at(corner.place)}: it would "
            f"reach beyond the sides that meet there; {_largest(before, after)}",
        )
    )
    return None


def _largest(before: Curve, after: Curve) -> str:
    if isinstance(before, Arc) or isinstance(after, Arc):
        return "make it smaller"
    cosine = float(np.clip(-before.tangent(1.0) @ after.tangent(0.0), -1.0, 1.0))
    half = np.arccos(cosine) / 2
    return f"at most {min(before.length, after.length) * np.tan(half):.6g} does"


def _centres(before: Curve, after: Curve, corner: Corner, turn: float) -> Array:
    """Where both sides, moved by the radius towards the inside of the corner, cross; near first."""
    moved = [_moved(c, (corner.radius or 0.0) * turn) for c in (before, after)]
    if moved[0] is None or moved[1] is None:
        return np.empty((0, 2))
    pair = np.array([0]), np.array([1])
    crossings = carrier_crossings(CurveTable.of([moved[0], moved[1]]), *pair)[0]
    crossings = crossings[np.isfinite(crossings).all(axis=1)]
    return crossings[np.argsort(np.linalg.norm(crossings - corner.place, axis=1))]


def _moved(curve: Curve, left: float) -> Curve | None:
    """The curve so much further left; None if the arc vanishes."""
    if isinstance(curve, Line):
        along = curve.tangent(0.0)
        aside = left * np.array([-along[1], along[0]])
        return Line(curve.start + aside, curve.end + aside)
    radius = curve.radius - left * np.sign(curve.sweep)
    if radius <= 0:
        return None
    return Arc(curve.start, curve.end, curve.centre, float(radius), curve.first, curve.sweep)


def _tangent_arc(
    before: Curve, after: Curve, centre: Array, radius: float, turn: float
) -> _Fillet | None:
    """The arc about a centre from one side to the other, if it touches both within their length."""
    table, both = CurveTable.of([before, after]), np.array([0, 1])
    touches = table.project(both, np.stack((centre, centre)))
    leaves, joins = table.parameter(both, touches)
    if not (1 - WHOLE <= leaves < 1 and 0 < joins <= WHOLE):
        return None
    first, last = np.arctan2(*(touches - centre).T[::-1])
    sweep = turn * float(np.mod(turn * (last - first), 2 * np.pi))
    arc = Arc(touches[0], touches[1], centre, radius, float(first), sweep)
    return _Fillet(arc, max(float(leaves), 0.0), min(float(joins), 1.0))

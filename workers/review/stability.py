"""Rules about buckling out of the plane, which a plane model cannot show."""

from collections.abc import Iterator
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.hot_spots import stress_along
from workers.analysis.plane_stress import principal
from workers.review.context import ReviewContext
from workers.review.rule import Finding, finding, rule
from workers.review.strips import Edges, Strip, coefficient, find_edges, strips_through

Array = NDArray[np.float64]

# Plates and struts that are not quite flat lose up to half of the classical value where it is near
# their yield strength, and are visibly bent before they reach it. Common practice.
SHARE = 0.5
PLACES = 60  # elements from which strips are looked for, evenly spread
ACROSS = 8  # points on each side of a place at which the stress is read
COMPRESSED = 0.05  # of the largest stress of the state; less is not worth a strip
ALIKE = 0.01  # of the stress: where it differs less by direction, rounding would choose the strip
EDGES = {
    0: "both long edges taken as free and the ends as simply supported",
    1: "one long edge taken as simply supported, the other as free",
    2: "both long edges taken as simply supported",
}


class _Buckling(NamedTuple):
    stress: float  # mean compression across the strip [F/L^2]
    critical: float
    at: Array
    strip: Strip
    k: float
    b: float
    state: str


@rule(
    "compression-buckling",
    "check",
    title="Compression that could buckle the plate",
    looks_at="The mean compressive stress across strips of the plate, against half the classical "
    "elastic critical stress k pi^2 E / (12 (1 - nu^2)) (t/b)^2 of the strip, in the states that "
    "hold a peak. The edge conditions are assumed, and named.",
    action="Check the plate for buckling by the rules for plates and struts, with the edges as "
    "they are really held; stiffen it, or shorten what is free.",
)
def compression_buckling(context: ReviewContext) -> Iterator[Finding]:
    if context.recovery is None:
        return
    edges = find_edges(context.job, context.mesh)
    found = [_worst_strip(context, edges, state) for state in context.governing]
    worst = max(
        (one for one in found if one is not None),
        key=lambda one: one.stress / one.critical,
        default=None,
    )
    if worst is None or worst.stress <= SHARE * worst.critical:
        return
    strip, (x, y) = worst.strip, worst.at
    mirrored = "; rollers taken as planes of symmetry" if strip.mirrored else ""
    yield finding(
        f"In {worst.state!r} a strip near ({x:.4g}, {y:.4g}), {context.length(strip.length)} long "
        f"and {_width(context, strip)}, is compressed by {context.stress(worst.stress)} on "
        f"average; its classical elastic critical stress is {context.stress(worst.critical)} "
        f"(k = {worst.k:.3g}, b = {context.length(worst.b)}, {EDGES[strip.held]}{mirrored}).",
        value=worst.stress,
        limit=SHARE * worst.critical,
        critical=worst.critical,
        at=worst.at,
        case=worst.state,
        k=worst.k,
        b=worst.b,
        edges=EDGES[strip.held],
    )


def _width(context: ReviewContext, strip: Strip) -> str:
    return f"{context.length(strip.width)} wide" if np.isfinite(strip.width) else "wide"


def _worst_strip(context: ReviewContext, edges: Edges, state: str) -> _Buckling | None:
    """The strip that is nearest to its critical stress."""
    stress = context.nodal_stress(state)
    if stress is None or context.recovery is None:
        return None
    places, directions, regions = _compressed_places(context, edges, stress)
    strips = strips_through(edges, places, directions)
    kept = [number for number, strip in enumerate(strips) if strip is not None]
    if not kept:
        return None
    points = np.concatenate([_across(places[n], directions[n], strips[n]) for n in kept])
    across = context.recovery.interpolate(points) @ stress
    found = []
    for row, number in enumerate(kept):
        strip, own = strips[number], across[2 * ACROSS * row : 2 * ACROSS * (row + 1)]
        assert strip is not None
        along = stress_along(own, directions[number]).reshape(2, ACROSS)
        mean = np.maximum(-along, 0).mean(axis=1) @ strip.sides / sum(strip.sides)
        k, b = coefficient(strip)
        critical = k * _unit_critical(context, regions[number]) / b**2
        found.append(_Buckling(float(mean), critical, places[number], strip, k, b, state))
    return max(found, key=lambda one: one.stress / one.critical)


def _compressed_places(
    context: ReviewContext, edges: Edges, stress: Array
) -> tuple[Array, Array, list[str]]:
    """Centres of some elements, a direction in which each is compressed, its region."""
    assert context.recovery is not None
    centres, means, regions = [], [], []
    for block, points in zip(
        context.mesh.blocks, context.recovery.field_mesh.connectivity, strict=True
    ):
        corners = points[:, : block.element.corners]
        centres.append(context.recovery.field_mesh.points[corners].mean(axis=1))
        means.append(stress[corners].mean(axis=1))
        regions.append(block.region)
    centre, mean, region = (np.concatenate(parts) for parts in (centres, means, regions))
    pressed = COMPRESSED * np.abs(stress).max()
    found = []
    for sign, of_direction in zip((1, -1), principal(mean), strict=True):
        places = np.flatnonzero(of_direction < -pressed)
        chosen = places[:: len(places) // PLACES + 1]
        if len(places):
            chosen = np.append(chosen, places[of_direction[places].argmin()])
        # The larger principal stress acts along this angle, the smaller one across it.
        angle = _angles(edges, centre[chosen], mean[chosen]) + (0 if sign > 0 else np.pi / 2)
        found.append((chosen, np.column_stack((np.cos(angle), np.sin(angle)))))
    chosen, directions = (np.concatenate(parts) for parts in zip(*found, strict=True))
    return centre[chosen], directions, [context.mesh.regions[n] for n in region[chosen]]


def _angles(edges: Edges, places: Array, stress: Array) -> Array:
    """Of the larger principal stress (p, 3) at places (p, 2); along the nearest border where all
    directions are principal ones, (p,) [rad].
    """
    xx, yy, xy = stress.T
    angle = 0.5 * np.arctan2(2 * xy, xx - yy)
    even = np.hypot((xx - yy) / 2, xy) < ALIKE * np.abs(xx + yy) / 2
    start, end = edges.border.start, edges.border.end
    apart = np.linalg.norm(places[even, None] - (start + end) / 2, axis=2)
    if even.any():
        x, y = (end - start)[apart.argmin(axis=1)].T
        angle[even] = np.arctan2(y, x)
    return np.asarray(angle)


def _across(place: Array, direction: Array, strip: Strip | None) -> Array:
    """Points across a strip, (2 ACROSS, 2): from its place to the left edge, then to the right."""
    assert strip is not None
    normal = np.array([-direction[1], direction[0]])
    steps = (np.arange(ACROSS) + 0.5) / ACROSS
    reach = np.concatenate((strip.sides[0] * steps, -strip.sides[1] * steps))
    return np.asarray(place + reach[:, None] * normal)


def _unit_critical(context: ReviewContext, region: str) -> float:
    """pi^2 E t^2 / (12 (1 - nu^2)) [F]."""
    material, t = context.job.material_of(region), context.job.thickness_of(region)
    plate = material.youngs_modulus / (12 * (1 - material.poissons_ratio**2))
    return float(np.pi**2 * plate * t**2)

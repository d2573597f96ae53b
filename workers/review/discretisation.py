"""Rules about the mesh: estimated errors, element shapes, low-order elements in bending."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from workers.analysis.plane_stress import von_mises
from workers.review.bending_share import bending_shares
from workers.review.context import Peak, ReviewContext
from workers.review.rule import Finding, finding, rule

Array = NDArray[np.float64]

# Relative energy norm. 5 % is the usual target of adaptive meshing (Zienkiewicz & Zhu, Int. J.
# Numer. Meth. Engng 24, 1987); at twice that a person should look. Common practice.
ENERGY_ERROR = 0.10
PEAK_ERROR = 0.10  # of the peak von Mises stress; common practice
# Of the strain energy, see `bending_share.py`. Cantilevers of n squares across the depth: share
# 1.5/n^2 for both, deflection short by 0.4 shares (Q4), 1.7 shares (T3). So 1 or 2 % is missing
# here, at n = 7 (Q4) and n = 12 (T3); tension past a hole has 0.7 % on the coarsest useful mesh.
BENDING_SHARE = {"Q4": 0.03, "T3": 0.01}
# What an element cannot follow of the stress next to the peak, over the peak, see `_unfollowed`. At
# Kirsch's hole in even and graded meshes of 2 to 24 elements to the quarter the peak was off by 5
# to 10 % (linear elements) and 2 % (quadratic) where it was this large, by less where it was less.
UNFOLLOWED = {1: 0.25, 2: 0.2}


@rule(
    "error-high",
    "check",
    title="Large estimated discretisation error",
    looks_at="The estimated relative error of every case and combination in the energy norm, and "
    "the estimated error of the peak von Mises stress.",
    action="Refine the mesh, above all around the peak, or set a `target_error`.",
)
def error_high(context: ReviewContext) -> Iterator[Finding]:
    errors = {
        name: float(state["error_estimate"]["relative"])
        for name, state in context.states.items()
        if state.get("error_estimate")
    }
    name = max(errors, key=lambda name: errors[name], default=None)
    if name is not None and errors[name] > ENERGY_ERROR:
        yield finding(
            f"In {name!r} the estimated error is {errors[name]:.1%} in the energy norm.",
            quantity="energy norm",
            value=errors[name],
            limit=ENERGY_ERROR,
            case=name,
            states=sum(error > ENERGY_ERROR for error in errors.values()),
        )
    wrong = [
        peak
        for peak in context.peaks("von_mises")
        if (peak.record.get("error") or 0.0) > PEAK_ERROR * peak.value
    ]
    if wrong:
        peak = wrong[0]
        yield finding(
            f"In {peak.case!r} the peak von Mises stress of {context.stress(peak.value)} has an "
            f"estimated error of {context.stress(peak.record['error'])}.",
            quantity="von Mises stress",
            value=peak.record["error"],
            limit=PEAK_ERROR * peak.value,
            at=peak.at,
            case=peak.case,
            states=len(wrong),
        )


@rule(
    "coarse-at-peak",
    "check",
    title="Few elements at the peak stress",
    looks_at="How much of the change of stress along the sides of the elements at the highest peak "
    "these elements cannot follow: all of it for linear, its curvature for quadratic elements.",
    action="Make the elements there smaller, with `sizes` or `grading`, until the peak no longer "
    "changes.",
)
def coarse_at_peak(context: ReviewContext) -> Iterator[Finding]:
    peak = context.worst("von_mises")
    stress = context.nodal_stress(peak.case) if peak and peak.value else None
    if peak is None or stress is None:
        return
    for order, part in _unfollowed(context, peak, stress).items():
        if part > UNFOLLOWED[order]:
            yield finding(
                f"At the peak of {peak.case!r}, {context.stress(peak.value)}, the stress changes "
                f"along single elements by {part:.0%} more than they can follow.",
                value=part,
                limit=UNFOLLOWED[order],
                at=peak.at,
                case=peak.case,
            )
            return


def _unfollowed(context: ReviewContext, peak: Peak, stress: Array) -> dict[int, float]:
    """By order of the elements around a peak, von Mises measure over the peak.

    A linear element takes its stress as constant along a side: the difference of its ends is what
    it cannot follow. A quadratic one takes it as linear: then it is the second difference.
    """
    assert context.recovery is not None
    field_mesh = context.recovery.field_mesh
    distance = np.linalg.norm(field_mesh.points - peak.at, axis=1)
    here = np.flatnonzero(distance <= distance.min() + 1e-9 * context.mesh.diagonal)
    point = here[von_mises(stress[here]).argmax()]
    found: dict[int, float] = {}
    for block, points in zip(context.mesh.blocks, field_mesh.connectivity, strict=True):
        for side in block.element.sides:
            nodes = points[:, list(side)]
            a, b, *middle = np.moveaxis(stress[nodes[(nodes == point).any(axis=1)]], 1, 0)
            change = a - 2 * middle[0] + b if middle else a - b
            largest = float(von_mises(change).max(initial=0.0) / von_mises(stress[point]))
            order = block.element.order
            found[order] = max(found.get(order, 0.0), largest)
    return found


@rule(
    "distorted-elements",
    "check",
    title="Badly shaped elements",
    looks_at="The smallest scaled Jacobian and corner angle, and the largest aspect ratio.",
    action="Improve the mesh where the stress matters; Q8 and Q4 lose accuracy most.",
)
def distorted_elements(context: ReviewContext) -> Iterator[Finding]:
    quality = context.results.get("mesh", {}).get("quality", {})
    for key, words in (
        ("min_scaled_jacobian", "a scaled Jacobian of {:.2g}"),
        ("min_angle", "a corner angle of {:.3g} degrees"),
        ("max_aspect", "an aspect ratio of {:.3g}"),
    ):
        measure = quality.get(key)
        if measure and measure["bad"]:  # `analysis/quality.py` holds the limits
            x, y = measure["at"]
            yield finding(
                f"The worst element, at ({x:.4g}, {y:.4g}), has {words.format(measure['value'])};"
                f" {measure['bad']} {'is' if measure['bad'] == 1 else 'are'} beyond "
                f"{measure['limit']:g}.",
                quantity=key,
                value=measure["value"],
                limit=measure["limit"],
                at=measure["at"],
                elements=measure["bad"],
            )


@rule(
    "low-order-bending",
    "check",
    title="T3 or Q4 elements carry bending",
    looks_at="The part of the strain energy that comes from stress changing within (Q4) or between "
    "(T3) elements, in the states that hold a peak.",
    action="Use T6 or Q8, or many more elements across the depth; T3 and Q4 are too stiff in "
    "bending, so displacements and stresses come out too small.",
)
def low_order_bending(context: ReviewContext) -> Iterator[Finding]:
    worst: dict[str, tuple[float, str]] = {}
    for state in context.governing:
        for name, share in bending_shares(context, state).items():
            worst[name] = max(worst.get(name, (0.0, state)), (share, state))
    for name, (share, state) in worst.items():
        if share > BENDING_SHARE[name]:
            yield finding(
                f"In {state!r} {share:.1%} of the strain energy of the {name} elements comes from "
                "stress that changes across an element: they carry bending, or are far too "
                "coarse.",
                value=share,
                limit=BENDING_SHARE[name],
                case=state,
                element=name,
            )

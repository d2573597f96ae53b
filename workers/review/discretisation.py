"""Rules about the mesh: estimated errors, element shapes, low-order elements in bending."""

from collections.abc import Iterator

from workers.review.bending_share import bending_shares
from workers.review.context import ReviewContext
from workers.review.rule import Finding, finding, rule

# Relative energy norm. 5 % is the usual target of adaptive meshing (Zienkiewicz & Zhu, Int. J.
# Numer. Meth. Engng 24, 1987); at twice that a person should look. Common practice.
ENERGY_ERROR = 0.10
PEAK_ERROR = 0.10  # of the peak von Mises stress; common practice
# Of the strain energy, see `bending_share.py`. Cantilevers of n squares across the depth: share
# 1.5/n^2 for both, deflection short by 0.4 shares (Q4), 1.7 shares (T3). So 1 or 2 % is missing
# here, at n = 7 (Q4) and n = 12 (T3); tension past a hole has 0.7 % on the coarsest useful mesh.
BENDING_SHARE = {"Q4": 0.03, "T3": 0.01}


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
    "distorted-elements",
    "check",
    title="Badly shaped elements",
    looks_at="The smallest scaled Jacobian and corner angle, and the largest aspect ratio.",
    action="Improve the mesh where the stress matters; Q8 and Q4 lose accuracy most.",
)
def distorted_elements(context: ReviewContext) -> Iterator[Finding]:
    quality = context.results.get("mesh", {}).get("quality", {})
    for key, words in (
        ("min_scaled_jacobian", "scaled Jacobian of {:.2g}"),
        ("min_angle", "corner angle of {:.3g} degrees"),
        ("max_aspect", "aspect ratio of {:.3g}"),
    ):
        measure = quality.get(key)
        if measure and measure["bad"]:  # `analysis/quality.py` holds the limits
            x, y = measure["at"]
            yield finding(
                f"The worst element, at ({x:.4g}, {y:.4g}), has a {words.format(measure['value'])};"
                f" {measure['bad']} are beyond {measure['limit']:g}.",
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

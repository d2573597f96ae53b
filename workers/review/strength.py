"""Rules about strength: yield, and the limits that the job sets itself."""

from collections.abc import Iterator

from workers.review.context import Peak, ReviewContext, listed
from workers.review.rule import Finding, finding, rule

YIELD = 1.0  # von Mises stress over yield strength, by definition of the criterion


def _utilisations(context: ReviewContext, above: float) -> list[Peak]:
    return [peak for peak in context.peaks("utilisation") if peak.value > above]


def _others(peaks: list[Peak]) -> str:
    """What else exceeds, after the worst has been told."""
    return f" Also in {listed(peak.case for peak in peaks[1:])}." if len(peaks) > 1 else ""


@rule(
    "yield-exceeded",
    "stop",
    title="Stress above the yield strength",
    looks_at="The peak von Mises stress of every case and combination, against the yield strength "
    "of its region.",
    action="Strengthen the plate or reduce the load; beyond yield a linear analysis no longer "
    "tells the stress, and only a plastic assessment by a qualified engineer could accept it.",
)
def yield_exceeded(context: ReviewContext) -> Iterator[Finding]:
    if peaks := _utilisations(context, YIELD):
        worst = peaks[0]
        limit = worst.record["yield_strength"]
        yield finding(
            f"In {worst.case!r} the von Mises stress reaches {context.stress(worst.value * limit)}"
            f", {worst.value:.3g} times the yield strength of {context.stress(limit)}."
            + _others(peaks),
            value=worst.value * limit,
            limit=limit,
            at=worst.at,
            case=worst.case,
            utilisation=worst.value,
            region=worst.record.get("region"),
            states=len(peaks),
        )


@rule(
    "margin-within-error",
    "check",
    title="Below yield by less than the estimated error",
    looks_at="The peak von Mises stress plus its estimated error, against the yield strength.",
    action="Refine the mesh around the peak until the error is smaller than the margin.",
)
def margin_within_error(context: ReviewContext) -> Iterator[Finding]:
    doubtful = []
    for peak in context.peaks("utilisation"):
        stress = context.states[peak.case]["von_mises"]
        # The error belongs to the von Mises peak, which need not be the place of highest
        # utilisation where yield strengths differ; as a fraction it is the best there is.
        fraction = (stress.get("error") or 0.0) / stress["value"] if stress["value"] else 0.0
        if peak.value <= YIELD < peak.value * (1 + fraction):
            doubtful.append((peak, fraction))
    if doubtful:
        peak, fraction = doubtful[0]
        limit = peak.record["yield_strength"]
        yield finding(
            f"In {peak.case!r} the von Mises stress is {context.stress(peak.value * limit)} with "
            f"an estimated error of {fraction:.1%}: whether it stays below the yield strength of "
            f"{context.stress(limit)} is not settled.",
            value=peak.value * limit,
            limit=limit,
            at=peak.at,
            case=peak.case,
            error=peak.value * limit * fraction,
        )


@rule(
    "limit-exceeded",
    "stop",
    title="A limit of the job is exceeded",
    looks_at="The largest displacement and the smallest factor on yield, against the job's own "
    "`limits`.",
    action="Change the plate or the load, or revise the limit with a reason on record.",
)
def limit_exceeded(context: ReviewContext) -> Iterator[Finding]:
    limits = context.job.limits
    if limits.displacement is not None:
        peaks = [p for p in context.peaks("displacement") if abs(p.value) > limits.displacement]
        if peaks:
            worst = peaks[0]
            yield finding(
                f"In {worst.case!r} the displacement reaches {context.length(worst.value)}; the "
                f"job allows {context.length(limits.displacement)}." + _others(peaks),
                quantity="displacement",
                value=worst.value,
                limit=limits.displacement,
                at=worst.at,
                case=worst.case,
                states=len(peaks),
            )
    if limits.factor_on_yield is not None:
        peaks = _utilisations(context, 1 / limits.factor_on_yield)
        if peaks:
            worst = peaks[0]
            yield finding(
                f"In {worst.case!r} the factor on yield is {1 / worst.value:.3g}; the job asks for "
                f"{limits.factor_on_yield:.3g}." + _others(peaks),
                quantity="factor_on_yield",
                value=1 / worst.value,
                limit=limits.factor_on_yield,
                at=worst.at,
                case=worst.case,
                states=len(peaks),
            )


@rule(
    "no-yield-strength",
    "check",
    title="No yield strength given",
    looks_at="Whether the material of every region has a yield strength.",
    action="Give the material its `yield_strength`, or judge the stresses by other means.",
)
def no_yield_strength(context: ReviewContext) -> Iterator[Finding]:
    regions = [
        region
        for region in context.regions_used
        if context.job.material_of(region).yield_strength is None
    ]
    if regions:
        materials = sorted({context.job.material_of(region).name for region in regions})
        yield finding(
            f"No yield strength is given for {listed(materials)} (regions {listed(regions)}): the "
            "stresses there have not been compared with any strength.",
            materials=materials,
            regions=regions,
        )

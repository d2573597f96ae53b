"""Rules about what no single mesh can tell: infinite stress, and peaks that do not settle."""

from collections.abc import Iterator
from typing import Any

from workers.review.context import Peak, ReviewContext, listed
from workers.review.rule import Finding, finding, rule

MOST_PLACES = 5  # told one by one; the rest is counted
# Of the peak: the uncertainty of a series of meshes (grid convergence index) above which a person
# should look; the same as for the estimate of one mesh in `discretisation.py`.
UNSETTLED = 0.10
# Kinds with a rule of their own in `loading.py`.
AT_POINTS = ("point-load", "point-support")
WORDS = {
    "re-entrant-corner": "the re-entrant corner",
    "fixed-end": "the end or corner of a fixed side",
    "thickness-step": "the corner or end of a change of section",
}


@rule(
    "stress-singularity",
    "check",
    title="The stress of the model is infinite at a place",
    looks_at="Corners whose sides, supports or sections make the stress grow without end towards "
    "them (Williams 1952), where the mesh shows more than the reported peak; and peaks elsewhere "
    "that grew from mesh to mesh without slowing down.",
    action="Give the corner the fillet that it will have, or let the support end as it really "
    "does. If the corner stays sharp, judge it by other means (hot-spot stress, tests, a code); a "
    "finer mesh only shows more. The reported peak leaves its neighbourhood out.",
)
def stress_singularity(context: ReviewContext) -> Iterator[Finding]:
    seen: dict[tuple[float, ...], list[Peak]] = {}
    for peak in context.peaks("von_mises"):
        place = peak.record.get("singular")
        if place is not None and place["kind"] not in AT_POINTS:
            seen.setdefault(tuple(place["at"]), []).append(peak)
    by_value = sorted(seen.values(), key=lambda peaks: -_hidden(peaks[0])["value"])
    for peaks in by_value[:MOST_PLACES]:
        worst = max(peaks, key=lambda peak: _hidden(peak)["value"])
        yield _at_place(context, worst, len(peaks), len(by_value) - MOST_PLACES)
    yield from _growing(context)


def _hidden(peak: Peak) -> dict[str, Any]:
    place: dict[str, Any] = peak.record["singular"]
    return place


def _at_place(context: ReviewContext, peak: Peak, states: int, more: int) -> Finding:
    place = _hidden(peak)
    x, y = place["at"]
    grew = {
        True: " It grew from mesh to mesh as the theory says.",
        False: " It did not grow from mesh to mesh as the theory says.",
        None: "",
    }[place["confirmed"]]
    others = f" There are {more} more such places." if more > 0 else ""
    return finding(
        f"At {WORDS[place['kind']]} at ({x:.4g}, {y:.4g}) the stress of the model is infinite: it "
        f"grows as distance to the power {place['exponent'] - 1:.2f}. In {peak.case!r} the mesh "
        f"shows {context.stress(place['value'])} there; the peak reported, "
        f"{context.stress(peak.value)}, is that outside of {context.length(place['radius'])} "
        f"around it.{grew}{others}",
        value=place["value"],
        at=place["at"],
        case=peak.case,
        kind=place["kind"],
        exponent=place["exponent"],
        radius=place["radius"],
        outside=peak.value,
        confirmed=place["confirmed"],
        states=states,
    )


def _growing(context: ReviewContext) -> Iterator[Finding]:
    """Peaks outside all known places that grew like a power of the element size."""
    found = [
        peak
        for peak in context.peaks("von_mises")
        if (entry := _series(context, peak)) is not None and entry["behaviour"] == "growing"
    ]
    if found:
        peak = found[0]
        x, y = peak.at
        values = _series(context, peak)["values"]  # type: ignore[index]
        yield finding(
            f"In {peak.case!r} the peak von Mises stress, {context.stress(peak.value)} at "
            f"({x:.4g}, {y:.4g}), grew on every finer mesh without slowing down: it may be "
            "infinite.",
            value=peak.value,
            at=peak.at,
            case=peak.case,
            kind="unknown",
            values=values,
            states=len(found),
        )


def _series(context: ReviewContext, peak: Peak) -> dict[str, Any] | None:
    """What the convergence record says of the von Mises peak of a state."""
    record = context.results.get("convergence")
    if record is None:
        return None
    entry: dict[str, Any] = record["peaks"][peak.case]["von_mises"]
    return entry


def _uncertainty(context: ReviewContext, peak: Peak) -> float:
    """Of a von Mises peak by the series of meshes [F/L^2].

    Where the series converges, the interval that is reported has taken it into account.
    """
    entry = _series(context, peak)
    if entry is None or entry["uncertainty"] is None:
        return 0.0
    uncertainty = float(entry["uncertainty"])
    interval = peak.record["interval"]
    if entry["behaviour"] == "converging" and interval is not None:
        low, high = interval
        uncertainty = min(uncertainty, max(high - peak.value, peak.value - low))
    return uncertainty


@rule(
    "not-converged",
    "check",
    title="Refining the mesh has not settled the results",
    looks_at="Whether an adaptive run reached its target error, and the uncertainty of the peak "
    "von Mises stress by the series of meshes.",
    action="Where the target was not reached, allow more unknowns, or ask for a larger error. "
    "Where a peak has not settled, ask for a smaller error, or refine where it is, with `sizes`.",
)
def not_converged(context: ReviewContext) -> Iterator[Finding]:
    record = context.results.get("convergence")
    if record is None:
        return
    reached = record["meshes"][-1]["relative_error"]
    target = record.get("target_error")
    if target is not None and reached > target:
        yield finding(
            f"The estimated error is {reached:.1%} in the energy norm, not {target:.1%}: "
            f"{record['message']}.",
            quantity="energy norm",
            value=reached,
            limit=target,
            case=record["meshes"][-1]["case"],
            stopped_by=record["stopped_by"],
        )
    unsettled = []
    for peak in context.peaks("von_mises"):
        uncertainty = _uncertainty(context, peak)
        if uncertainty > UNSETTLED * abs(peak.value):
            unsettled.append((peak, uncertainty))
    if unsettled:
        peak, uncertainty = unsettled[0]
        yield finding(
            f"In {peak.case!r} the peak von Mises stress of {context.stress(peak.value)} is "
            f"uncertain by {context.stress(uncertainty)} as the series of meshes goes."
            + (f" Also in {listed(p.case for p, _ in unsettled[1:])}." if unsettled[1:] else ""),
            quantity="von Mises stress",
            value=uncertainty,
            limit=UNSETTLED * abs(peak.value),
            at=peak.at,
            case=peak.case,
            states=len(unsettled),
        )

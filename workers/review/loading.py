"""Rules about loads and supports: nothing loaded, settlements in combinations, point actions."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from workers.job import PointForce
from workers.review.context import Peak, ReviewContext, listed
from workers.review.equations import prescribed_values
from workers.review.rule import Finding, finding, rule

Numbers = NDArray[np.intp]

NOTHING = 1e-12  # of the largest displacement of the job: rounding
# The stress under a point force grows as 1/r (Flamant 1892; Timoshenko & Goodier art. 36). With
# 2 elements between, the mesh sees a distributed force. Common practice.
NEAR = 2.0  # element sizes
HOLDS = 1e-6  # of the largest reaction in a state: a smaller one only removes a free motion
WHOLE = 1e-9  # a sum of factors that far from 1 is 1


@rule(
    "unloaded-case",
    "check",
    title="A case in which nothing happens",
    looks_at="The largest displacement of every case and combination.",
    action="Check the loads of the case: are they zero, do they cancel, or act on supports only?",
)
def unloaded_case(context: ReviewContext) -> Iterator[Finding]:
    peaks = context.peaks("displacement")
    largest = max((abs(peak.value) for peak in peaks), default=0.0)
    idle = [peak.case for peak in peaks if abs(peak.value) <= NOTHING * largest]
    if idle:
        yield finding(
            f"Nothing moves in {listed(idle)}.", case=idle[0], cases=idle, value=0.0, limit=0.0
        )


@rule(
    "settlement-factored",
    "check",
    title="A settlement is factored with the loads",
    looks_at="Non-zero prescribed displacements that act in every case, and the sum of the factors "
    "of each combination.",
    action="Give the support a `case` of its own, so that the settlement gets one factor of its "
    "own in each combination.",
)
def settlement_factored(context: ReviewContext) -> Iterator[Finding]:
    settled = [
        support
        for support in context.job.supports
        if support.case is None and prescribed_values(support)
    ]
    if not settled:
        return
    sums = {c.name: sum(c.factors.values()) for c in context.job.combinations}
    wrong = {name: total for name, total in sums.items() if abs(total - 1) > WHOLE}
    if wrong:
        name = max(wrong, key=lambda name: abs(wrong[name] - 1))
        yield finding(
            f"The displacement prescribed by {listed(s.label for s in settled)} acts in every "
            f"case, so combinations multiply it by the sum of their factors: by "
            f"{wrong[name]:.4g} in {name!r}.",
            value=wrong[name],
            limit=1.0,
            case=name,
            supports=[support.label for support in settled],
            combinations=list(wrong),
        )


@rule(
    "point-load",
    "check",
    title="The peak stress is at a point load",
    looks_at="The distance from the peak von Mises stress to the point forces of the state, "
    "against the size of the elements there.",
    action="Spread the force over the length on which it really acts; under a point force the "
    "stress is infinite, and the number only tells the size of the elements.",
)
def point_load(context: ReviewContext) -> Iterator[Finding]:
    loaded = [
        _point_load_nodes(context, [load for load in case.loads if isinstance(load, PointForce)])
        for case in context.job.load_cases
    ]
    found = []
    for peak in context.summits("von_mises"):
        parts = [loaded[case] for case in np.flatnonzero(context.factors(peak.case))]
        node = _near(context, peak, np.concatenate(parts) if parts else np.empty(0, np.intp))
        if node is not None:
            found.append((peak, node))
    yield from _report(context, found, "a point force acts")


def _point_load_nodes(context: ReviewContext, loads: list[PointForce]) -> Numbers:
    acting = [load for load in loads if load.on is not None and any(load.force)]
    nodes = [context.select(load.on, load.pointer).nodes for load in acting if load.on]
    return np.concatenate(nodes).astype(np.intp) if nodes else np.empty(0, np.intp)


@rule(
    "point-support",
    "check",
    title="The peak stress is at a point support",
    looks_at="The distance from the peak von Mises stress to supports at single nodes that carry "
    "force in the state, against the size of the elements there.",
    action="Support the length on which the plate really rests; at a point support the stress is "
    "infinite, and the number only tells the size of the elements.",
)
def point_support(context: ReviewContext) -> Iterator[Finding]:
    held: dict[str, Numbers] = {}
    for support in context.job.supports:
        caught = context.select(support.on, support.pointer)
        if not len(caught.facets) and not caught.element_count:
            held[support.label] = caught.nodes.astype(np.intp)
    found = []
    for peak in context.summits("von_mises") if held else []:
        reactions = context.states[peak.case].get("reactions", {})
        size = {label: float(np.hypot(*entry["force"])) for label, entry in reactions.items()}
        enough = HOLDS * max(size.values(), default=0.0)
        carrying = [nodes for label, nodes in held.items() if size.get(label, 0.0) > enough]
        node = _near(context, peak, np.concatenate(carrying) if carrying else np.empty(0, np.intp))
        if node is not None:
            found.append((peak, node))
    yield from _report(context, found, "a single node is supported")


def _near(context: ReviewContext, peak: Peak, nodes: Numbers) -> int | None:
    """The nearest of the nodes, if the peak is next to it."""
    if not peak.value or not len(nodes):
        return None
    distance = np.linalg.norm(context.mesh.nodes[nodes] - peak.at, axis=1)
    ratio = distance / (NEAR * context.element_size[nodes])
    return int(nodes[ratio.argmin()]) if ratio.min() <= 1 else None


def _report(context: ReviewContext, found: list[tuple[Peak, int]], what: str) -> Iterator[Finding]:
    """One finding, for the highest peak."""
    if not found:
        return
    peak, node = found[0]
    x, y = context.mesh.nodes[node]
    distance = float(np.hypot(x - peak.at[0], y - peak.at[1]))
    yield finding(
        f"{context.summit_words(peak)} lies within {NEAR:g} element sizes of ({x:.4g}, {y:.4g}), "
        f"where {what}.",
        value=distance,
        limit=float(NEAR * context.element_size[node]),
        at=[x, y],
        case=peak.case,
        stress=peak.value,
        states=len(found),
    )

"""Rules about what the supports keep the plate from doing."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from workers.analysis.held import held_by
from workers.analysis.selection import Finder
from workers.review.context import ReviewContext
from workers.review.rule import Finding, finding, rule

# At the end of a fixed side under tension the stress grows without bound as the mesh is refined,
# unless Poisson's ratio is zero (Williams, J. Appl. Mech. 19, 1952: clamped-free corner of 90
# degrees). Within an element of the side the peak is one of this kind.
NEAR = 1.0  # element sizes
CONTRACTS = 0.05  # Poisson's ratio below which next to nothing is held back


@rule(
    "over-restrained",
    "check",
    title="The peak stress is at a fixed side",
    looks_at="Whether the peak von Mises stress lies next to a side that is held in both "
    "directions, which keeps the plate from contracting or expanding along it.",
    action="Hold the side in the direction that matters and let it slide in the other, or judge "
    "the stress at some distance from it; what really holds the plate gives way a little.",
)
def over_restrained(context: ReviewContext) -> Iterator[Finding]:
    peaks = [peak for peak in context.summits("von_mises") if peak.value]
    fixed = _fixed_side_nodes(context) if peaks else np.empty(0, np.intp)
    found = []
    for peak in peaks if len(fixed) else []:
        ratio = context.job.material_of(peak.record.get("region") or "").poissons_ratio
        away = np.linalg.norm(context.mesh.nodes[fixed] - peak.at, axis=1)
        near = (away / context.element_size[fixed]).argmin()
        if away[near] <= NEAR * context.element_size[fixed[near]] and ratio > CONTRACTS:
            found.append((peak, fixed[near], float(away[near]), ratio))
    if found:
        peak, node, distance, ratio = found[0]
        x, y = context.mesh.nodes[node]
        yield finding(
            f"{context.summit_words(peak)} is next to ({x:.4g}, {y:.4g}) on a side that is held in "
            f"both directions; with a Poisson's ratio of {ratio:g} a part of it comes from the "
            "strain that the side holds back.",
            value=distance,
            limit=float(NEAR * context.element_size[node]),
            at=[x, y],
            case=peak.case,
            stress=peak.value,
            poissons_ratio=ratio,
            states=len(found),
        )


def _fixed_side_nodes(context: ReviewContext) -> NDArray[np.intp]:
    """Nodes of boundary facets all of whose nodes are held in both directions."""
    mesh = context.mesh
    table = mesh.facet_table(mesh.boundary)
    held = held_in_both(context)
    both = np.where(table < 0, True, held[table]).all(axis=1)
    return mesh.facet_nodes(mesh.boundary[both]).astype(np.intp)


def held_in_both(context: ReviewContext) -> NDArray[np.bool_]:
    """Which nodes cannot move at all, but as the supports prescribe, (N,)."""
    rows = held_by(context.job, Finder(context.mesh)).rows
    gram = np.zeros((context.mesh.node_count, 2, 2))
    unit = rows.direction / np.linalg.norm(rows.direction, axis=1, keepdims=True)
    np.add.at(gram, rows.node, unit[:, :, None] * unit[:, None, :])
    return np.asarray(np.linalg.det(gram) > 1e-6)  # sine of the angle between two directions: 1e-3

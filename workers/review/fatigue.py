"""Rules about what a static analysis cannot say of repeated loads."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from workers.analysis.plane_stress import constitutive, thermal_strain
from workers.review.context import Peak, ReviewContext
from workers.review.rule import Finding, finding, rule

Array = NDArray[np.float64]

# The smaller of the two signs, as a part of the larger. Weight that eases a tension by a few
# percent is no reversal; common practice.
REVERSAL = 0.2


@rule(
    "fatigue-not-checked",
    "check",
    title="The stress at the peak changes sign between cases",
    looks_at="The stress at the highest peak, along the principal direction there, in every case "
    "and combination.",
    action="If the cases follow each other in service, have the range of stress checked for "
    "fatigue with the detail category of the place; this analysis does not.",
)
def fatigue_not_checked(context: ReviewContext) -> Iterator[Finding]:
    peak = context.worst("von_mises")
    if peak is None or not peak.value or context.solution is None:
        return
    names, along = _along_the_peak(context, peak)
    low, high = int(along.argmin()), int(along.argmax())
    smaller, larger = sorted((abs(along[low]), abs(along[high])))
    if along[low] < 0 < along[high] and smaller > REVERSAL * larger:
        yield finding(
            f"At the peak of {peak.case!r} the stress goes from {context.stress(along[low])} in "
            f"{names[low]!r} to {context.stress(along[high])} in {names[high]!r}.",
            value=smaller / larger,
            limit=REVERSAL,
            at=peak.at,
            case=peak.case,
            range=along[high] - along[low],
            cases=[names[low], names[high]],
        )


def _along_the_peak(context: ReviewContext, peak: Peak) -> tuple[list[str], Array]:
    """Names of all states, and their stress in the principal direction of the peak, (s,)."""
    names = list(context.states)
    factors = np.array([context.factors(name) for name in names]).T
    stress = stress_beside(context, peak, factors)
    xx, yy, xy = stress[:, names.index(peak.case)]
    values, vectors = np.linalg.eigh([[xx, xy], [xy, yy]])
    x, y = vectors[:, np.abs(values).argmax()]
    return names, np.array([x * x, y * y, 2 * x * y]) @ stress


def stress_beside(context: ReviewContext, peak: Peak, factors: Array) -> Array:
    """Stress of states (c, s) at a peak, the mean of the elements around it, (3, s) [F/L^2].

    Formed from the displacements of these few elements alone, however many states there are.
    """
    assert context.solution is not None
    mesh, solution = context.mesh, context.solution
    node, region = context.nearest_node(peak.at), peak.record.get("region")
    found = []
    for number, block in enumerate(mesh.blocks):
        elements, local = np.nonzero(block.connectivity == node)
        for element, corner in zip(elements, local, strict=True):
            name = mesh.regions[block.region[element]]
            if region not in (None, name):
                continue
            material = context.job.material_of(name)
            D = constitutive(material.youngs_modulus, material.poissons_ratio)
            nodes = block.connectivity[element]
            natural = block.element.natural_nodes[[corner]]
            operator = block.element.stress_operator(mesh.nodes[None, nodes], D[None], natural)
            u = solution.displacement[nodes].reshape(-1, len(factors))
            stress = operator[0, 0] @ (u @ factors)
            if solution.temperature is not None:
                change = solution.temperature[number][element] @ factors
                stress -= D @ thermal_strain(material.thermal_expansion or 0.0, change).T
            found.append(stress)
    return np.asarray(np.mean(found, axis=0))

"""Rules about the model: is the plate thin enough for plane stress, and flat?"""

from collections.abc import Iterator
from itertools import chain

import numpy as np

from workers.review.context import ReviewContext
from workers.review.features import Feature, arcs, holes, parts, sides
from workers.review.rule import Finding, finding, rule

# Away from edges and details the thickness average of a plate follows plane stress whatever its
# thickness; a body whose width is not a few thicknesses is no plate. Common practice.
OF_PLATE = 0.25  # thickness over in-plane size
# At a hole or round the stress varies through the thickness once this is of the order of the
# radius; the peak is then some percent above plane stress (Sternberg & Sadowsky, J. Appl. Mech.
# 16, 1949; from memory). Thicker than the diameter: check.
OF_RADIUS = 2.0
# Saint-Venant: what enters over less than half a thickness has not spread across it.
OF_SIDE = 2.0
# Thicker over thinner. Where one face is flush, the middle planes of thicknesses t and 1.5 t are
# 0.25 t apart: bending doubles the tension at a face of the thinner plate (6 x 0.25 = 1.5 times the
# membrane stress, shared between the two plates by their stiffness).
STEP = 1.5


@rule(
    "thick-plate",
    "check",
    title="Thick for plane stress",
    looks_at="The thickness against the in-plane size of each part, the radius of holes, fillets "
    "and arcs, and the length of short sides.",
    action="Check the place with a three-dimensional model or a handbook value for thick plates.",
)
def thick_plate(context: ReviewContext) -> Iterator[Finding]:
    thickest = max(context.regions_used, key=context.job.thickness_of)
    t = context.job.thickness_of(thickest)
    for part in parts(context.mesh):
        if t > OF_PLATE * part.size:
            yield finding(
                f"The thickness of {context.length(t)} (region {thickest!r}) is "
                f"{t / part.size:.2g} of the plate's in-plane size of {context.length(part.size)}.",
                quantity="plate",
                value=t / part.size,
                limit=OF_PLATE,
                at=part.at,
                region=thickest,
            )
    rounds = chain(holes(context.mesh), arcs(context.job))
    yield from _worst(context, "radius", rounds, OF_RADIUS)
    yield from _worst(context, "side", sides(context.job, context.mesh), OF_SIDE)


def _worst(
    context: ReviewContext, quantity: str, features: Iterator[Feature], limit: float
) -> Iterator[Finding]:
    """One finding for the feature that is smallest against the thickness there."""
    mesh, found = context.mesh, []
    middle = mesh.nodes[mesh.facet_ends(mesh.boundary)].mean(axis=1)
    regions = mesh.facet_regions(mesh.boundary)
    for feature in features:
        nearest = np.linalg.norm(middle - feature.at, axis=1).argmin()
        region = mesh.regions[regions[nearest]]
        t = context.job.thickness_of(region)
        if t > limit * feature.size:
            found.append((t, feature, region))
    if not found:
        return
    t, feature, region = max(found, key=lambda one: one[0] / one[1].size)
    more = f" ({len(found) - 1} more places like it)" if len(found) > 1 else ""
    yield finding(
        f"The thickness of {context.length(t)} is {t / feature.size:.3g} times {feature.what} "
        f"{context.length(feature.size)}{more}.",
        quantity=quantity,
        value=t / feature.size,
        limit=limit,
        at=feature.at,
        region=region,
        places=len(found),
    )


@rule(
    "thickness-step",
    "check",
    title="Sudden change of thickness",
    looks_at="The thickness of neighbouring regions.",
    action="Check the step: the model has both parts centred on one plane and the whole thickness "
    "at work at once. One-sided steps bend, and the edge of a doubler or its weld has a stress of "
    "its own.",
)
def thickness_step(context: ReviewContext) -> Iterator[Finding]:
    mesh, job = context.mesh, context.job
    one, other = mesh.shared_facets()
    first, second = mesh.facet_regions(one), mesh.facet_regions(other)
    thickness = np.array([job.thickness_of(name) for name in mesh.regions])
    ratio = thickness[first] / thickness[second]
    ratio = np.maximum(ratio, 1 / ratio)
    steps = np.flatnonzero(ratio > STEP)
    if not len(steps):
        return
    # Where the steps are equally large, the one in the middle of the list stands for all.
    largest = steps[ratio[steps] >= ratio[steps].max() * (1 - 1e-12)]
    place = largest[len(largest) // 2]
    pair = sorted((first[place], second[place]), key=lambda region: thickness[region])
    thin, thick = (mesh.regions[region] for region in pair)
    t, T = thickness[pair]
    kinds = np.unique(np.sort(np.column_stack((first[steps], second[steps])), axis=1), axis=0)
    more = f" ({len(kinds) - 1} more pairs of regions like it)" if len(kinds) > 1 else ""
    yield finding(
        f"Between {thin!r} and {thick!r} the thickness jumps from {context.length(t)} to "
        f"{context.length(T)}{more}.",
        value=ratio[place],
        limit=STEP,
        at=mesh.nodes[mesh.facet_ends(one[[place]])[0]].mean(axis=0),
        regions=[thin, thick],
        places=len(kinds),
    )

"""Rules about the model: is the plate thin enough for plane stress?"""

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

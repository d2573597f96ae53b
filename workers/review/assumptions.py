"""Rules about assumptions that loads, materials and requests bring with them."""

from collections.abc import Iterator

import numpy as np

from workers.analysis.border import border_of, nearest
from workers.analysis.hot_spots import DISTANCES, thickness_at
from workers.document.units import FORCE_UNITS, LENGTH_UNITS
from workers.job import Bearing, HotSpot, Material, Named, Target, TemperatureChange
from workers.review.context import ReviewContext, listed
from workers.review.rule import Finding, finding, rule

# Structural steel and aluminium keep their room-temperature values up to about 100 degC
# (EN 1993-1-2 table 3.1, EN 1999-1-2 table 1, from memory): 80 K above 20 degC. Cooled that far,
# steel may be brittle. Plastics soften much earlier.
METAL_CHANGE, PLASTIC_CHANGE = 80.0, 20.0  # K
PLASTIC_STIFFNESS = 1e10  # Pa; no metal in use is below (lead 1.6e10), no plastic much above
ON_BORDER = 1e-6  # of the plate's diagonal


@rule(
    "bearing-contact-assumed",
    "note",
    title="The pressure of a pin is assumed",
    looks_at="Whether a case has a bearing load.",
    action="Stress within about a pin radius of the hole depends on the clearance and stiffness of "
    "the pin: check the bearing by the rules for pin connections.",
)
def bearing_contact_assumed(context: ReviewContext) -> Iterator[Finding]:
    cases = {
        case.name: [load.on for load in case.loads if isinstance(load, Bearing) and any(load.force)]
        for case in context.job.load_cases
    }
    pushed = [name for name, targets in cases.items() if targets]
    if pushed:
        holes = dict.fromkeys(
            target.name for targets in cases.values() for target in targets
            if isinstance(target, Named)
        )  # fmt: skip
        on = f" on {listed(holes)}" if holes else ""
        yield finding(
            f"The bearing load{on} is a cosine pressure over the loaded half, as of a pin without "
            f"clearance and friction; contact was not computed (in {listed(pushed)}).",
            case=pushed[0],
            cases=pushed,
            holes=list(holes),
        )


@rule(
    "temperature-properties",
    "check",
    title="Temperature far from where the material values hold",
    looks_at="The temperature change of every case and combination, against the range in which "
    "stiffness and strength may be taken as constant.",
    action="Give stiffness, strength and expansion for the temperature that is reached; check "
    "brittleness in the cold and creep in the heat.",
)
def temperature_properties(context: ReviewContext) -> Iterator[Finding]:
    units = context.job.units
    stress_unit = float(FORCE_UNITS[units.force] / LENGTH_UNITS[units.length] ** 2)
    worst = None
    for region in context.regions_used:
        material = context.job.material_of(region)
        limit = _allowed_change(material, stress_unit)
        for state, change in _changes(context, region):
            if abs(change) > limit and (worst is None or abs(change) / limit > worst[0]):
                worst = abs(change) / limit, change, limit, state, material
    if worst:
        _, change, limit, state, material = worst
        yield finding(
            f"In {state!r} the temperature of {material.name!r} changes by {change:+.4g} K; its "
            f"values were taken as constant, which holds for about {limit:g} K.",
            value=change,
            limit=limit,
            case=state,
            material=material.name,
        )


def _allowed_change(material: Material, stress_unit: float) -> float:
    stiff = material.youngs_modulus * stress_unit >= PLASTIC_STIFFNESS
    return METAL_CHANGE if stiff else PLASTIC_CHANGE


def _changes(context: ReviewContext, region: str) -> Iterator[tuple[str, float]]:
    """State and temperature change of a region [K]; of several selectors the worst counts."""
    changes = [
        [load for load in case.loads
         if isinstance(load, TemperatureChange) and _may_act_on(load.on, region)]
        for case in context.job.load_cases
    ]  # fmt: skip
    for state in context.names if any(changes) else []:
        totals: dict[Target | None, float] = {}
        for factor, loads in zip(context.factors(state), changes, strict=True):
            for load in loads:
                totals[load.on] = totals.get(load.on, 0.0) + float(factor) * load.change
        everywhere = totals.pop(None, 0.0)
        yield state, everywhere + max(totals.values(), key=abs, default=0.0)


def _may_act_on(target: Target | None, region: str) -> bool:
    return not isinstance(target, Named) or target.name == region


# --- hot spots -----------------------------------------------------------------------------------


@rule(
    "hot-spot-assumed",
    "note",
    title="What a hot-spot stress leaves out",
    looks_at="Whether hot-spot stresses are asked for, and whether a toe is at the edge of the "
    "plate.",
    action="Use the stress with the fatigue class of the weld detail for hot-spot stress; add the "
    "bending through the thickness that this model does not have.",
)
def hot_spot_assumed(context: ReviewContext) -> Iterator[Finding]:
    spots = context.job.requests.hot_spots
    if not spots:
        return
    border = border_of(context.mesh)
    at_edge = []
    for name, spot in spots.items():
        _, foot = nearest(border, np.array(spot.at))
        if np.linalg.norm(foot - spot.at) <= ON_BORDER * context.mesh.diagonal:
            at_edge.append(name)
    more = (
        f" The recommendations mean it for a toe on the surface of a plate; {listed(at_edge)} "
        "lies at an edge, where they use fixed distances of 4, 8 and 12 mm instead."
        if at_edge
        else ""
    )
    yield finding(
        "Hot-spot stresses are extrapolated from 0.4 t and 1.0 t and hold the stress in the "
        f"plate's own plane only.{more}",
        hot_spots=list(spots),
        at_edge=at_edge,
    )


@rule(
    "hot-spot-mesh",
    "check",
    title="Elements too long for a hot-spot stress",
    looks_at="The longest side of the elements at the toe, against 0.4 times the thickness.",
    action="Give the toe a point of its own with a `size` of at most 0.4 t.",
)
def hot_spot_mesh(context: ReviewContext) -> Iterator[Finding]:
    worst = None
    for name, spot in context.job.requests.hot_spots.items():
        limit = DISTANCES[0] * thickness_at(spot, context.job.plate.thickness)
        longest = _longest_side(context, spot)
        if longest > limit * (1 + 1e-9) and (worst is None or longest / limit > worst[0]):
            worst = longest / limit, name, spot, longest, limit
    if worst:
        _, name, spot, longest, limit = worst
        yield finding(
            f"At the toe {name!r} elements have sides of {context.length(longest)}; the "
            f"extrapolation asks for at most 0.4 t = {context.length(limit)}.",
            value=longest,
            limit=limit,
            at=list(spot.at),
            hot_spot=name,
        )


def _longest_side(context: ReviewContext, spot: HotSpot) -> float:
    """Of the elements at the node that is nearest to the toe [L]."""
    node, longest = context.nearest_node(spot.at), 0.0
    for block in context.mesh.blocks:
        around = (block.connectivity == node).any(axis=1)
        corners = context.mesh.nodes[block.connectivity[around, : block.element.corners]]
        sides = np.linalg.norm(corners - np.roll(corners, 1, axis=1), axis=2)
        longest = max(longest, float(sides.max(initial=0.0)))
    return longest

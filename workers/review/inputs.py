"""Rules about the input: values that are possible, but more often a slip of units."""

from collections.abc import Iterator
from math import hypot
from typing import NamedTuple

from workers.document.units import FORCE_UNITS, LENGTH_UNITS
from workers.job import Acceleration, Load, Material, Pressure, Shear, Traction
from workers.review.context import ReviewContext, listed
from workers.review.rule import Finding, finding, rule

# Isotropic solids in use: cork 0, glass 0.2, metals 0.25-0.44, plastics up to 0.46; rubber 0.499
# (Gercek, Int. J. Rock Mech. Min. Sci. 44, 2007, and Greaves et al., Nature Materials 10, 2011,
# from memory).
POISSON_LOW, POISSON_HIGH = 0.0, 0.46


class Plausible(NamedTuple):
    """Range of a quantity in SI units, wide enough for any engineering solid."""

    name: str
    low: float
    high: float
    unit: str
    examples: str


# Ashby, *Materials Selection in Mechanical Design*, property charts (from memory), with margins.
STIFFNESS = Plausible(
    "Young's modulus", 1e6, 1.3e12, "Pa", "rubber 1e6, steel 2.1e11, diamond 1e12"
)
STRENGTH = Plausible("yield strength", 1e5, 1e10, "Pa", "foam 1e5, mild steel 2.4e8, wire 5e9")
DENSITY = Plausible("density", 10.0, 23000.0, "kg/m3", "foam 20, steel 7850, platinum 21500")
EXPANSION = Plausible("thermal expansion", 0.0, 1e-3, "1/K", "steel 1.2e-5, rubber 3e-4")
PLATE_SIZE = Plausible("plate diagonal", 1e-3, 100.0, "m", "1 mm to 100 m")
# Yield strength over Young's modulus: pure metals 1e-4, strong steel and plastics 0.03. A crystal
# without defects would reach about 0.1 (Frenkel 1926).
YIELD_STRAIN = Plausible("yield strength over Young's modulus", 2e-5, 0.1, "", "steel 1e-3 to 1e-2")
# Anything denser is a metal; the softest dense metal in use, lead, has 1.6e10 Pa.
METAL_DENSITY, METAL_STIFFNESS = 5000.0, 5e9  # kg/m3, Pa
GRAVITY = 9.81  # m/s2, in the digits that people write
GRAVITY_DIGITS = 0.005  # relative


@rule(
    "poisson-extreme",
    "check",
    title="Unusual Poisson's ratio",
    looks_at="Poisson's ratio of the materials in use, against the range of common solids.",
    action="Confirm the value; near 0.5 the material is rubber-like, and small-strain linear "
    "elasticity seldom describes it; below 0 hardly any material is isotropic.",
)
def poisson_extreme(context: ReviewContext) -> Iterator[Finding]:
    for material in _materials(context):
        nu = material.poissons_ratio
        if not POISSON_LOW <= nu <= POISSON_HIGH:
            yield finding(
                f"{material.name!r} has a Poisson's ratio of {nu:g}.",
                value=nu,
                limit=POISSON_LOW if nu < POISSON_LOW else POISSON_HIGH,
                material=material.name,
            )


@rule(
    "units-suspect",
    "check",
    title="Values implausible for the declared units",
    looks_at="Stiffness, strength, density and thermal expansion of the materials, the size of the "
    "plate and the acceleration, converted to SI with the declared units; and forces per area on "
    "sides, against the yield strength.",
    action='Check the number against `units`, or write it with its unit, such as "210 GPa".',
)
def units_suspect(context: ReviewContext) -> Iterator[Finding]:
    units = context.job.units
    length, force = float(LENGTH_UNITS[units.length]), float(FORCE_UNITS[units.force])
    for material in _materials(context):
        stiffness = material.youngs_modulus * force / length**2
        yield from _outside(STIFFNESS, stiffness, material)
        if material.yield_strength is not None:
            yield from _outside(STRENGTH, material.yield_strength * force / length**2, material)
            strain = material.yield_strength / material.youngs_modulus
            yield from _outside(YIELD_STRAIN, strain, material)
        if material.density is not None:
            density = material.density * force / length**4
            yield from _outside(DENSITY, density, material)
            yield from _soft_metal(density, stiffness, material)
        if material.thermal_expansion is not None:
            yield from _outside(EXPANSION, material.thermal_expansion, material)
    yield from _outside(PLATE_SIZE, context.mesh.diagonal * length, None)
    yield from _misplaced_gravity(context, length)
    yield from _crushing(context)


def _materials(context: ReviewContext) -> list[Material]:
    used = dict.fromkeys(context.job.material_of(r).name for r in context.regions_used)
    return [context.job.materials[name] for name in used]


def _outside(range_: Plausible, value: float, material: Material | None) -> Iterator[Finding]:
    if range_.low <= value <= range_.high:
        return
    whose = f"{material.name!r}: a" if material else "A"
    yield finding(
        f"{whose} {range_.name} of {value:.3g} {range_.unit}".rstrip()
        + f" is outside what solids have ({range_.examples}).",
        quantity=range_.name,
        value=value,
        limit=range_.low if value < range_.low else range_.high,
        unit=range_.unit,
        material=material.name if material else None,
    )


def _soft_metal(density: float, stiffness: float, material: Material) -> Iterator[Finding]:
    within = STIFFNESS.low <= stiffness and density <= DENSITY.high  # else told already
    if within and density > METAL_DENSITY and stiffness < METAL_STIFFNESS:
        yield finding(
            f"{material.name!r} is as dense as a metal ({density:.4g} kg/m3) but its Young's "
            f"modulus is only {stiffness:.3g} Pa.",
            quantity="Young's modulus",
            value=stiffness,
            limit=METAL_STIFFNESS,
            unit="Pa",
            material=material.name,
        )


def _misplaced_gravity(context: ReviewContext, length: float) -> Iterator[Finding]:
    """9.81 in a job whose length unit is not the metre."""
    expected = GRAVITY / length
    if length == 1:
        return
    cases = [
        case.name
        for case in context.job.load_cases
        for load in case.loads
        if isinstance(load, Acceleration)
        and abs(max(map(abs, load.acceleration)) - GRAVITY) < GRAVITY_DIGITS * GRAVITY
    ]
    if cases:
        unit = context.job.units.length
        yield finding(
            f"An acceleration of {GRAVITY} {unit}/s2 in {listed(cases)}: gravity is "
            f"{expected:.5g} {unit}/s2.",
            quantity="acceleration",
            value=GRAVITY,
            limit=expected,
            unit=f"{unit}/s2",
            case=cases[0],
        )


def _crushing(context: ReviewContext) -> Iterator[Finding]:
    """A force per area that no material here could take where it acts: kPa written as MPa."""
    strengths = [m.yield_strength for m in _materials(context) if m.yield_strength is not None]
    if len(strengths) < len(_materials(context)):
        return
    limit = max(strengths)
    largest = {
        case.name: max((_per_area(load) for load in case.loads), default=0.0)
        for case in context.job.load_cases
    }
    cases = [name for name, value in largest.items() if value > limit]
    if cases:
        worst, unit = max(cases, key=lambda name: largest[name]), context.job.units.stress
        yield finding(
            f"A force per area of {largest[worst]:.4g} {unit} on a side in {listed(cases)} is "
            f"more than the yield strength of {limit:.4g} {unit}.",
            quantity="force per area",
            value=largest[worst],
            limit=limit,
            unit=unit,
            case=worst,
        )


def _per_area(load: Load) -> float:
    match load:
        case Pressure() | Shear():
            return max(abs(load.start), abs(load.end))
        case Traction():
            return max(hypot(*load.start), hypot(*load.end))
    return 0.0

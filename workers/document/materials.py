"""Units, materials and the plate's own section."""

from typing import Any

from workers.document.context import last_token
from workers.document.fields import Choice, Name, Number, Quantity
from workers.document.record import Record
from workers.document.units import DENSITY, EXPANSION, FORCE_UNITS, LENGTH, LENGTH_UNITS, STRESS
from workers.job import Material, Plate, Units


class UnitsSchema(Record):
    """Consistent units: length and force are declared, everything else follows."""

    makes = Units

    length = Choice("Unit of every length", among=tuple(LENGTH_UNITS), required=True)
    force = Choice(
        "Unit of every force; stresses are in this unit per square of the length unit, time is in "
        "seconds and temperature in kelvin",
        among=tuple(FORCE_UNITS),
        required=True,
    )


class MaterialSchema(Record):
    """Linear, isotropic and elastic."""

    makes = Material

    youngs_modulus = Quantity(STRESS, description="Young's modulus", above=0, required=True)
    poissons_ratio = Number(
        "Poisson's ratio; at 0.5 a material keeps its volume, which an isotropic elastic solid "
        "only approaches",
        above=-1,
        below=0.5,
        required=True,
    )
    yield_strength = Quantity(
        STRESS, description="Yield strength, for the utilisation of von Mises stress", above=0
    )
    density = Quantity(
        DENSITY,
        description="Mass per volume in force time^2/length^4 (tonnes per mm3 for N and mm); "
        "needed by acceleration and spin",
        least=0,
    )
    thermal_expansion = Quantity(
        EXPANSION, description="Linear thermal expansion per kelvin; needed by temperature_change"
    )

    def build(self, data: dict[str, Any]) -> Material:
        return Material(name=last_token(), **data)


class PlateSchema(Record):
    """Holds for whatever no region overrides."""

    makes = Plate

    material = Name("Name of a material", required=True)
    thickness = Quantity(LENGTH, description="Thickness of the plate", above=0, required=True)

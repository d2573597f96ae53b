"""Units and Poisson's ratio: slips that people make, and materials that exist."""

from dataclasses import replace

import pytest

from tests.plates import grid
from tests.reviewed import raised, sound_job, sound_mesh, sound_results, steel
from workers.geometry import Region
from workers.job import (
    Acceleration,
    Load,
    LoadCase,
    Material,
    Named,
    Plate,
    Pressure,
    Shear,
    TotalForce,
    Traction,
    Units,
)

SIDE = Named("right")
SMALL = (LoadCase("pull", (Pressure(on=SIDE, start=-1.0, end=-1.0),)),)


def codes_for(**changes: float | None) -> dict:
    return raised(sound_job(materials=steel(**changes)))


@pytest.mark.parametrize("nu", [-0.3, 0.495, 0.47])
def test_an_unusual_poissons_ratio_is_told(nu: float) -> None:
    (caution,) = codes_for(poissons_ratio=nu)["poisson-extreme"]
    assert caution.evidence["value"] == nu
    assert caution.evidence["material"] == "steel"


@pytest.mark.parametrize("nu", [0.0, 0.2, 0.33, 0.44, 0.46])
def test_the_ratios_of_cork_glass_metals_and_plastics_are_silent(nu: float) -> None:
    assert codes_for(poissons_ratio=nu) == {}


@pytest.mark.parametrize(
    ("changes", "quantity"),
    [
        ({"youngs_modulus": 210e9}, "Young's modulus"),  # Pa in a job in N and mm
        ({"youngs_modulus": 0.21, "yield_strength": None}, "Young's modulus"),  # TPa
        ({"youngs_modulus": 210.0}, "Young's modulus"),  # GPa, betrayed by the density
        ({"yield_strength": 355e6}, "yield strength"),  # Pa
        ({"yield_strength": 0.355}, "yield strength over Young's modulus"),  # GPa
        ({"density": 7850.0}, "density"),  # kg/m3
        ({"density": 7.85e-6}, "density"),  # kg/mm3
        ({"thermal_expansion": 12.0}, "thermal expansion"),  # millionths
        ({"thermal_expansion": 0.012}, "thermal expansion"),  # mm/m
    ],
)
def test_a_value_in_the_wrong_unit_is_suspected(changes, quantity: str) -> None:
    found = codes_for(**changes)["units-suspect"]
    assert quantity in {caution.evidence["quantity"] for caution in found}


REAL = [
    Material("aluminium 6082", 70e3, 0.33, 260.0, 2.7e-9, 2.3e-5),
    Material("lead", 16e3, 0.44, 5.0, 1.134e-8, 2.9e-5),
    Material("oak, along the grain", 11e3, 0.35, 40.0, 7e-10, 5e-6),
    Material("polyethylene", 900.0, 0.46, 25.0, 9.5e-10, 1.5e-4),
    Material("soft rubber", 2.0, 0.46, None, 1.1e-9, 2.2e-4),
    Material("tungsten", 400e3, 0.28, 750.0, 1.93e-8, 4.5e-6),
    Material("spring wire", 206e3, 0.3, 2000.0, 7.85e-9, 1.2e-5),
    Material("invar", 141e3, 0.29, 280.0, 8.05e-9, 0.0),
]


@pytest.mark.parametrize("material", REAL, ids=lambda material: material.name)
def test_real_materials_are_not_suspected(material: Material) -> None:
    """Handbook values, from memory; only their order of magnitude matters."""
    plate = Plate(material.name, 5.0)
    job = sound_job(materials={material.name: material}, plate=plate, load_cases=SMALL)
    assert "units-suspect" not in raised(job)


@pytest.mark.parametrize(
    ("units", "size", "material", "thickness"),
    [
        (
            Units("m", "N"),
            (0.2, 0.1),
            Material("steel", 2.1e11, 0.3, 3.55e8, 7850.0, 1.2e-5),
            0.005,
        ),
        (Units("m", "kN"), (0.2, 0.1), Material("steel", 2.1e8, 0.3, 3.55e5, 7.85, 1.2e-5), 0.005),
        (Units("in", "lbf"), (8.0, 4.0), Material("steel", 3e7, 0.3, 5e4, 7.35e-4, 6.5e-6), 0.2),
        (Units("in", "kip"), (8.0, 4.0), Material("steel", 3e4, 0.3, 50.0, 7.35e-7, 6.5e-6), 0.2),
    ],
    ids=lambda value: f"{value.length} {value.force}" if isinstance(value, Units) else "",
)
def test_steel_in_other_units_is_not_suspected(units, size, material, thickness) -> None:
    """Steel is 7850 kg/m3, 0.284 lb/in3, that is 7.35e-4 lbf s2/in4."""
    job = sound_job(
        units=units, materials={"steel": material}, plate=Plate("steel", thickness), load_cases=()
    )
    assert raised(job, results={}, mesh=grid("Q8", 12, 6, size=size)) == {}


def test_metal_values_declared_in_another_unit_of_length_are_suspected() -> None:
    """Numbers for mm and N, but metres declared: 2.1e5 Pa is softer than rubber."""
    found = raised(sound_job(units=Units("m", "N")))["units-suspect"]
    assert {"Young's modulus", "plate diagonal"} <= {c.evidence["quantity"] for c in found}


def test_a_material_that_no_element_uses_is_not_looked_at() -> None:
    odd = Material("odd", 210e9, 0.499, 355.0)
    assert raised(sound_job(materials=steel() | {"odd": odd})) == {}


def test_a_region_with_a_suspect_material_is_looked_at() -> None:
    job = replace(
        sound_job(materials=steel() | {"odd": Material("odd", 210e9, 0.3, 355.0)}),
        geometry=replace(sound_job().geometry, regions=(Region("boss", material="odd"),)),
    )
    mesh = sound_mesh()
    mesh = replace(mesh, regions=("boss",))
    found = raised(job, mesh=mesh)["units-suspect"]
    assert {caution.evidence["material"] for caution in found} == {"odd"}


def weighed(*acceleration: float, length: str = "mm") -> dict:
    loads: tuple[Load, ...] = (Acceleration(acceleration=(acceleration[0], acceleration[1])),)
    job = sound_job(load_cases=(LoadCase("pull", loads),), units=Units(length, "N"))
    return raised(job, sound_results())


@pytest.mark.parametrize("acceleration", [(0.0, -9.81), (9.8, 0.0)])
def test_gravity_in_metres_in_a_job_in_millimetres_is_suspected(acceleration) -> None:
    (caution,) = weighed(*acceleration)["units-suspect"]
    assert caution.evidence["limit"] == pytest.approx(9810)


@pytest.mark.parametrize("acceleration", [(0.0, -9810.0), (0.0, -98.1), (0.0, 500.0)])
def test_other_accelerations_are_silent(acceleration) -> None:
    assert weighed(*acceleration) == {}


def test_gravity_in_metres_in_a_job_in_metres_is_silent() -> None:
    found = weighed(0.0, -9.81, length="m")["units-suspect"]
    assert "acceleration" not in {caution.evidence["quantity"] for caution in found}


@pytest.mark.parametrize(
    ("load", "suspect"),
    [
        (Pressure(on=SIDE, start=0.0, end=2000.0), True),  # kPa in a job in MPa; steel of 355 MPa
        (Traction(on=SIDE, start=(300.0, -300.0), end=(0.0, 0.0)), True),
        (Shear(on=SIDE, start=-360.0, end=-360.0), True),
        (Pressure(on=SIDE, start=-350.0, end=-350.0), False),
        (Traction(on=SIDE, start=(250.0, 250.0), end=(0.0, 0.0)), False),
        (TotalForce(on=SIDE, force=(1e6, 0.0)), False),
    ],
)
def test_a_force_per_area_beyond_the_yield_strength_is_suspected(load: Load, suspect: bool) -> None:
    found = raised(sound_job(load_cases=(LoadCase("pull", (load,)),))).get("units-suspect", [])
    assert [caution.evidence["limit"] for caution in found] == [355.0] * suspect

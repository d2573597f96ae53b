"""Texts with units: conversion factors worked out by hand, and what is refused."""

import contextlib
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from workers.document import units
from workers.document.units import Dimension, to_number
from workers.job import Units

# By hand. SI prefixes; inch 25.4 mm, foot 304.8 mm, pound 0.45359237 kg, standard gravity
# 9.80665 m/s2 by definition (NIST Special Publication 811, 2008, Appendix B.8), so that a
# pound-force is 0.45359237 x 9.80665 = 4.4482216152605 N.
METRES = {"mm": 1e-3, "cm": 1e-2, "m": 1.0, "in": 0.0254, "ft": 0.3048}
NEWTONS = {"N": 1.0, "kN": 1e3, "MN": 1e6, "lbf": 4.4482216152605, "kip": 4448.2216152605}

N_MM, N_M, KIP_IN, LBF_FT = (
    Units("mm", "N"),
    Units("m", "N"),
    Units("in", "kip"),
    Units("ft", "lbf"),
)

# One rounding of the fraction, one of the expected value here.
ROUNDING = 4e-16


@pytest.mark.parametrize(
    ("text", "dimension", "job", "expected"),
    [
        ("12 mm", units.LENGTH, N_MM, 12.0),
        ("1 in", units.LENGTH, N_MM, 25.4),
        ("12mm", units.LENGTH, N_M, 0.012),
        ("5 ft", units.LENGTH, KIP_IN, 60.0),
        ("-3.5e2 µm", units.LENGTH, N_MM, -0.35),
        ("210 GPa", units.STRESS, N_MM, 210_000.0),
        ("210 GPa", units.STRESS, N_M, 210e9),
        ("210000 N/mm2", units.STRESS, N_MM, 210_000.0),
        ("210 kN/mm²", units.STRESS, N_MM, 210_000.0),
        ("29000 ksi", units.STRESS, KIP_IN, 29_000.0),
        ("1 psi", units.STRESS, N_M, 4.4482216152605 / 0.0254**2),
        ("1 psf", units.STRESS, LBF_FT, 1.0),
        ("3 bar", units.STRESS, N_MM, 0.3),
        ("7850 kg/m3", units.DENSITY, N_MM, 7.85e-9),
        ("7850 kg/m^3", units.DENSITY, N_M, 7850.0),
        ("7.85 g/cm3", units.DENSITY, N_M, 7850.0),
        ("7.85 t/m3", units.DENSITY, N_M, 7850.0),
        # 490 lb/ft3 / 32.174 ft/s2 = 15.23 slug/ft3; 9.80665 / 0.3048 = 32.17404856
        ("490 lb/ft3", units.DENSITY, LBF_FT, 490 / (9.80665 / 0.3048)),
        ("15 slug/ft3", units.DENSITY, LBF_FT, 15.0),
        ("9.81 m/s2", units.ACCELERATION, N_MM, 9810.0),
        ("-9.81 m/s/s", units.ACCELERATION, N_MM, -9810.0),
        ("3000 rpm", units.ROTATION_SPEED, N_MM, 3000 * 2 * math.pi / 60),
        ("3000 rev/min", units.ROTATION_SPEED, N_MM, 3000 * 2 * math.pi / 60),
        ("90 deg/s", units.ROTATION_SPEED, N_MM, math.pi / 2),
        ("4 rad/s", units.ROTATION_SPEED, N_M, 4.0),
        ("4 1/s", units.ROTATION_SPEED, N_M, 4.0),
        ("20 degC", units.TEMPERATURE, N_MM, 20.0),
        ("20 °C", units.TEMPERATURE, N_MM, 20.0),
        ("-36 degF", units.TEMPERATURE, N_MM, -20.0),
        ("1.2e-5 1/K", units.EXPANSION, N_MM, 1.2e-5),
        ("1.2e-5/K", units.EXPANSION, N_MM, 1.2e-5),
        ("1.2e-5 K^-1", units.EXPANSION, N_MM, 1.2e-5),
        ("1.2e-5 K⁻¹", units.EXPANSION, N_MM, 1.2e-5),
        ("12 um/m/K", units.EXPANSION, N_MM, 1.2e-5),
        ("9e-6 1/degF", units.EXPANSION, N_MM, 9e-6 * 9 / 5),
        ("2 kN*m", units.MOMENT, N_MM, 2e6),
        ("2 kN m", units.MOMENT, N_MM, 2e6),
        ("2 kN·m", units.MOMENT, N_MM, 2e6),
        ("5 kN/m", units.LINE_LOAD, N_MM, 5.0),
        ("77 kN/m3", units.BODY_FORCE, N_MM, 77e-6),
        ("50 N/mm/mm", units.SIDE_SPRING, N_MM, 50.0),
        ("5 kN/mm", units.POINT_SPRING, N_MM, 5000.0),
        ("8 kgf", units.FORCE, N_MM, 8 * 9.80665),
    ],
)
def test_quantities_convert_as_by_hand(
    text: str, dimension: Dimension, job: Units, expected: float
) -> None:
    assert to_number(text, [dimension], job) == pytest.approx(expected, rel=ROUNDING, abs=0)


@pytest.mark.parametrize(
    "dimension",
    [d for d in vars(units).values() if isinstance(d, Dimension)],
    ids=lambda dimension: dimension.name,
)
def test_every_example_in_a_message_is_right(dimension: Dimension) -> None:
    assert math.isfinite(to_number(dimension.example, [dimension], N_MM))


@given(
    # Numbers so small that their digits end (below 1e-300) carry no fourteen digits to compare.
    value=st.floats(-1e9, 1e9).filter(lambda value: value == 0 or abs(value) > 1e-280),
    written=st.tuples(st.sampled_from(sorted(METRES)), st.sampled_from(sorted(NEWTONS))),
    declared=st.tuples(st.sampled_from(sorted(METRES)), st.sampled_from(sorted(NEWTONS))),
    power=st.sampled_from([1, 2, 3]),
)
def test_force_over_any_power_of_length_scales_by_hand_factors(
    value: float, written: tuple[str, str], declared: tuple[str, str], power: int
) -> None:
    """5 kip/in2 in N and mm is 5 x (N per kip) / (mm per in)^2; a few roundings of floats."""
    dimension = {1: units.LINE_LOAD, 2: units.STRESS, 3: units.BODY_FORCE}[power]
    factor = NEWTONS[written[1]] / METRES[written[0]] ** power
    factor /= NEWTONS[declared[1]] / METRES[declared[0]] ** power
    text = f"{value!r} {written[1]}/{written[0]}{power}"
    number = to_number(text, [dimension], Units(*declared))
    assert number == pytest.approx(value * factor, rel=1e-14, abs=0)


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_quantity_in_the_declared_unit_is_the_number_itself(value: float) -> None:
    assert to_number(f"{value!r} mm", [units.LENGTH], N_MM) == value


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("12", "no unit"),
        ("mm", "must be a number or a length"),
        ("12 mm mm", "an area"),
        ("12 N", "a force; expected a length"),
        ("12 kg", "a mass"),
        ("12 mmm", "unknown unit"),
        ("12 MM", "unknown unit"),
        ("1,5 mm", "cannot be read"),
        ("1 000 mm", "cannot be read"),
        ("12 /", "cannot be read"),
        ("12 * mm", "cannot be read"),
        ("12 mm//s", "cannot be read"),
        ("12 mm^9", "cannot be read"),
        ("12 (mm)", "cannot be read"),
        ("NaN mm", "must be a number"),
        ("inf mm", "must be a number"),
        ("0x1p3 mm", "unknown unit"),
        ("١٢ mm", "must be a number"),
        ("1e999 mm", "too large"),
        ("1e307 m", "too large"),
        ("9" * 80 + " mm", "must be a number"),
    ],
)
def test_what_is_no_length_is_refused_with_an_example(text: str, words: str) -> None:
    with pytest.raises(ValueError, match=words):
        to_number(text, [units.LENGTH], N_MM)


@given(st.text(max_size=70))
def test_any_text_is_a_finite_number_or_a_value_error(text: str) -> None:
    with contextlib.suppress(ValueError):
        assert math.isfinite(to_number(text, [units.LENGTH, units.FORCE], N_MM))

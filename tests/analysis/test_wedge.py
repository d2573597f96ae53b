"""Exponents of wedges against published values, closed characteristic equations and symmetry."""

import numpy as np
import pytest
from scipy.optimize import newton

from workers.analysis.wedge import Condition, Sector, exponent

ROUGH = 5e-4  # angles are told apart to 1e-3 rad, of which the exponents feel about a third


def wedge(degrees: float, first: Condition, last: Condition, nu: float = 0.3) -> float | None:
    return exponent([Sector(np.radians(degrees), 1.0, nu)], (first, last))


@pytest.mark.parametrize(
    ("degrees", "value"), [(360, 0.5), (315, 0.5050), (270, 0.5445), (225, 0.6736)]
)
def test_free_notches_have_the_published_exponents(degrees: float, value: float) -> None:
    """Williams 1952; values as in tables of notch stress intensity, from memory: crack 1/2."""
    assert wedge(degrees, "free", "free") == pytest.approx(value, abs=ROUGH)


@pytest.mark.parametrize("degrees", [195, 230, 250, 300, 345])
def test_free_notches_satisfy_williams_equation(degrees: float) -> None:
    """sin(lambda a) + lambda sin(a) = 0 for the symmetric field of an angle a."""
    a = np.radians(degrees)
    value = wedge(degrees, "free", "free")
    assert value is not None
    assert np.sin(value * a) + value * np.sin(a) == pytest.approx(0, abs=5e-3)


@pytest.mark.parametrize("degrees", [75, 90, 120, 150])
@pytest.mark.parametrize("nu", [0.1, 0.3, 0.45])
def test_fixed_and_free_side_satisfy_williams_equation(degrees: float, nu: float) -> None:
    """sin^2(lambda a) = (1 + k)^2 / 4k - lambda^2 sin^2(a) / k, k = (3 - nu) / (1 + nu)."""
    a, kappa = np.radians(degrees), (3 - nu) / (1 + nu)
    value = wedge(degrees, "fixed", "free", nu)
    if value is None:  # then the equation has no root below one: its sides keep their order
        x = np.linspace(0.05, 0.98, 500)
        sides = np.sin(x * a) ** 2 - (1 + kappa) ** 2 / (4 * kappa) + (x * np.sin(a)) ** 2 / kappa
        assert (sides < 0).all()
        return

    def equation(x: complex) -> complex:
        left = np.sin(x * a) ** 2 + (x * np.sin(a)) ** 2 / kappa
        return complex(left - (1 + kappa) ** 2 / (4 * kappa))

    # The root may be complex; its real part is what counts.
    starts = (value + imaginary * 1j for imaginary in (0.01, 0.1, 0.2))
    roots = [newton(equation, start, tol=1e-10, disp=False) for start in starts]
    found = [root for root in roots if abs(equation(root)) < 1e-8]
    assert min(abs(root.real - value) for root in found) < 2 * ROUGH


def test_a_straight_side_that_is_fixed_from_a_point_on_is_as_strong_as_a_crack() -> None:
    """The exponent is 1/2 + i e (Muskhelishvili's mixed problem of the half-plane)."""
    assert wedge(180, "fixed", "free") == pytest.approx(0.5, abs=ROUGH)


@pytest.mark.parametrize("degrees", [100, 120, 135, 180])
def test_a_roller_mirrors_the_plate(degrees: float) -> None:
    """Beside a roller the field is half of that of a free notch of twice the angle."""
    mirrored = wedge(2 * degrees, "free", "free")
    assert wedge(degrees, "roller", "free") == pytest.approx(mirrored, abs=2 * ROUGH)


@pytest.mark.parametrize(
    ("degrees", "first", "last", "nu"),
    [
        (90, "free", "free", 0.3),  # a plain corner
        (180, "free", "free", 0.3),  # no corner
        (90, "roller", "free", 0.3),  # a symmetry line meets a side
        (90, "roller", "roller", 0.3),  # a quarter of a plate
        (90, "fixed", "free", 0.0),  # no contraction to hold back
        (60, "fixed", "free", 0.3),  # Williams: finite below about 63 degrees for this ratio
    ],
)
def test_where_stress_is_finite_there_is_no_exponent(
    degrees: float, first: Condition, last: Condition, nu: float
) -> None:
    assert wedge(degrees, first, last, nu) is None


def test_a_sector_of_one_section_may_be_cut_anywhere() -> None:
    parts = [Sector(np.radians(d), 2.0, 0.3) for d in (100, 80, 90)]
    assert exponent(parts, ("free", "free")) == pytest.approx(0.5445, abs=2 * ROUGH)


def test_a_very_stiff_neighbour_holds_like_a_fixed_side() -> None:
    soft, rigid = Sector(np.pi / 2, 1.0, 0.3), Sector(np.pi / 2, 1e6, 0.3)
    fixed = wedge(90, "fixed", "free")
    assert exponent([rigid, soft], ("free", "free")) == pytest.approx(fixed, abs=ROUGH)


def test_a_straight_border_between_two_sections_is_harmless() -> None:
    halves = [Sector(np.pi, 1.0, 0.3), Sector(np.pi, 2.0, 0.3)]
    assert exponent(halves, None) is None


def test_the_corner_of_a_thicker_part_is_weaker_the_smaller_the_step() -> None:
    """Monotonic between no step (finite) and a rigid part (re-entrant corner with fixed sides)."""
    found = [
        exponent([Sector(np.pi / 2, t, 0.3), Sector(1.5 * np.pi, 1.0, 0.3)], None)
        for t in (1e6, 10.0, 3.0, 2.0)
    ]
    assert found == sorted(found, key=lambda value: value or 1.0)
    assert found[0] == pytest.approx(wedge(270, "fixed", "fixed"), abs=2 * ROUGH)

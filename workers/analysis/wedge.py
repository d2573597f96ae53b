"""How strong the stress is at a corner: the exponents of wedges of elastic sectors.

Near the tip of a wedge with given conditions on its two sides the displacements go as r^lambda and
the stresses as r^(lambda - 1): where lambda is below one the stress at the tip is infinite, and
what a mesh shows there is the size of its elements. A wedge may consist of several sectors, each of
its own material and thickness, and may close around the tip (a corner of a region inside the
plate).

References
----------
Williams, "Stress singularities resulting from various boundary conditions in angular corners of
plates in extension", J. Appl. Mech. 19 (1952); several sectors as in Hein & Erdogan, Int. J.
Fract. Mech. 7 (1971).
"""

from collections.abc import Sequence
from functools import lru_cache
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

Complex = NDArray[np.complex128]

# What holds on a side of the wedge: nothing, both displacements, the one across it, or along it.
Condition = Literal["free", "fixed", "roller", "slider"]

LEAST, MOST = 0.02, 0.985  # of the real part searched: 0 is a rigid shift, 1 a constant stress
# Guesses from which zeros are sought; pairs of fixed and free sides give complex ones.
GUESSES = (np.linspace(0.05, 0.98, 40)[:, None] + 1j * np.array([0.0, 0.1, 0.25, 0.45])).ravel()
STEPS = 25  # of the secant iteration
LONGEST = 0.05  # step; a guess that has wandered off is not needed, its neighbours are there
DIGITS = 3  # to which angles [rad] are told apart: 1e-3 of the exponent
SOFTEST = 1e-6  # of the stiffest sector: softer is as good as nothing


class Sector(NamedTuple):
    """angle [rad]; stiffness: Young's modulus times thickness [F/L]; poissons_ratio."""

    angle: float
    stiffness: float
    poissons_ratio: float


def exponent(sectors: Sequence[Sector], sides: tuple[Condition, Condition] | None) -> float | None:
    """The smallest real part of lambda between 0 and 1; None where the stress is finite.

    Parameters
    ----------
    sectors : counter-clockwise around the tip
    sides : conditions on the first and on the last side; None if the sectors close around the tip
    """
    stiffest = max(sector.stiffness for sector in sectors)
    plain = tuple(
        Sector(
            round(sector.angle, DIGITS),
            max(round(sector.stiffness / stiffest, 6), SOFTEST),
            round(sector.poissons_ratio, DIGITS),
        )
        for sector in sectors
    )
    return _exponent(plain, sides)


@lru_cache(maxsize=4096)
def _exponent(
    sectors: tuple[Sector, ...], sides: tuple[Condition, Condition] | None
) -> float | None:
    roots = _zeros(sectors, sides)
    inside = roots.real[(roots.real > LEAST) & (roots.real < MOST)]
    return float(inside.min()) if len(inside) else None


def _zeros(sectors: tuple[Sector, ...], sides: tuple[Condition, Condition] | None) -> Complex:
    """Zeros of the determinant that the secant method reaches from the guesses."""
    one, other = GUESSES + 1e-4, GUESSES.copy()
    f_one = _determinant(one, sectors, sides)
    for _ in range(STEPS):
        f_other = _determinant(other, sectors, sides)
        slope = f_other - f_one
        moving = slope != 0
        step = np.divide(f_other * (other - one), slope, out=np.zeros_like(slope), where=moving)
        length = np.abs(step)
        step *= np.divide(LONGEST, length, out=np.ones_like(length), where=length > LONGEST)
        one, f_one, other = other, f_other, other - step
    return other[np.abs(other - one) < 1e-8]


def _determinant(
    exponents: Complex, sectors: tuple[Sector, ...], sides: tuple[Condition, Condition] | None
) -> Complex:
    """Of the conditions on all sides, (e,) at exponents (e,); zero where there is a field."""
    count = len(sectors)
    matrix = np.zeros((len(exponents), 4 * count, 4 * count), complex)
    ends = np.cumsum([0.0, *(sector.angle for sector in sectors)])
    row = 0
    for number, sector in enumerate(sectors):
        own = slice(4 * number, 4 * number + 4)
        first = _fields(exponents, ends[number], sector)
        last = _fields(exponents, ends[number + 1], sector)
        if number == 0 and sides is not None:
            matrix[:, row : row + 2, own] = first[:, _ROWS[sides[0]]]
            row += 2
        if number == count - 1 and sides is not None:
            matrix[:, row : row + 2, own] = last[:, _ROWS[sides[1]]]
        else:
            following = (number + 1) % count
            theirs = slice(4 * following, 4 * following + 4)
            matrix[:, row : row + 4, own] = last
            matrix[:, row : row + 4, theirs] -= _fields(
                exponents, ends[number + 1] if following else 0.0, sectors[following]
            )
            row += 4
    return np.linalg.det(matrix)


# Rows of `_fields` that vanish under each condition.
_ROWS = {"fixed": [0, 1], "free": [2, 3], "roller": [1, 3], "slider": [0, 2]}


def _fields(exponents: Complex, theta: float, sector: Sector) -> Complex:
    """u_r, u_theta, force across and along the ray theta, for unit coefficients, (e, 4, 4).

    Airy's function r^(lambda+1) (a cos + b sin)(lambda+1)theta + (c cos + d sin)(lambda-1)theta;
    common factors (powers of r, lambda, 1/2) are left out.
    """
    L = exponents
    nu = sector.poissons_ratio
    kappa = (3 - nu) / (1 + nu)  # plane stress
    shear = sector.stiffness / (1 + nu)  # 2 G t
    cos_p, sin_p = np.cos((L + 1) * theta), np.sin((L + 1) * theta)
    cos_m, sin_m = np.cos((L - 1) * theta), np.sin((L - 1) * theta)
    rows = (
        (-(L + 1) * cos_p, -(L + 1) * sin_p, (kappa - L) * cos_m, (kappa - L) * sin_m),
        ((L + 1) * sin_p, -(L + 1) * cos_p, (kappa + L) * sin_m, -(kappa + L) * cos_m),
        (cos_p, sin_p, cos_m, sin_m),
        (-(L + 1) * sin_p, (L + 1) * cos_p, -(L - 1) * sin_m, (L - 1) * cos_m),
    )
    fields = np.array([[*row] for row in rows]).transpose(2, 0, 1)
    fields[:, :2] /= shear
    return fields

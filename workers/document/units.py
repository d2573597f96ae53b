"""Units of measurement: "210 GPa" in, a number in the job's own consistent units out.

A dimension is a product of powers of length, force, time and temperature; mass is force times
time squared over length. Factors are exact fractions, so that a conversion rounds only once.
Temperatures are differences: a degree Celsius is a kelvin.

Sources: the SI Brochure (BIPM, 9th edition, 2019); for inch, foot, pound and pound-force NIST
Special Publication 811 (2008), Appendix B.
"""

import math
import re
from collections.abc import Mapping, Sequence
from fractions import Fraction
from functools import lru_cache
from types import MappingProxyType
from typing import NamedTuple

from workers.job import Units

Exponents = tuple[int, int, int, int]  # of length, force, time, temperature


class Dimension(NamedTuple):
    """What kind of quantity a number is.

    name : as a message says it, with its article.
    exponents : of length, force, time, temperature.
    example : a text that is right.
    """

    name: str
    exponents: Exponents
    example: str


LENGTH = Dimension("a length", (1, 0, 0, 0), "12 mm")
FORCE = Dimension("a force", (0, 1, 0, 0), "80 kN")
STRESS = Dimension("a force per area", (-2, 1, 0, 0), "210 GPa")
MOMENT = Dimension("a moment", (1, 1, 0, 0), "2 kN*m")
LINE_LOAD = Dimension("a force per length", (-1, 1, 0, 0), "5 kN/m")
BODY_FORCE = Dimension("a force per volume", (-3, 1, 0, 0), "77 kN/m3")
DENSITY = Dimension("a density", (-4, 1, 2, 0), "7850 kg/m3")
ACCELERATION = Dimension("an acceleration", (1, 0, -2, 0), "9.81 m/s2")
ROTATION_SPEED = Dimension("a speed of rotation", (0, 0, -1, 0), "3000 rpm")
TEMPERATURE = Dimension("a temperature change", (0, 0, 0, 1), "20 K")
EXPANSION = Dimension("a thermal expansion", (0, 0, 0, -1), "1.2e-5 1/K")
SIDE_SPRING = Dimension("a force per length per length of side", (-2, 1, 0, 0), "50 N/mm2")
POINT_SPRING = Dimension("a force per length", (-1, 1, 0, 0), "5 kN/mm")

# Only used to tell the reader what a text is instead of what it should be.
_OTHERS = (
    Dimension("a mass", (-1, 1, 2, 0), "1 kg"),
    Dimension("a time", (0, 0, 1, 0), "1 s"),
    Dimension("an area", (2, 0, 0, 0), "1 m2"),
    Dimension("a volume", (3, 0, 0, 0), "1 m3"),
    Dimension("a velocity", (1, 0, -1, 0), "1 m/s"),
    Dimension("a number without dimension", (0, 0, 0, 0), "1"),
)
_KNOWN = (LENGTH, FORCE, STRESS, MOMENT, LINE_LOAD, BODY_FORCE, DENSITY, ACCELERATION,
          ROTATION_SPEED, TEMPERATURE, EXPANSION, *_OTHERS)  # fmt: skip

LENGTH_UNITS: Mapping[str, Fraction] = MappingProxyType(  # in metres
    {
        "mm": Fraction("0.001"),
        "cm": Fraction("0.01"),
        "m": Fraction(1),
        "in": Fraction("0.0254"),
        "ft": Fraction("0.3048"),
    }
)
_LBF = Fraction("4.4482216152605")
FORCE_UNITS: Mapping[str, Fraction] = MappingProxyType(  # in newtons
    {
        "N": Fraction(1),
        "kN": Fraction(1000),
        "MN": Fraction(10**6),
        "lbf": _LBF,
        "kip": 1000 * _LBF,
    }
)

_INCH, _FOOT, _LB = LENGTH_UNITS["in"], LENGTH_UNITS["ft"], Fraction("0.45359237")
_TURN = Fraction(2 * math.pi)
_MASS, _TIME, _PLAIN = (-1, 1, 2, 0), (0, 0, 1, 0), (0, 0, 0, 0)


def _of(
    exponents: Exponents, **factors: Fraction | int | str
) -> dict[str, tuple[Fraction, Exponents]]:
    return {symbol: (Fraction(factor), exponents) for symbol, factor in factors.items()}


# symbol -> (factor to m, N, s, K; exponents)
_UNITS: dict[str, tuple[Fraction, Exponents]] = {
    **_of(LENGTH.exponents, **LENGTH_UNITS, um="1e-6"),
    **_of(FORCE.exponents, **FORCE_UNITS, kgf="9.80665"),
    **_of(STRESS.exponents, Pa=1, kPa=1000, MPa=10**6, GPa=10**9, bar=10**5,
          psi=_LBF / _INCH**2, ksi=1000 * _LBF / _INCH**2, psf=_LBF / _FOOT**2),
    **_of(_MASS, kg=1, g="0.001", t=1000, lb=_LB, slug=_LBF / _FOOT),
    **_of(_TIME, s=1, ms="0.001", min=60, h=3600),
    **_of(TEMPERATURE.exponents, K=1, degC=1, degF=Fraction(5, 9)),
    **_of(ROTATION_SPEED.exponents, rpm=_TURN / 60),
    **_of(_PLAIN, rad=1, rev=_TURN, deg=_TURN / 360),
    "\N{MICRO SIGN}m": (Fraction("1e-6"), LENGTH.exponents),
    "\N{GREEK SMALL LETTER MU}m": (Fraction("1e-6"), LENGTH.exponents),
    "°C": (Fraction(1), TEMPERATURE.exponents),
    "°F": (Fraction(5, 9), TEMPERATURE.exponents),
}  # fmt: skip

_NUMBER = re.compile(
    r"\s*([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,4})?)\s*(.*?)\s*", re.S
)
_STEP = re.compile(
    r"\s*([*/·⋅]?)\s*(?:(1)(?=\s*/)|"
    r"([A-Za-z°\N{MICRO SIGN}\N{GREEK SMALL LETTER MU}]+)(?:\^?(-?[1-4]))?)"
)
_SUPERSCRIPTS = str.maketrans("⁻¹²³⁴", "-1234")
_LONGEST = 60  # characters of a quantity


def to_number(text: str, dimensions: Sequence[Dimension], units: Units) -> float:
    """The value of a text such as "210 GPa" in consistent units of the job.

    Any of `dimensions` is accepted. ValueError, with a message for the client, when the text cannot
    be read, has another dimension, or the value is not finite.
    """
    expected = f'{" or ".join(d.name for d in dimensions)} such as "{dimensions[0].example}"'
    found = _NUMBER.fullmatch(text) if len(text) <= _LONGEST else None
    if found is None:
        raise ValueError(f"must be a number or {expected}")
    if not found[2]:
        raise ValueError(f"has no unit: write the number without quotation marks, or {expected}")
    factor, exponents = _unit(found[2])
    if all(exponents != dimension.exponents for dimension in dimensions):
        raise ValueError(f"is {_name_of(exponents)}; expected {expected}")
    value = float(found[1])
    if math.isfinite(value):
        try:
            value = float(Fraction(value) * (factor / _scale(exponents, units)))
        except OverflowError:
            value = math.inf
    if not math.isfinite(value):
        raise ValueError("is too large to be a number")
    return value


def exponents_of(text: str) -> Exponents | None:
    """Dimension of a text such as "210 GPa", None when it cannot be read."""
    found = _NUMBER.fullmatch(text) if len(text) <= _LONGEST else None
    try:
        return _unit(found[2])[1] if found and found[2] else None
    except ValueError:
        return None


def value_of(text: str) -> float | None:
    """The number before the unit, None when the text cannot be read."""
    found = _NUMBER.fullmatch(text) if len(text) <= _LONGEST else None
    return float(found[1]) if found else None


@lru_cache(maxsize=1024)
def _unit(text: str) -> tuple[Fraction, Exponents]:
    """Factor to m, N, s, K and exponents of a product of units; a slash divides by one unit."""
    plain = text.translate(_SUPERSCRIPTS)
    factor, exponents, position = Fraction(1), _PLAIN, 0
    while position < len(plain):
        step = _STEP.match(plain, position)
        if step is None or (position == 0 and step[1] == "*") or (position > 0 and step[2]):
            raise ValueError(f'has a unit that cannot be read: "{text}"; write it like kN/m2')
        position = step.end()
        if step[2]:
            continue
        if step[3] not in _UNITS:
            raise ValueError(f'has an unknown unit "{step[3]}"; known: {", ".join(_UNITS)}')
        power = int(step[4] or 1) * (-1 if step[1] == "/" else 1)
        one, of_one = _UNITS[step[3]]
        factor *= one**power
        exponents = _plus(exponents, of_one, power)
    return factor, exponents


def _plus(a: Exponents, b: Exponents, power: int) -> Exponents:
    return (a[0] + power * b[0], a[1] + power * b[1], a[2] + power * b[2], a[3] + power * b[3])


@lru_cache(maxsize=256)
def _scale(exponents: Exponents, units: Units) -> Fraction:
    """One consistent unit of the job in m, N, s, K."""
    return LENGTH_UNITS[units.length] ** exponents[0] * FORCE_UNITS[units.force] ** exponents[1]


def _name_of(exponents: Exponents) -> str:
    for dimension in _KNOWN:
        if dimension.exponents == exponents:
            return dimension.name
    return "of another dimension"

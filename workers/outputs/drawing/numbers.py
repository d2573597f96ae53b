"""Numbers as a reader wants them: round steps, few digits, no needless exponents."""

import math
from itertools import pairwise

SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
MINUS, TIMES = "\N{MINUS SIGN}", "\N{MULTIPLICATION SIGN}"
NO_BREAK = "\N{NO-BREAK SPACE}"


def show(value: float, digits: int = 3) -> str:
    """A number to so many significant digits, e.g. 312, 0.0417, −9810, 80 000, 2.1 × 10⁻⁷."""
    if value == 0:
        return "0"
    value = float(f"{value:.{digits - 1}e}")
    exponent = math.floor(math.log10(abs(value)))
    sign, size = (MINUS if value < 0 else ""), abs(value)
    if not -4 <= exponent < 6:
        mantissa = _plain(size / 10.0**exponent, digits - 1)
        power = f"10{str(exponent).translate(SUPERSCRIPTS)}"
        return f"{sign}{mantissa}{NO_BREAK}{TIMES}{NO_BREAK}{power}"
    return sign + _plain(size, max(0, digits - 1 - exponent))


def _plain(size: float, decimals: int) -> str:
    text = f"{size:,.{decimals}f}"
    whole, _, part = text.partition(".")
    whole = whole if len(whole) <= 5 else whole.replace(",", NO_BREAK)
    part = part.rstrip("0")
    return whole.replace(",", "") + (f".{part}" if part else "")


def round_step(span: float, count: int) -> float:
    """The step 1, 2 or 5 times a power of ten that cuts a span into at most `count` parts."""
    rough = span / count
    power = 10.0 ** math.floor(math.log10(rough))
    return next(f * power for f in (1.0, 2.0, 5.0, 10.0) if f * power >= rough * (1 - 1e-9))


def round_ticks(low: float, high: float, count: int = 8) -> list[float]:
    """Multiples of a round step between two values, ends included where they are multiples."""
    step = round_step(high - low, count)
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return [number * step for number in range(first, last + 1)]


def show_all(values: list[float]) -> list[str]:
    """Ticks with one number of digits for all, enough to tell them apart."""
    largest = max(map(abs, values), default=0.0)
    gaps = [b - a for a, b in pairwise(values)]
    if not largest or not gaps:
        return [show(value) for value in values]
    digits = math.floor(math.log10(largest)) - math.floor(math.log10(min(gaps) * (1 + 1e-9))) + 1
    return [show(v, _digits_like(v, largest, digits)) for v in values]


def _digits_like(value: float, largest: float, digits: int) -> int:
    """Digits that show a smaller value to the same decimal place as the largest."""
    if value == 0:
        return 1
    lost = math.floor(math.log10(largest)) - math.floor(math.log10(abs(value)) + 1e-9)
    return max(1, digits - lost)


def round_factor(value: float) -> float:
    """The nearest factor 1, 2 or 5 times a power of ten that is not above the value."""
    power = 10.0 ** math.floor(math.log10(value))
    return max(f * power for f in (1.0, 2.0, 5.0) if f * power <= value * (1 + 1e-9))


def vector(x: float, y: float, digits: int = 3) -> str:
    return f"({show(x, digits)}, {show(y, digits)})"

"""Numbers, ticks and colours as a reader sees them."""

import math

import matplotlib
import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from workers.outputs.drawing.numbers import (
    MINUS,
    TIMES,
    round_factor,
    round_step,
    round_ticks,
    show,
    show_all,
)
from workers.outputs.drawing.palette import DIVERGING, SEQUENTIAL, grey

finite = st.floats(-1e12, 1e12).filter(lambda v: v == 0 or abs(v) > 1e-12)


def parsed(text: str) -> float:
    """Reads a shown number back, by nothing but the rules of writing numbers."""
    plain = text.replace(MINUS, "-").replace("\N{NO-BREAK SPACE}", "")
    mantissa, times, power = plain.partition(f"{TIMES}10")
    if times:
        exponent = power.translate(str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789"))
        return float(mantissa) * 10.0 ** int(exponent)
    return float(plain)


@given(finite, st.integers(2, 5))
def test_a_shown_number_reads_back_to_its_digits(value, digits):
    """Half a unit in the last digit shown; 1 % slack for the decimal rounding of the float."""
    assert parsed(show(value, digits)) == pytest.approx(value, rel=0.505 * 10.0 ** (1 - digits))


@pytest.mark.parametrize(
    ("value", "text"),
    [(312.4, "312"), (99.96, "100"), (0.5, "0.5"), (-9810, "-9810"), (80000, "80 000"), (0, "0")],
)
def test_everyday_numbers(value, text):
    assert show(value).replace("\N{NO-BREAK SPACE}", " ") == text.replace("-", MINUS)


@given(st.floats(1e-9, 1e9), st.integers(3, 12))
def test_steps_are_one_two_or_five_and_not_too_many(span, count):
    step = round_step(span, count)
    mantissa = step / 10.0 ** math.floor(math.log10(step) + 1e-9)
    assert any(mantissa == pytest.approx(m) for m in (1, 2, 5))
    assert span / step <= count * (1 + 1e-6)


@given(st.floats(-1e6, 1e6), st.floats(1e-3, 1e6))
def test_ticks_lie_in_the_range_and_their_texts_differ(low, span):
    assume(span > 1e-6 * abs(low))  # beyond the digits of the texts otherwise
    ticks = round_ticks(low, low + span)
    assert 2 <= len(ticks) <= 9
    assert all(low - 1e-6 * span <= t <= low + span * (1 + 1e-6) for t in ticks)
    texts = show_all(ticks)
    assert len(set(texts)) == len(texts)
    gap = ticks[1] - ticks[0]
    for text, tick in zip(texts, ticks, strict=True):
        assert parsed(text) == pytest.approx(tick, abs=0.01 * gap)


@given(st.floats(1e-6, 1e6))
def test_a_round_factor_is_at_most_the_wanted_one_and_at_least_two_fifths_of_it(wanted):
    assert 0.399 * wanted <= round_factor(wanted) <= wanted * (1 + 1e-6)


# --- colours -----------------------------------------------------------------------------------


def lightness(colours: np.ndarray) -> np.ndarray:
    """CIE 1976 L* of 8-bit sRGB (IEC 61966-2-1, white D65)."""
    encoded = colours / 255.0
    linear = np.where(encoded <= 0.04045, encoded / 12.92, ((encoded + 0.055) / 1.055) ** 2.4)
    Y = linear @ np.array([0.2126, 0.7152, 0.0722])
    return np.where(Y > 216 / 24389, 116 * np.cbrt(Y) - 16, 24389 / 27 * Y)


def test_the_sequential_map_darkens_all_the_way_in_even_steps():
    """A grey print keeps order and rank; the lightness never steps by more than twice its mean."""
    found = lightness(SEQUENTIAL)
    steps = np.diff(found[::8])
    assert (steps < 0).all()
    assert found[0] > 90
    assert found[-1] < 25
    assert steps.min() > 2.0 * steps.mean()
    assert (np.diff(grey(SEQUENTIAL)) < 0).all()


def test_the_sequential_map_is_as_even_as_a_published_one():
    """Against cividis (Nunez, Anderton & Renslow 2018) as matplotlib ships it, by the spread of
    lightness steps over their mean."""
    ours = np.diff(lightness(SEQUENTIAL[::15]))
    cividis = (matplotlib.colormaps["cividis"](np.linspace(0, 1, 256))[:, :3] * 255)[::15]
    theirs = np.diff(lightness(cividis))
    assert ours.std() / abs(ours.mean()) < theirs.std() / abs(theirs.mean()) + 0.25


def test_the_diverging_map_is_near_white_at_zero_and_darkens_alike_to_both_ends():
    found = lightness(DIVERGING)
    middle = len(DIVERGING) // 2
    assert found[middle - 1 : middle + 1].min() > 93
    assert (np.diff(found[:middle:8]) > 0).all()
    assert (np.diff(found[middle::8]) < 0).all()
    assert found[:middle] == pytest.approx(found[middle:][::-1], abs=9)
    blue, rust = DIVERGING[20].astype(int), DIVERGING[-20].astype(int)
    assert blue[2] > blue[0] + 60
    assert rust[0] > rust[2] + 60

"""Plots laid out: places by hand from the margins, ticks that fall on round values."""

import pytest

from workers.outputs.plots import BOTTOM, HEIGHT, LEFT, RIGHT, TOP, WIDTH, Curve, lay_out

LOW, HIGH = float(HEIGHT - BOTTOM), float(TOP)
START, END = float(LEFT), float(WIDTH - RIGHT)


def points(text: str) -> list[tuple[float, ...]]:
    return [tuple(map(float, pair.split(","))) for pair in text.split()]


def test_curves_span_the_plot_from_zero_to_the_largest_value() -> None:
    plot = lay_out("t", "x", "y", [0, 5, 10], [Curve("a", [0, 50, 100])])
    middle = ((START + END) / 2, (LOW + HIGH) / 2)
    assert points(plot.lines[0]) == [(START, LOW), pytest.approx(middle), (END, HIGH)]
    assert plot.zero == LOW


def test_zero_stays_in_view_of_values_far_from_it() -> None:
    """A stress is read against zero: 99 to 100 must not look like a great change."""
    plot = lay_out("t", "x", "y", [0, 1], [Curve("a", [99, 100])])
    first, last = points(plot.lines[0])
    assert first[1] - last[1] == pytest.approx((LOW - HIGH) / 100, abs=0.02)


def test_negative_values_lie_below_zero() -> None:
    plot = lay_out("t", "x", "y", [0, 1], [Curve("a", [-30, 10])])
    assert plot.zero == pytest.approx(LOW + (HIGH - LOW) * 0.75, abs=0.02)
    assert [t.text.replace("\N{MINUS SIGN}", "-") for t in plot.y_ticks] == [
        "-30",
        "-20",
        "-10",
        "0",
        "10",
    ]


def test_ticks_stand_where_their_values_are() -> None:
    plot = lay_out("t", "x", "y", [0, 40], [Curve("a", [0, 1])])
    for tick in plot.x_ticks:
        assert tick.at == pytest.approx(START + float(tick.text) / 40 * (END - START), abs=0.01)
    assert len(plot.x_ticks) >= 3


def test_a_band_goes_there_above_and_back_below() -> None:
    plot = lay_out("t", "x", "y", [0, 1], [Curve("a", [2, 2])], band=([1, 1], [4, 4]))
    assert points(plot.band) == [
        (START, HIGH), (END, HIGH),
        (END, pytest.approx(LOW - (LOW - HIGH) / 4, abs=0.01)),
        (START, pytest.approx(LOW - (LOW - HIGH) / 4, abs=0.01)),
    ]  # fmt: skip


def test_a_limit_above_all_values_is_kept_in_view() -> None:
    plot = lay_out("t", "x", "y", [0, 1], [Curve("a", [1, 1])], limit=2.0)
    assert plot.limit == HIGH
    assert points(plot.lines[0])[0][1] == pytest.approx((LOW + HIGH) / 2)


@pytest.mark.parametrize(("places", "values"), [([3.0], [0.0]), ([1, 2], [0.0, 0.0])])
def test_a_plot_of_nothing_is_still_a_plot(places: list[float], values: list[float]) -> None:
    plot = lay_out("t", "x", "y", places, [Curve("a", values)])
    assert points(plot.lines[0])[0] == (START, LOW)
    assert plot.y_ticks


def test_marks_are_made_when_asked_for() -> None:
    curve = [Curve("a", [1, 2])]
    assert lay_out("t", "x", "y", [0, 1], curve).marks == ()
    assert lay_out("t", "x", "y", [0, 1], curve, marked=True).marks[1] == (END, HIGH)

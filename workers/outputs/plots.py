"""Small line plots as plain data, ready to be set as inline SVG by a template.

Curves differ by dash as well as by colour, so that a grey print keeps them apart.
"""

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass

from workers.outputs.drawing.numbers import round_ticks, show_all

WIDTH, HEIGHT = 340, 170  # of a plot, in the SVG's own units
LEFT, RIGHT, TOP, BOTTOM = 54, 8, 10, 34  # margins for ticks and labels
TICKS = 5

Values = Sequence[float]


@dataclass(frozen=True)
class Curve:
    """values : one for each place along the plot's x axis"""

    name: str
    values: Values


@dataclass(frozen=True)
class Tick:
    at: float
    text: str


@dataclass(frozen=True)
class Plot:
    """A plot laid out: everything in the SVG's own units.

    lines : for each curve the points of a polyline
    band : the outline of the range that further curves lie in, "" for none
    marks : places of the values, where these are to be seen one by one
    zero, limit : heights of these values, None where they are not in the plot
    """

    title: str
    x_label: str
    y_label: str
    names: tuple[str, ...]
    lines: tuple[str, ...]
    band: str
    marks: tuple[tuple[float, float], ...]
    x_ticks: tuple[Tick, ...]
    y_ticks: tuple[Tick, ...]
    zero: float | None
    limit: float | None
    width: int = WIDTH
    height: int = HEIGHT
    left: int = LEFT
    right: int = WIDTH - RIGHT
    top: int = TOP
    bottom: int = HEIGHT - BOTTOM


def lay_out(
    title: str,
    x_label: str,
    y_label: str,
    places: Values,
    curves: Sequence[Curve],
    *,
    band: tuple[Values, Values] | None = None,
    limit: float | None = None,
    marked: bool = False,
) -> Plot:
    """A plot of curves over common places.

    Parameters
    ----------
    places : ascending x values; at least one
    band : lowest and highest values of a range at each place
    limit : a value that is drawn as a line across, and kept in view
    marked : each value has a mark
    """
    shown = [v for curve in curves for v in curve.values] + [v for ends in band or () for v in ends]
    low, high = _range([*shown, *([] if limit is None else [limit])])
    start, end = _widened(min(places), max(places))
    across = _Axis(start, end, LEFT, WIDTH - RIGHT)
    up = _Axis(low, high, HEIGHT - BOTTOM, TOP)
    xs = [across.at(x) for x in places]
    return Plot(
        title,
        x_label,
        y_label,
        tuple(curve.name for curve in curves),
        tuple(_points(zip(xs, map(up.at, c.values), strict=True)) for c in curves),
        "" if band is None else _points(_around(xs, *(list(map(up.at, ends)) for ends in band))),
        tuple((x, up.at(v)) for c in curves for x, v in zip(xs, c.values, strict=True))
        if marked
        else (),
        across.ticks(),
        up.ticks(),
        up.at(0.0) if low <= 0.0 <= high else None,
        None if limit is None else up.at(limit),
    )


def _around(xs: list[float], low: list[float], high: list[float]) -> Iterator[tuple[float, float]]:
    """The outline of a band: there along its upper edge, back along its lower one."""
    yield from zip(xs, high, strict=True)
    yield from zip(reversed(xs), reversed(low), strict=True)


def _points(places: Iterable[tuple[float, float]]) -> str:
    return " ".join(f"{x:g},{y:g}" for x, y in places)


@dataclass(frozen=True)
class _Axis:
    """Values from low to high onto lengths from start to end."""

    low: float
    high: float
    start: float
    end: float

    def at(self, value: float) -> float:
        part = (value - self.low) / (self.high - self.low)
        return round(self.start + part * (self.end - self.start), 2)

    def ticks(self) -> tuple[Tick, ...]:
        values = round_ticks(self.low, self.high, TICKS)
        return tuple(
            Tick(self.at(v), text) for v, text in zip(values, show_all(values), strict=True)
        )


def _range(values: Values) -> tuple[float, float]:
    """From zero, or from below it, to the largest value: a stress is read against zero."""
    return _widened(min([0.0, *values]), max([0.0, *values]))


def _widened(low: float, high: float) -> tuple[float, float]:
    return (low, high) if high > low else (low, low + 1.0)

"""A quantity along a line as curves over the distance, one for each case; a key names them.

Curves differ by dash as well as by colour, so that a grey print tells them apart. Where there are
more states than can be told apart, those with the highest values are named and the others stand
behind them, thin and grey.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.numbers import round_ticks, show, show_all
from workers.outputs.drawing.page import LABEL_SIZE
from workers.outputs.drawing.palette import FAINT, HAIRLINE, INK
from workers.outputs.drawing.view import Box

Array = NDArray[np.floating[Any]]

# Colour and dash, on and off [pixels]; dark enough on paper, far apart in lightness or pattern.
PENS: tuple[tuple[str, tuple[float, ...] | None], ...] = (
    (INK, None),
    ("#a8330f", (16, 7)),
    ("#0d5c63", (4, 5)),
    ("#8a5a00", (22, 6, 4, 6)),
    ("#4b3b8f", (10, 4, 2, 4, 2, 4)),
    ("#5b6670", (30, 9)),
)
WIDTH = 3.2  # of a named curve [pixels]
KEY_SAMPLE = 64  # length of the piece of line in the key
KEY_LINE = 1.2 * LABEL_SIZE
KEY_ENTRY = 2 * KEY_LINE + 16  # height: name and peak
TICKS = 6
SLIGHT = 0.2  # of a step
HEADING = 1.6 * LABEL_SIZE  # height above a panel
AXIS = 2.7 * LABEL_SIZE  # height below the lowest panel: numbers and what they are


@dataclass(frozen=True, eq=False)
class Panel:
    """One quantity of all states over the same distances.

    heading : what it is, with its unit
    values : (s, n) for s states at n points
    """

    heading: str
    values: Array


def draw_graph(
    canvas: Canvas,
    room: Box,
    distance: Array,
    panels: Sequence[Panel],
    names: Sequence[str],
    *,
    along: str,
    unit: str,
    rounding: float,
) -> None:
    """Panels above each other, the key at their right.

    Parameters
    ----------
    distance : (n,) ascending
    names : (s,) of the states; those of highest magnitude in the first panel get a pen
    along : what the distance is, with its unit
    unit : of the peaks in the key, which are those of the first panel
    rounding : values below it are nothing but rounding
    """
    order = np.argsort(-np.abs(panels[0].values).max(axis=1), kind="stable")
    named, others = order[: len(PENS)], order[len(PENS) :]
    entries = [_entry(names[row], distance, panels[0].values[row], unit) for row in named]
    key = _key_width(canvas, entries)
    margin = max(_number_width(canvas, panel, rounding) for panel in panels)
    inner = room.inset(margin + 16, AXIS, key + 30, 0)
    height = inner.height / len(panels)
    for number, panel in enumerate(panels):
        top = inner.top - number * height
        frame = Box(inner.left, top - height + 10, inner.right, top - HEADING)
        _draw_panel(canvas, frame, distance, panel, named, others, rounding)
    _draw_distances(canvas, frame, distance, along)
    _draw_key(canvas, inner.right + 30, inner.top - HEADING, key, entries, len(others))


def _draw_panel(
    canvas: Canvas,
    frame: Box,
    distance: Array,
    panel: Panel,
    named: NDArray[np.intp],
    others: NDArray[np.intp],
    rounding: float,
) -> None:
    low, high = _range(panel.values, rounding)
    left = (frame.left - 2, frame.top + 0.55 * HEADING)
    canvas.text(left, panel.heading, LABEL_SIZE, colour=INK)
    ticks = round_ticks(low, high, TICKS)
    for value, text in zip(ticks, show_all(ticks), strict=True):
        at = frame.bottom + frame.height * (value - low) / (high - low)
        ends = [(frame.left, at), (frame.right, at)]
        canvas.line(ends, *((HAIRLINE, 0.9) if value else (FAINT, 1.6)))
        canvas.text((frame.left - 12, at), text, LABEL_SIZE, colour=INK, align="right")
    for at in _distance_ticks(distance):
        x = _across(frame, distance, at)
        canvas.line([(x, frame.bottom), (x, frame.top)], HAIRLINE, 0.9)
    x = _across(frame, distance, distance)
    y = frame.bottom + frame.height * (panel.values - low) / (high - low)
    for row in others:
        canvas.line(np.column_stack((x, y[row])), FAINT, 1.0, alpha=0.35)
    for row, (colour, dash) in reversed(list(zip(named, PENS, strict=False))):
        canvas.line(np.column_stack((x, y[row])), colour, WIDTH, dash=dash)


def _range(values: Array, rounding: float) -> tuple[float, float]:
    """Whole steps around all values, zero included; a little beyond zero asks for no step."""
    low, high = min(float(values.min()), 0.0), max(float(values.max()), 0.0)
    if high - low <= rounding:
        return 0.0, 1.0
    step = np.diff(round_ticks(low - (high - low), high + (high - low), 3 * TICKS)).min()
    low = low if low > -SLIGHT * step else float(np.floor(low / step) * step)
    high = high if high < SLIGHT * step else float(np.ceil(high / step) * step)
    return low, high


def _number_width(canvas: Canvas, panel: Panel, rounding: float) -> float:
    texts = show_all(round_ticks(*_range(panel.values, rounding), TICKS))
    return max(canvas.measure(text, LABEL_SIZE)[0] for text in texts)


# --- the distance ---------------------------------------------------------------------------------


def _across(frame: Box, distance: Array, at: Any) -> Any:
    return frame.left + frame.width * (at - distance[0]) / (distance[-1] - distance[0])


def _distance_ticks(distance: Array) -> list[float]:
    return round_ticks(float(distance[0]), float(distance[-1]))


def _draw_distances(canvas: Canvas, frame: Box, distance: Array, along: str) -> None:
    ticks = _distance_ticks(distance)
    y = frame.bottom - 0.9 * LABEL_SIZE
    for at, text in zip(ticks, show_all(ticks), strict=True):
        x = _across(frame, distance, at)
        canvas.line([(x, frame.bottom), (x, frame.bottom - 7)], FAINT, 1.6)
        canvas.text((x, y), text, LABEL_SIZE, colour=INK, align="centre")
    middle = ((frame.left + frame.right) / 2, y - 1.3 * LABEL_SIZE)
    shown = canvas.fit(along, LABEL_SIZE, frame.width)
    canvas.text(middle, shown, LABEL_SIZE, colour=INK, align="centre")


# --- the key --------------------------------------------------------------------------------------


def _entry(name: str, distance: Array, values: Array, unit: str) -> tuple[str, str]:
    """A name, and the value of largest magnitude with where it is."""
    peak = int(np.abs(values).argmax())
    return name, f"{show(float(values[peak]))} {unit} at {show(float(distance[peak]))}"


def _key_width(canvas: Canvas, entries: Sequence[tuple[str, str]]) -> float:
    widest = max(canvas.measure(text, LABEL_SIZE)[0] for entry in entries for text in entry)
    return min(widest + KEY_SAMPLE + 14, 440.0)


def _draw_key(
    canvas: Canvas,
    left: float,
    top: float,
    width: float,
    entries: Sequence[tuple[str, str]],
    others: int,
) -> None:
    y, indent = top - 0.5 * KEY_LINE, KEY_SAMPLE + 14
    for (name, peak), (colour, dash) in zip(entries, PENS, strict=False):
        canvas.line([(left, y), (left + KEY_SAMPLE, y)], colour, WIDTH, dash=dash)
        for text, ink in ((name, INK), (peak, FAINT)):
            shown = canvas.fit(text, LABEL_SIZE, width - indent)
            canvas.text((left + indent, y), shown, LABEL_SIZE, colour=ink)
            y -= KEY_LINE
        y -= KEY_ENTRY - 2 * KEY_LINE
    if others:
        canvas.line([(left, y), (left + KEY_SAMPLE, y)], FAINT, 1.0, alpha=0.6)
        canvas.text((left + indent, y), f"{others} lower", LABEL_SIZE, colour=FAINT)

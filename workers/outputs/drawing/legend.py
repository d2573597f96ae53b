"""The legend of a painted field: which colour is which value, with the isolines that are drawn."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.numbers import round_ticks, show_all
from workers.outputs.drawing.page import LABEL_SIZE
from workers.outputs.drawing.palette import DIVERGING, FAINT, INK, SEQUENTIAL
from workers.outputs.drawing.view import Box

BAR = 34  # thickness [pixels]
NEGATIVE_DASH = (9.0, 6.0)
ISOLINE = 1.3  # width [pixels]


@dataclass(frozen=True, eq=False)
class Scale:
    """Values to colours.

    low, high : the range that the legend shows
    colours : (c, 3) uint8
    reach : the range that the whole table of colours spans; symmetric about zero if diverging
    """

    low: float
    high: float
    colours: NDArray[np.uint8]
    reach: tuple[float, float]

    @classmethod
    def sequential(cls, low: float, high: float) -> "Scale":
        return cls(low, high, SEQUENTIAL, (low, high))

    @classmethod
    def diverging(cls, low: float, high: float) -> "Scale":
        largest = max(abs(low), abs(high))
        return cls(low, high, DIVERGING, (-largest, largest))

    @property
    def ticks(self) -> list[float]:
        return round_ticks(self.low, self.high)

    def band(self, count: int) -> NDArray[np.uint8]:
        """Colours at `count` even steps from low to high, (count, 3)."""
        values = np.linspace(self.low, self.high, count)
        start, end = self.reach
        at = (values - start) / (end - start) * (len(self.colours) - 1)
        return self.colours[np.round(at).astype(int)]


def draw_legend(
    canvas: Canvas, room: Box, scale: Scale, heading: Sequence[str], upright: bool
) -> None:
    """Draw the legend into its room; an upright one at the right of a tall plate, else below."""
    if upright:
        _draw_upright(canvas, room, scale, heading)
    else:
        _draw_lying(canvas, room, scale, heading)


def legend_size(canvas: Canvas, scale: Scale, heading: Sequence[str], upright: bool) -> float:
    """The width that an upright legend needs, the height that a lying one needs [pixels]."""
    if not upright:
        return BAR + 3.4 * LABEL_SIZE
    texts = show_all(scale.ticks)
    widest = max((canvas.measure(text, LABEL_SIZE)[0] for text in texts), default=0.0)
    titles = max((canvas.measure(line, LABEL_SIZE)[0] for line in heading), default=0.0)
    return max(BAR + 22 + widest, titles) + 4


def _draw_upright(canvas: Canvas, room: Box, scale: Scale, heading: Sequence[str]) -> None:
    y = room.top - 0.6 * LABEL_SIZE
    for line in heading:
        canvas.text((room.left, y), line, LABEL_SIZE, colour=INK)
        y -= 1.25 * LABEL_SIZE
    bottom, top = room.bottom + 16, y
    height = round(top - bottom)
    column = scale.band(height)[::-1, None]
    canvas.image((room.left, bottom), np.repeat(column, BAR, axis=1))
    frame = Box(round(room.left), round(bottom), round(room.left) + BAR, round(bottom) + height)
    _frame(canvas, frame)
    for value, text in zip(scale.ticks, show_all(scale.ticks), strict=True):
        at = frame.bottom + height * (value - scale.low) / (scale.high - scale.low)
        _tick(canvas, [(frame.left, at), (frame.right, at)], value)
        canvas.line([(frame.right, at), (frame.right + 9, at)], INK, 1.5)
        canvas.text((frame.right + 16, at), text, LABEL_SIZE, colour=INK)


def _draw_lying(canvas: Canvas, room: Box, scale: Scale, heading: Sequence[str]) -> None:
    title = " ".join(heading)
    canvas.text(
        ((room.left + room.right) / 2, room.top - 0.6 * LABEL_SIZE),
        title, LABEL_SIZE, colour=INK, align="centre",
    )  # fmt: skip
    width, top = round(room.width), room.top - 1.35 * LABEL_SIZE
    canvas.image((room.left, top - BAR), np.repeat(scale.band(width)[None], BAR, axis=0))
    frame = Box(
        round(room.left), round(top - BAR), round(room.left) + width, round(top - BAR) + BAR
    )
    _frame(canvas, frame)
    for value, text in zip(scale.ticks, show_all(scale.ticks), strict=True):
        at = frame.left + width * (value - scale.low) / (scale.high - scale.low)
        _tick(canvas, [(at, frame.bottom), (at, frame.top)], value)
        canvas.line([(at, frame.bottom), (at, frame.bottom - 9)], INK, 1.5)
        below = (at, frame.bottom - 9 - 0.75 * LABEL_SIZE)
        canvas.text(below, text, LABEL_SIZE, colour=INK, align="centre")


def _frame(canvas: Canvas, box: Box) -> None:
    corners = [
        (box.left, box.bottom), (box.right, box.bottom), (box.right, box.top), (box.left, box.top),
    ]  # fmt: skip
    canvas.line(corners, FAINT, 1.5, closed=True)


def _tick(canvas: Canvas, ends: list[tuple[float, float]], value: float) -> None:
    """The isoline of a value as it crosses the bar."""
    draw_isoline(canvas, np.array(ends), value)


def draw_isoline(canvas: Canvas, points: NDArray[np.floating[Any]], value: float) -> None:
    """Solid where the value is positive, dashed where negative, so that a grey print tells them.

    None at zero: along a free edge a principal stress is zero up to its error, and the line would
    wander.
    """
    if value != 0:
        dash = NEGATIVE_DASH if value < 0 else None
        canvas.line(points, INK, ISOLINE, dash=dash, alpha=0.55)

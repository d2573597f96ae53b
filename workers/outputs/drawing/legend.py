"""The legend of a painted field: which colour is which value, with the isolines that are drawn."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.numbers import round_ticks, show, show_all
from workers.outputs.drawing.page import LABEL_SIZE
from workers.outputs.drawing.palette import DIVERGING, FAINT, INK, SEQUENTIAL
from workers.outputs.drawing.view import Box

BAR = 34  # thickness [pixels]
POINT = 20  # length of the point at an end that values go beyond
NEGATIVE_DASH = (9.0, 6.0)
ISOLINE = 1.3  # width [pixels]


@dataclass(frozen=True, eq=False)
class Scale:
    """Values to colours.

    low, high : the range that the legend shows
    colours : (c, 3) uint8
    reach : the range that the whole table of colours spans; symmetric about zero if diverging
    lowest, highest : how far the field goes beyond the range, in the colours of its ends; None
        where it stays within
    """

    low: float
    high: float
    colours: NDArray[np.uint8]
    reach: tuple[float, float]
    lowest: float | None = None
    highest: float | None = None

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

    def of_field(self, low: float, high: float) -> "Scale":
        """The scale for a field between two values, which may go beyond it."""
        slack = 1e-6 * (self.high - self.low)
        lowest = low if low < self.low - slack else None
        highest = high if high > self.high + slack else None
        return replace(self, lowest=lowest, highest=highest)

    @property
    def texts(self) -> list[str]:
        return show_all(self.ticks)

    @property
    def beyond(self) -> list[str]:
        """What is said of an end that values go beyond."""
        low = [] if self.lowest is None else [f"to {show(self.lowest)}"]
        return low if self.highest is None else [*low, f"to {show(self.highest)}"]

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
    widest = _widest(canvas, [*scale.texts, *scale.beyond])
    return max(BAR + 22 + widest, _widest(canvas, heading)) + 4


def _widest(canvas: Canvas, texts: Sequence[str]) -> float:
    return max((canvas.measure(text, LABEL_SIZE)[0] for text in texts), default=0.0)


def _draw_upright(canvas: Canvas, room: Box, scale: Scale, heading: Sequence[str]) -> None:
    y = room.top - 0.6 * LABEL_SIZE
    for line in heading:
        canvas.text((room.left, y), line, LABEL_SIZE, colour=INK)
        y -= 1.25 * LABEL_SIZE
    spare = 1.5 * LABEL_SIZE  # for the point of an end and its text
    bottom = room.bottom + (16 if scale.lowest is None else spare)
    top = y if scale.highest is None else y - spare
    height = round(top - bottom)
    column = scale.band(height)[::-1, None]
    canvas.image((room.left, bottom), np.repeat(column, BAR, axis=1))
    frame = Box(round(room.left), round(bottom), round(room.left) + BAR, round(bottom) + height)
    _frame(canvas, frame)
    middle = (frame.left + frame.right) / 2
    for low, end, text in _ends(scale):
        foot, way = (frame.bottom, -1) if low else (frame.top, 1)
        corners = [(frame.left, foot), (frame.right, foot), (middle, foot + way * POINT)]
        _point(canvas, corners, end)
        beside = (frame.right + 16, foot + way * 0.95 * LABEL_SIZE)
        canvas.text(beside, text, LABEL_SIZE, colour=INK)
    for value, text in zip(scale.ticks, scale.texts, strict=True):
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
    spare = POINT + 12 + _widest(canvas, scale.beyond)  # for the point of an end and its text
    left = room.left + (0 if scale.lowest is None else spare)
    right = room.right - (0 if scale.highest is None else spare)
    width, top = round(right - left), room.top - 1.35 * LABEL_SIZE
    canvas.image((left, top - BAR), np.repeat(scale.band(width)[None], BAR, axis=0))
    frame = Box(round(left), round(top - BAR), round(left) + width, round(top - BAR) + BAR)
    _frame(canvas, frame)
    middle = (frame.bottom + frame.top) / 2
    for low, end, text in _ends(scale):
        foot, way = (frame.left, -1) if low else (frame.right, 1)
        corners = [(foot, frame.bottom), (foot, frame.top), (foot + way * POINT, middle)]
        _point(canvas, corners, end)
        beside = (foot + way * (POINT + 10), middle)
        canvas.text(beside, text, LABEL_SIZE, colour=INK, align="right" if low else "left")
    for value, text in zip(scale.ticks, scale.texts, strict=True):
        at = frame.left + width * (value - scale.low) / (scale.high - scale.low)
        _tick(canvas, [(at, frame.bottom), (at, frame.top)], value)
        canvas.line([(at, frame.bottom), (at, frame.bottom - 9)], INK, 1.5)
        below = (at, frame.bottom - 9 - 0.75 * LABEL_SIZE)
        canvas.text(below, text, LABEL_SIZE, colour=INK, align="centre")


def _ends(scale: Scale) -> Iterator[tuple[bool, NDArray[np.uint8], str]]:
    """The ends that values go beyond: whether it is the lower, its colour, what is said of it."""
    first, last = scale.band(2)
    if scale.lowest is not None:
        yield True, first, scale.beyond[0]
    if scale.highest is not None:
        yield False, last, scale.beyond[-1]


def _point(canvas: Canvas, corners: Sequence[tuple[float, float]], end: NDArray[np.uint8]) -> None:
    canvas.area(corners, "#" + bytes(end).hex())
    canvas.line(corners, FAINT, 1.5, closed=True)


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

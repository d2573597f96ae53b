"""Labels that find their own place: near what they name, on nothing else.

What is already drawn is read back from the canvas, so nobody keeps a list of it. A label tries
many places around its anchor and takes the cheapest: ink under it costs most, then what its leader
crosses, then distance.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from workers.outputs.drawing.canvas import Align, Canvas
from workers.outputs.drawing.page import LABEL_SIZE
from workers.outputs.drawing.palette import INK, PAPER
from workers.outputs.drawing.view import Box

Array = NDArray[np.floating[Any]]

CELL = 4  # the canvas is looked at in squares of so many pixels
PADDING = 5  # kept free around a label
DISTANCES = (12, 20, 30, 42, 56, 72, 90, 110, 135, 165, 200, 250, 310, 380, 470, 580)
ANGLES = np.radians(np.arange(0, 360, 11.25))
SAMPLES = 24  # points of a leader at which it is looked for crossings
SHORT_LINE = 12  # letters; not worth breaking
LINE = 1.22  # distance of lines over the size of the text
LEADER_FROM = 10  # a gap between label and anchor that needs a line to bridge it [pixels]

# Costs; distance costs 1 per pixel.
ON_INK, ON_PLATE = 40.0, 1.0  # per cell under the label
CROSSING_INK, CROSSING_PLATE = 10.0, 0.6  # per pixel of leader
OUTSIDE = 100.0  # per pixel
CUT = 80.0  # for each line that does not fit whole
WRONG_WAY = 45.0  # for going away from the wanted direction, twice that for the opposite
LEFT: Align = "left"
RIGHT: Align = "right"


@dataclass(frozen=True, eq=False)
class Label:
    """What is to be said at a place.

    anchor : (2,) pixels
    layouts : the same text broken into lines in different ways, the preferred one first
    toward : the direction in which the label should rather go
    covering : whether it may stand on its anchor
    """

    anchor: Array
    layouts: Sequence[Sequence[str]]
    colour: str = INK
    bold: bool = False
    toward: Array | None = None
    covering: bool = False


def layouts(name: str, lines: Sequence[str]) -> list[list[str]]:
    """A name and what there is to say of it: behind the name, below it, and narrower still."""
    head = [f"{name}:"] if name else []
    below = [*head, *lines]
    narrow = [part for line in below for part in _halves(line)]
    beside = [f"{name}: {lines[0]}", *lines[1:]] if name and lines else below
    return [beside, below, narrow]


def _halves(line: str) -> list[str]:
    """A long line broken near its middle, but not inside brackets or an equation."""
    blanks = [
        number
        for number, c in enumerate(line)
        if c == " " and line[:number].count("(") == line[:number].count(")")
        and "=" not in (line[number - 1], line[number + 1])
    ]  # fmt: skip
    if len(line) <= SHORT_LINE or not blanks:
        return [line]
    at = min(blanks, key=lambda number: abs(number - len(line) / 2))
    return [line[:at], line[at + 1 :]]


@dataclass(frozen=True, eq=False)
class _Places:
    """Candidate boxes of a label: lower left and upper right corners (c, 2) [pixels]."""

    low: Array
    high: Array

    @property
    def middle(self) -> Array:
        return (self.low + self.high) / 2


class _Marked:
    """Cells of the picture that are marked, with a table of their running sums."""

    def __init__(self, cells: NDArray[np.bool_]) -> None:
        self._cells = cells
        self._sums = np.zeros((cells.shape[0] + 1, cells.shape[1] + 1), np.int32)
        self._sums[1:, 1:] = cells.cumsum(axis=0, dtype=np.int32).cumsum(axis=1)

    def with_box(self, box: Box) -> "_Marked":
        cells = self._cells.copy()
        rows = slice(max(0, int(box.bottom // CELL)), int(box.top // CELL) + 1)
        columns = slice(max(0, int(box.left // CELL)), int(box.right // CELL) + 1)
        cells[rows, columns] = True
        return _Marked(cells)

    def under(self, places: _Places) -> Array:
        """How many marked cells lie under each box, (c,)."""
        limit = np.array(self._cells.shape[::-1])
        low = np.clip(((places.low - PADDING) // CELL).astype(int), 0, limit)
        high = np.clip(((places.high + PADDING) // CELL).astype(int) + 1, 0, limit)
        (x0, y0), (x1, y1) = low.T, high.T
        sums = self._sums
        return (sums[y1, x1] - sums[y0, x1] - sums[y1, x0] + sums[y0, x0]).astype(float)

    def part_of(self, points: Array) -> Array:
        """The part of each column of points (s, c, 2) that is marked, (c,)."""
        cells = (points // CELL).astype(int)
        rows = np.clip(cells[..., 1], 0, self._cells.shape[0] - 1)
        columns = np.clip(cells[..., 0], 0, self._cells.shape[1] - 1)
        return np.asarray(self._cells[rows, columns].mean(axis=0))


class Labels:
    """Places labels on a canvas, inside a box. Make it when all else is drawn.

    paper : (height, width, 3) uint8, what is painted below the canvas
    """

    def __init__(self, canvas: Canvas, room: Box, paper: NDArray[np.uint8]) -> None:
        self._canvas, self._room = canvas, room
        self._ink = _Marked(_any_in_cell(canvas.pixels()[..., 3] > 24))
        painted = (paper[..., 0] < 250) | (paper[..., 1] < 250) | (paper[..., 2] < 250)
        self._plate = _Marked(_any_in_cell(painted))

    def place(self, label: Label) -> Box:
        """Draw a label where it costs least and say where it went."""
        chosen, cheapest = None, np.inf
        for rank, layout in enumerate(label.layouts):
            lines = [self._canvas.fit(line, LABEL_SIZE, self._room.width) for line in layout]
            extent = self._extent(lines, label.bold)
            places = self._candidates(label, extent)
            cut = sum(line != whole for line, whole in zip(lines, layout, strict=True))
            cost = self._costs(places, label) + 4.0 * rank + CUT * cut
            best = int(np.argmin(cost))
            if cost[best] < cheapest:
                box = Box(*map(float, (*places.low[best], *places.high[best])))
                chosen, cheapest = (box, lines), cost[best]
        if chosen is None:
            raise ValueError("a label without text")
        box, lines = chosen
        self._draw(label, box, lines)
        self._ink = self._ink.with_box(box)
        return box

    def _extent(self, lines: Sequence[str], bold: bool) -> Array:
        widths = [self._canvas.measure(line, LABEL_SIZE, bold=bold)[0] for line in lines]
        return np.array([max(widths), LINE * LABEL_SIZE * len(lines)])

    def _candidates(self, label: Label, extent: Array) -> _Places:
        direction = np.column_stack((np.cos(ANGLES), np.sin(ANGLES)))
        distance = np.array(DISTANCES, float)[:, None, None]
        # The side of the box that faces the anchor lies at about this distance from it.
        middle: Array = (label.anchor + direction * (distance + extent / 2)).reshape(-1, 2)
        if label.covering:
            middle = np.vstack((label.anchor, middle))
        half = extent / 2
        room_low = np.array([self._room.left, self._room.bottom])
        room_high = np.array([self._room.right, self._room.top])
        inside = ((middle - half >= room_low) & (middle + half <= room_high)).all(axis=1)
        if not inside.any():
            lowest = room_low + half
            middle = np.clip(label.anchor, lowest, np.maximum(lowest, room_high - half))[None]
            inside = np.ones(1, bool)
        return _Places(middle[inside] - half, middle[inside] + half)

    def _costs(self, places: _Places, label: Label) -> Array:
        ends = _facing(places, label.anchor)
        gap = np.linalg.norm(ends - label.anchor, axis=1)
        steps = np.linspace(0.08, 1.0, SAMPLES)[:, None, None]
        along = label.anchor + steps * (ends - label.anchor)
        crossed = CROSSING_INK * self._ink.part_of(along)
        crossed += CROSSING_PLATE * self._plate.part_of(along)
        outside = np.maximum(0.0, places.high - [self._room.right, self._room.top]).sum(axis=1)
        cost = gap + gap * crossed + ON_INK * self._ink.under(places) + OUTSIDE * outside
        if not label.covering:
            cost += ON_PLATE * self._plate.under(places)
        if label.toward is not None:
            way = places.middle - label.anchor
            way = way / np.maximum(np.linalg.norm(way, axis=1), 1e-9)[:, None]
            cost = cost + WRONG_WAY * (1.0 - way @ label.toward)
        return cost

    def _draw(self, label: Label, box: Box, lines: Sequence[str]) -> None:
        canvas, at = self._canvas, label.anchor
        end = _facing(_Places(*np.array(box).reshape(2, 1, 2)), at)[0]
        gap = np.linalg.norm(end - at)
        if gap > (0 if label.covering else LEADER_FROM):
            canvas.line([at, end], label.colour, 1.5, alpha=0.8)
            if label.covering:  # what it names is under the dot, not under the label
                canvas.disc(at, 4.5, fill=label.colour, edge=label.colour, width=1)
        canvas.box((box.left - 4, box.bottom), (box.right + 4, box.top), PAPER, alpha=0.82)
        x, align = (box.right, RIGHT) if box.right < at[0] else (box.left, LEFT)
        for number, line in enumerate(lines):
            y = box.top - (number + 0.5) * LINE * LABEL_SIZE
            canvas.text((x, y), line, LABEL_SIZE, colour=label.colour, bold=label.bold, align=align)


def _facing(places: _Places, at: ArrayLike) -> Array:
    """The point of each box (with a little air around it) that is nearest to the anchor."""
    air = np.array([6.0, -2.0])
    return np.clip(np.asarray(at, float), places.low - air, places.high + air)


def _any_in_cell(marked: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Cells of the picture in which anything is marked, bottom row first."""
    height, width = (n // CELL for n in marked.shape)
    upward = marked[::-1][: height * CELL, : width * CELL]
    return np.asarray(upward.reshape(height, CELL, width, CELL).any(axis=(1, 3)))

"""Labels that find their own place: near what they name, on nothing else.

What is already drawn is read back from the canvas, so nobody keeps a list of it. A label tries
places around its anchor, nearest first, and takes the cheapest: ink under it costs most, then ink
under its leader, then distance.
"""

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from workers.outputs.drawing.canvas import Align, Canvas
from workers.outputs.drawing.page import LABEL_SIZE
from workers.outputs.drawing.palette import INK, PAPER
from workers.outputs.drawing.view import Box

CELL = 4  # the canvas is looked at in squares of so many pixels
PADDING = 5
DISTANCES = (24, 40, 60, 85, 115, 150, 190, 240, 300, 380, 480, 600)
ANGLES = np.radians(np.arange(0, 360, 22.5))
PAINTED = 0.03  # a painted plate may lie under a label rather than other ink
INK_COST, LEADER_COST = 40.0, 12.0
LEFT: Align = "left"
RIGHT: Align = "right"
LINE = 1.22  # distance of lines over the size of the text
LEADER_FROM = 14  # a gap between label and anchor that needs a line to bridge it


class Labels:
    """Places labels on a canvas, inside a box. Make it when all else is drawn.

    paper : (height, width, 3) uint8, what is painted below the canvas
    """

    def __init__(self, canvas: Canvas, room: Box, paper: NDArray[np.uint8]) -> None:
        self._canvas, self._room = canvas, room
        inked = canvas.pixels()[..., 3] > 24
        painted = (paper[..., 0] < 250) | (paper[..., 1] < 250) | (paper[..., 2] < 250)
        self._ink: NDArray[np.float64] = np.maximum(
            _any_in_cell(inked), PAINTED * _any_in_cell(painted)
        )

    def place(
        self,
        anchor: ArrayLike,
        lines: Sequence[str],
        *,
        colour: str = INK,
        size: float = LABEL_SIZE,
        bold: bool = False,
        toward: ArrayLike | None = None,
    ) -> Box:
        """Draw a label of one or more lines near its anchor [pixels] and say where it went.

        toward : the direction in which the label should rather go
        """
        at = np.asarray(anchor, float)
        widths = [self._canvas.measure(line, size, bold=bold)[0] for line in lines]
        extent = np.array([max(widths), LINE * size * len(lines)])
        wanted = None if toward is None else _unit(np.asarray(toward, float))
        box = min(self._candidates(at, extent), key=lambda b: self._cost(b, at, wanted))
        self._draw_leader(box, at, colour)
        self._draw_lines(box, lines, right=box.right < at[0], colour=colour, size=size, bold=bold)
        rows, columns = self._cells(box, 0)
        self._ink[rows, columns] = 1.0
        return box

    def _candidates(self, at: NDArray, extent: NDArray) -> list[Box]:
        found = []
        for distance in DISTANCES:
            for angle in ANGLES:
                direction = np.array([np.cos(angle), np.sin(angle)])
                # The nearest point of the box lies at about this distance from the anchor.
                middle = at + direction * distance + np.sign(np.round(direction, 3)) * extent / 2
                low, high = middle - extent / 2, middle + extent / 2
                box = Box(*low, *high)
                if self._inside(box):
                    found.append(box)
        return found or [self._pushed_inside(at, extent)]

    def _inside(self, box: Box) -> bool:
        room = self._room
        return (
            box.left >= room.left
            and box.right <= room.right
            and box.bottom >= room.bottom
            and box.top <= room.top
        )

    def _pushed_inside(self, at: NDArray, extent: NDArray) -> Box:
        room = self._room
        low = np.array([room.left, room.bottom])
        high = np.maximum(low, np.array([room.right, room.top]) - extent)
        corner = np.clip(at, low, high)
        return Box(*corner, *(corner + extent))

    def _cells(self, box: Box, padding: float) -> tuple[slice, slice]:
        rows = slice(
            max(0, int((box.bottom - padding) // CELL)), int((box.top + padding) // CELL) + 1
        )
        columns = slice(
            max(0, int((box.left - padding) // CELL)), int((box.right + padding) // CELL) + 1
        )
        return rows, columns

    def _cost(self, box: Box, at: NDArray, wanted: NDArray | None) -> float:
        rows, columns = self._cells(box, PADDING)
        end = _nearest(box, at)
        gap = float(np.linalg.norm(end - at))
        steps = np.linspace(0.1, 0.95, max(2, int(gap // 8)))[:, None]
        cells = ((at + steps * (end - at)) // CELL).astype(int)
        crossed = self._ink[
            np.clip(cells[:, 1], 0, len(self._ink) - 1),
            np.clip(cells[:, 0], 0, self._ink.shape[1] - 1),
        ].sum()
        cost = INK_COST * self._ink[rows, columns].sum() + LEADER_COST * crossed + gap
        if wanted is not None:
            middle = np.array([box.left + box.right, box.bottom + box.top]) / 2
            cost += 60.0 * (1.0 - float(_unit(middle - at) @ wanted))
        return float(cost)

    def _draw_leader(self, box: Box, at: NDArray, colour: str) -> None:
        end = _nearest(box, at)
        if np.linalg.norm(end - at) > LEADER_FROM:
            self._canvas.line([at, end], colour, 1.5, alpha=0.8)
        self._canvas.box((box.left - 4, box.bottom), (box.right + 4, box.top), PAPER, alpha=0.82)

    def _draw_lines(
        self, box: Box, lines: Sequence[str], *, right: bool, colour: str, size: float, bold: bool
    ) -> None:
        x, align = (box.right, RIGHT) if right else (box.left, LEFT)
        for number, line in enumerate(lines):
            y = box.top - (number + 0.5) * LINE * size
            self._canvas.text((x, y), line, size, colour=colour, bold=bold, align=align)


def _any_in_cell(marked: NDArray[np.bool_]) -> NDArray[np.float64]:
    """Cells of the picture in which anything is marked, bottom row first."""
    height, width = (n // CELL for n in marked.shape)
    upward = marked[::-1][: height * CELL, : width * CELL]
    return upward.reshape(height, CELL, width, CELL).any(axis=(1, 3)).astype(float)


def _nearest(box: Box, at: NDArray) -> NDArray:
    """The point of the box (with a little air around it) that is nearest to the anchor."""
    low = np.array([box.left - 6, box.bottom + 2])
    high = np.array([box.right + 6, box.top - 2])
    return np.clip(at, low, high)


def _unit(v: NDArray) -> NDArray:
    length = float(np.linalg.norm(v))
    return v / length if length else v

"""What acts on the whole plate or on a region: listed with small signs above the drawing."""

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.job import Acceleration, BodyForce, Job, Spin, TemperatureChange
from workers.outputs.drawing.acting import Acting
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.load_values import describe, target_name
from workers.outputs.drawing.page import LABEL_SIZE
from workers.outputs.drawing.palette import LOAD, PAPER
from workers.outputs.drawing.symbols import block_arrow, turning_arrow, unit
from workers.outputs.drawing.view import View

Array = NDArray[np.floating[Any]]

BODY = (Acceleration, BodyForce, Spin, TemperatureChange)
ROW = 1.4 * LABEL_SIZE  # height of a line of the list [pixels]
MOST_ROWS = 5


def draw_body_loads(
    canvas: Canvas, job: Job, view: View, acting: Sequence[Acting], corner: tuple[float, float]
) -> None:
    """List what acts on the whole plate or a region, one row each, from the upper left corner."""
    x, y = corner
    for row, one in enumerate(listed(acting)):
        middle = np.array([x + 22.0, y - (row + 0.5) * ROW])
        _draw_sign(canvas, one, middle)
        where = target_name(one.load)
        text = f"{describe(one.load, one.factor, job.units)}" + (f", {where}" if where else "")
        canvas.text((x + 58, middle[1]), text, LABEL_SIZE, colour=LOAD)
        if isinstance(one.load, Spin):
            centre = view.pixels(one.load.about)
            turning_arrow(canvas, centre, 26, LOAD, clockwise=one.load.speed < 0)
            canvas.disc(centre, 4, fill=LOAD, edge=LOAD, width=1)
    left_out = len(body_loads(acting)) - MOST_ROWS
    if left_out > 0:
        last = y - (MOST_ROWS + 0.5) * ROW
        canvas.text((x + 58, last), f"and {left_out} more", LABEL_SIZE, colour=LOAD)


def body_loads(acting: Iterable[Acting]) -> list[Acting]:
    return [one for one in acting if isinstance(one.load, BODY)]


def listed(acting: Iterable[Acting]) -> list[Acting]:
    return body_loads(acting)[:MOST_ROWS]


def list_height(acting: Iterable[Acting]) -> float:
    """The room that the list takes below its corner [pixels]."""
    return ROW * min(len(body_loads(acting)), MOST_ROWS + 1)


def _draw_sign(canvas: Canvas, acting: Acting, middle: Array) -> None:
    load = acting.load
    if isinstance(load, Acceleration | BodyForce):
        vector = load.acceleration if isinstance(load, Acceleration) else load.force
        half = 19 * np.sign(acting.factor) * unit(vector)
        if half.any():
            block_arrow(canvas, middle - half, middle + half, LOAD)
    elif isinstance(load, Spin):
        turning_arrow(canvas, middle, 14, LOAD, clockwise=load.speed < 0)
    elif isinstance(load, TemperatureChange):
        _draw_thermometer(canvas, middle)


def _draw_thermometer(canvas: Canvas, middle: Array) -> None:
    bulb = middle - np.array([0.0, 11.0])
    canvas.line([bulb, middle + np.array([0.0, 16.0])], LOAD, 9)
    canvas.line([bulb, middle + np.array([0.0, 16.0])], PAPER, 5)
    canvas.line([bulb, middle + np.array([0.0, 4.0])], LOAD, 3.4)
    canvas.disc(bulb, 7, fill=LOAD, edge=LOAD, width=1)

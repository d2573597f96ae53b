"""A picture of the convergence record: estimated error over the number of unknowns, log by log.

Beside the meshes of the record it shows the target, and the slope at which a smooth solution would
converge, so that a reader sees whether the refining paid.
"""

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from elements.registry import get
from workers.cautions import Caution
from workers.job import Job
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.numbers import show
from workers.outputs.drawing.page import LABEL_SIZE, Page
from workers.outputs.drawing.palette import FAINT, HAIRLINE, INK, LOAD, SUPPORT
from workers.outputs.drawing.view import Box

Array = NDArray[np.float64]

ROUND = (1.0, 2.0, 5.0)  # ticks of a decade
MARGIN = 0.15  # of the range, around the points
LEAST_RANGE = np.log(2.0)
RIGHT = 0.6  # of the width, beyond which labels stand to the left
OFFSET = (14.0, 0.9 * LABEL_SIZE)  # of a label from its point [pixels]
NOTHING = 1e-9  # errors below are rounding, and drawn as this


def render_convergence(
    path: Path, job: Job, record: Mapping[str, Any], *, cautions: Sequence[Caution]
) -> None:
    """Draw the record that the results have as `convergence`. Needs no off-screen rendering.

    Raises OSError where the file could not be written.
    """
    adaptive = record["kind"] == "adaptive"
    how = record["message"] if adaptive else "the job's own mesh and finer ones"
    page = Page(job.title, f"Convergence · {how}", cautions)
    meshes = record["meshes"]
    dofs = np.array([mesh["dofs"] for mesh in meshes], float)
    errors = np.maximum([mesh["relative_error"] for mesh in meshes], NOTHING)
    target = record["target_error"] if adaptive else None
    order = get(job.meshing.element).order
    _Graph(page.canvas, page.drawing, dofs, errors, target).draw(order)
    facts = {"Case": "", "Quantity": "convergence", "Unit": "", "Software": "Fishplate"}
    page.save(path, facts)


class _Graph:
    """Logarithmic axes around all points and the target."""

    def __init__(
        self, canvas: Canvas, room: Box, dofs: Array, errors: Array, target: float | None
    ) -> None:
        self.canvas, self.dofs, self.errors, self.target = canvas, dofs, errors, target
        self.frame = room.inset(
            4.6 * LABEL_SIZE, 3.4 * LABEL_SIZE, 2.0 * LABEL_SIZE, 1.8 * LABEL_SIZE
        )
        self.x_range = _range(dofs)
        self.y_range = _range(errors if target is None else np.append(errors, target))

    def draw(self, order: int) -> None:
        """order : of the elements; a smooth solution converges with dofs^(-order / 2)."""
        self._draw_axes()
        self._draw_slope(order)
        if self.target is not None:
            self._draw_target(self.target)
        points = self._at(self.dofs, self.errors)
        self.canvas.line(points, INK, 3.2)
        middle = self.frame.left + RIGHT * self.frame.width
        for point, dofs, error in zip(points, self.dofs, self.errors, strict=True):
            self.canvas.disc(point, 9, fill=INK, edge=INK, width=1)
            text = f"{show(100 * error, 2)} %, {show(dofs, 6)} unknowns"
            # The line falls: what stands above right and below left of a point is free.
            if point[0] < middle:
                at = np.add(point, OFFSET)
                self.canvas.text(at, text, LABEL_SIZE, colour=INK)
            else:
                at = np.subtract(point, OFFSET)
                self.canvas.text(at, text, LABEL_SIZE, colour=INK, align="right")

    def _at(self, dofs: Any, error: Any) -> Array:
        (x0, x1), (y0, y1) = self.x_range, self.y_range
        across = (np.log(dofs) - x0) / (x1 - x0)
        up = (np.log(error) - y0) / (y1 - y0)
        frame = self.frame
        return np.stack(
            (frame.left + across * frame.width, frame.bottom + up * frame.height), axis=-1
        )

    def _draw_axes(self) -> None:
        frame, canvas = self.frame, self.canvas
        for error in _ticks(self.y_range):
            _, y = self._at(self.dofs[0], error)
            canvas.line([(frame.left, y), (frame.right, y)], HAIRLINE, 0.9)
            text = f"{show(100 * error, 1)} %"
            canvas.text((frame.left - 12, y), text, LABEL_SIZE, colour=INK, align="right")
        for dofs in _ticks(self.x_range):
            x, _ = self._at(dofs, self.errors[0])
            canvas.line([(x, frame.bottom), (x, frame.top)], HAIRLINE, 0.9)
            at = (x, frame.bottom - 0.9 * LABEL_SIZE)
            canvas.text(at, show(dofs, 1), LABEL_SIZE, colour=INK, align="centre")
        middle = (frame.left + frame.right) / 2, frame.bottom - 2.3 * LABEL_SIZE
        canvas.text(middle, "Unknowns", LABEL_SIZE, colour=INK, align="centre")
        side = frame.left - 4.2 * LABEL_SIZE, (frame.bottom + frame.top) / 2
        text = "Estimated error, relative, in the energy norm"
        canvas.text(side, text, LABEL_SIZE, colour=INK, align="centre", upright=True)

    def _draw_target(self, target: float) -> None:
        frame = self.frame
        _, y = self._at(self.dofs[0], target)
        self.canvas.line([(frame.left, y), (frame.right, y)], LOAD, 2.4, dash=(16, 7))
        at = (frame.left + 14, y + 0.8 * LABEL_SIZE)
        self.canvas.text(at, f"target {show(100 * target, 2)} %", LABEL_SIZE, colour=LOAD)

    def _draw_slope(self, order: int) -> None:
        """The best slope through the last mesh, as far as the frame goes."""
        (x0, x1), (y0, y1) = self.x_range, self.y_range
        slope = order / 2
        last_x, last_y = np.log(self.dofs[-1]), np.log(self.errors[-1])
        ends = np.array([max(x0, last_x - (y1 - last_y) / slope),
                         min(x1, last_x + (last_y - y0) / slope)])  # fmt: skip
        line = self._at(np.exp(ends), np.exp(last_y - slope * (ends - last_x)))
        self.canvas.line(line, SUPPORT, 2.0, dash=(4, 5))
        at = (self.frame.right - 14, self.frame.top + 0.9 * LABEL_SIZE)
        text = f"dotted: best slope of smooth solutions, unknowns to the power {show(-slope, 2)}"
        self.canvas.text(at, text, LABEL_SIZE, colour=FAINT, align="right")


def _range(values: Array) -> tuple[float, float]:
    low, high = float(np.log(values.min())), float(np.log(values.max()))
    spare = max(LEAST_RANGE - (high - low), 0.0) / 2 + MARGIN * max(high - low, LEAST_RANGE)
    return low - spare, high + spare


def _ticks(limits: tuple[float, float]) -> list[float]:
    """Round values between two logarithms."""
    low, high = np.exp(limits[0]), np.exp(limits[1])
    decades = range(int(np.floor(np.log10(low))), int(np.ceil(np.log10(high))) + 1)
    values = [step * 10.0**decade for decade in decades for step in ROUND]
    return [value for value in values if low <= value <= high]

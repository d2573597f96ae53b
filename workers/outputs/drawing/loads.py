"""The loads of one case: arrows on the sides and points where they act, and a list of what acts
on the whole plate or a region."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh
from workers.analysis.selection import select
from workers.job import (
    Acceleration,
    BodyForce,
    Job,
    Load,
    PointForce,
    Spin,
    TemperatureChange,
    TotalMoment,
)
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.load_values import along_side, describe, target_name
from workers.outputs.drawing.page import LABEL_SIZE
from workers.outputs.drawing.palette import LOAD
from workers.outputs.drawing.stations import Run, lone_nodes, outward_at, runs
from workers.outputs.drawing.supports import Note
from workers.outputs.drawing.symbols import arrow, block_arrow, turning_arrow, unit
from workers.outputs.drawing.view import View

Array = NDArray[np.floating[Any]]

FORCE = 104.0  # length of the arrow of a force at a point [pixels]
SIDE_ARROW = 62.0  # length of the longest arrow of a load on a side
SPACING = 44.0  # of arrows along a side
ALONG_THE_SIDE = 0.2  # cosine of the angle to the normal below which a load lies in the side
GAP = 5.0  # between an arrow and the outline
BODY = (Acceleration, BodyForce, Spin, TemperatureChange)
ROW = 1.5 * LABEL_SIZE  # height of a line in the list of body loads


@dataclass(frozen=True)
class Acting:
    """A load and the factor with which it acts in a case (1) or combination."""

    load: Load
    factor: float


def acting_loads(job: Job, state: str | None) -> list[Acting]:
    """The loads of a case, or those of a combination with their factors.

    Raises
    ------
    KeyError   no case and no combination has that name.
    """
    if state is None:
        return []
    cases = {case.name: case.loads for case in job.load_cases}
    if state in cases:
        return [Acting(load, 1.0) for load in cases[state]]
    factors = {combination.name: combination.factors for combination in job.combinations}[state]
    return [
        Acting(load, factor)
        for name, factor in factors.items()
        if factor != 0
        for load in cases[name]
    ]


def draw_loads(
    canvas: Canvas, job: Job, mesh: Mesh, view: View, acting: Iterable[Acting]
) -> list[Note]:
    """Draw what acts on sides and points and say which labels it wants."""
    return [
        note
        for one in acting
        if not isinstance(one.load, BODY)
        for note in _draw_load(canvas, job, mesh, view, one)
    ]


def _draw_load(canvas: Canvas, job: Job, mesh: Mesh, view: View, acting: Acting) -> list[Note]:
    load = acting.load
    if load.on is None:
        return []
    selection = select(mesh, load.on, f"{load.pointer}/on")
    name, value = target_name(load), describe(load, acting.factor, job.units)
    text = (f"{name}: {value}" if name else value,)
    if isinstance(load, PointForce):
        force = np.sign(acting.factor) * np.array(load.force)
        ends = [
            _draw_force(canvas, mesh, view, int(node), force)
            for node in lone_nodes(mesh, selection)
        ]
    else:
        ends = [_draw_side_load(canvas, run, acting) for run in runs(mesh, selection.facets, view)]
    return [Note(at, text, LOAD, toward) for at, toward in ends[:1]]


def _draw_force(
    canvas: Canvas, mesh: Mesh, view: View, node: int, force: Array
) -> tuple[Array, Array]:
    """An arrow that pushes at the point, or pulls where pushing would cover the plate."""
    at, direction = view.pixels(mesh.nodes[node]), unit(force)
    outward = outward_at(mesh, node)
    pulls = outward is not None and float(direction @ outward) > 0.1
    tail = at + GAP * direction if pulls else at - (FORCE + GAP) * direction
    arrow(canvas, tail, tail + FORCE * direction, LOAD, width=4.2)
    far = tail + FORCE * direction if pulls else tail
    return far, unit(far - at)


def _draw_side_load(canvas: Canvas, run: Run, acting: Acting) -> tuple[Array, Array]:
    """Arrows along a side, their far ends joined by a line; where the label may go."""
    radius = run.length / (2 * np.pi) if run.closed else np.inf
    longest = float(min(SIDE_ARROW, 0.55 * radius))
    spacing = min(SPACING, max(9.0, run.length / 5))
    points, outward, part = run.stations(spacing, ends=True)
    value = along_side(acting.load, outward, part)
    if value is None:
        raise TypeError(f"{type(acting.load).__name__} cannot be drawn on a side")
    value = acting.factor * np.asarray(value)
    size = np.linalg.norm(value, axis=1)
    largest = float(size.max())
    if largest == 0:
        return run.middle, outward[len(outward) // 2]
    if _lies_along(value, outward):
        longest = min(longest, 0.75 * run.length / len(points))
    step = longest * value / largest
    far = _draw_arrows(canvas, points, outward, step, size > 0.02 * largest)
    if isinstance(acting.load, TotalMoment):
        centre = run.middle + 62 * outward[len(outward) // 2]
        turning_arrow(canvas, centre, 24, LOAD, clockwise=acting.factor * acting.load.moment < 0)
    best = int(np.argmax(size - 1e-3 * largest * np.abs(part - 0.5)))
    return far[best], outward[best]


def _lies_along(value: Array, outward: Array) -> bool:
    """Whether a load acts rather along its side than across it."""
    across = np.abs(np.einsum("ij,ij->i", value, outward))
    return bool((across < ALONG_THE_SIDE * np.linalg.norm(value, axis=1)).any())


def _draw_arrows(
    canvas: Canvas, points: Array, outward: Array, step: Array, visible: NDArray[np.bool_]
) -> Array:
    """Arrows outside the material, along `step`; returns their far ends, joined by a line."""
    if _lies_along(step, outward):
        tail = points + 3 * GAP * outward - step / 2
        tip = far = tail + step
    else:
        pulls = (np.einsum("ij,ij->i", step, outward) > 0)[:, None]
        tail = points + GAP * outward - np.where(pulls, 0.0, step)
        tip = tail + step
        far = np.where(pulls, tip, tail)
        canvas.line(far[visible], LOAD, 1.6)
    for start, end in zip(tail[visible], tip[visible], strict=True):
        arrow(canvas, start, end, LOAD, width=2.2)
    return far


# --- body loads ----------------------------------------------------------------------------------


def draw_body_loads(
    canvas: Canvas, job: Job, view: View, acting: Sequence[Acting], corner: tuple[float, float]
) -> None:
    """List what acts on the whole plate or a region, one row each, from the upper left corner."""
    x, y = corner
    for row, one in enumerate(body_loads(acting)):
        middle = np.array([x + 22.0, y - (row + 0.5) * ROW])
        _draw_sign(canvas, one, middle)
        where = target_name(one.load)
        text = f"{describe(one.load, one.factor, job.units)}" + (f", {where}" if where else "")
        canvas.text((x + 58, middle[1]), text, LABEL_SIZE, colour=LOAD)
        if isinstance(one.load, Spin):
            centre = view.pixels(one.load.about)
            turning_arrow(canvas, centre, 26, LOAD, clockwise=one.load.speed < 0)
            canvas.disc(centre, 4, fill=LOAD, edge=LOAD, width=1)


def body_loads(acting: Iterable[Acting]) -> list[Acting]:
    return [one for one in acting if isinstance(one.load, BODY)]


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
    canvas.line([bulb, middle + np.array([0.0, 16.0])], "#ffffff", 5)
    canvas.line([bulb, middle + np.array([0.0, 4.0])], LOAD, 3.4)
    canvas.disc(bulb, 7, fill=LOAD, edge=LOAD, width=1)

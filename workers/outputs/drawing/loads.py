"""Loads on sides and points of the plate, as arrows where they act."""

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh
from workers.analysis.selection import select
from workers.job import (
    Bearing,
    Job,
    Load,
    PointForce,
    Target,
    TotalForce,
    TotalMoment,
)
from workers.outputs.drawing.acting import Acting
from workers.outputs.drawing.body_loads import BODY
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.labels import Label, layouts
from workers.outputs.drawing.load_values import (
    Varying,
    along_side,
    describe,
    end_values,
    target_name,
    varies,
)
from workers.outputs.drawing.palette import LOAD
from workers.outputs.drawing.stations import MOST_POINTS, Run, outward_at, runs
from workers.outputs.drawing.symbols import arrow, turning_arrow, unit
from workers.outputs.drawing.view import View

Array = NDArray[np.floating[Any]]

FORCE = 104.0  # length of the arrow of a force at a point [pixels]
SIDE_ARROW = 62.0  # length of the longest arrow of a load on a side
SUPPORT_ROOM = 52.0  # a load stands behind the support of the same side
SPACING = 44.0  # of arrows along a side
ALONG_THE_SIDE = 0.2  # cosine of the angle to the normal below which a load lies in the side
LEGIBLE = 60.0  # a load in a hole with shorter arrows is drawn as its resultant, where it has one
SHORTEST = 9.0  # a shorter arrow is only a blot
GAP = 5.0  # between an arrow and the outline


def draw_loads(
    canvas: Canvas, job: Job, mesh: Mesh, view: View, acting: Iterable[Acting]
) -> list[Label]:
    """Draw what acts on sides and points and say which labels it wants.

    Loads on one and the same side stand behind each other, and behind its support.
    """
    drawn = [one for one in acting if not isinstance(one.load, BODY) and one.load.on is not None]
    layers = Counter(one.load.on for one in drawn)
    supported = {support.on for support in job.supports}
    taken: Counter[Target | None] = Counter()
    labels: list[Label] = []
    for one in drawn:
        target = one.load.on
        layer = Layer(taken[target], layers[target], target in supported)
        taken[target] += 1
        labels += _draw_load(canvas, job, mesh, view, one, layer)
    return labels


@dataclass(frozen=True)
class Layer:
    """The place of a load among `count` on the same side; a support may stand before them."""

    number: int
    count: int
    behind_support: bool

    def sizes(self, run: Run) -> tuple[float, float]:
        """Distance from the outline, and length of the longest arrow [pixels]."""
        start = SUPPORT_ROOM if self.behind_support else 0.0
        longest = SIDE_ARROW
        if np.isfinite(run.radius):  # arrows in a hole have the room of the hole
            start = min(start, 0.4 * run.radius)
            longest = min(longest, 0.6 * (run.radius - start) / self.count)
        return GAP + start + self.number * (longest + 2 * GAP), longest


def _draw_load(
    canvas: Canvas, job: Job, mesh: Mesh, view: View, acting: Acting, layer: Layer
) -> list[Label]:
    load = acting.load
    if load.on is None:
        return []
    selection = select(mesh, load.on, f"{load.pointer}/on")
    name, value = target_name(load), describe(load, acting.factor, job.units)
    text = layouts(name, [value])
    if isinstance(load, PointForce):
        force = np.sign(acting.factor) * np.array(load.force)
        ends = [
            _draw_force(canvas, mesh, view, int(node), force)
            for node in selection.nodes[:MOST_POINTS]
        ]
        return [Label(at, text, LOAD, toward=toward) for at, toward in ends[:1]]
    found = runs(mesh, selection.facets, view)
    if isinstance(load, TotalForce | Bearing) and all(_is_cramped(run, layer) for run in found):
        force = np.sign(acting.factor) * np.array(load.force)
        centre = np.mean([run.centre for run in found], axis=0)
        tip = centre + FORCE * unit(force)
        arrow(canvas, centre, tip, LOAD, width=4.2)
        return [Label(tip, text, LOAD, toward=unit(force))]
    sides = [_draw_side_load(canvas, run, acting, layer) for run in found]
    labels = [Label(side.label, text, LOAD, toward=side.toward) for side in sides[:1]]
    if isinstance(load, Varying) and varies(load) and sides:
        values = end_values(load, acting.factor, job.units)
        for at, value in zip((sides[0].start, sides[-1].end), values, strict=True):
            labels.append(Label(at, [[value]], LOAD, toward=sides[0].toward))
    return labels


def _is_cramped(run: Run, layer: Layer) -> bool:
    """Whether arrows along the side, in a hole, would be too short to be read."""
    return bool(np.isfinite(run.radius)) and layer.sizes(run)[1] < LEGIBLE


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


class Drawn(NamedTuple):
    """Where labels of a load on a side may go: by the largest arrow, and by both ends."""

    label: Array
    start: Array
    end: Array
    toward: Array


def _draw_side_load(canvas: Canvas, run: Run, acting: Acting, layer: Layer) -> Drawn:
    """Arrows along a side, their far ends joined by a line."""
    start, longest = layer.sizes(run)
    points, outward, part, value = _stations(run, acting.load)
    value = acting.factor * value
    size = np.linalg.norm(value, axis=1)
    largest = float(size.max())
    middle = len(part) // 2
    if largest == 0:
        return Drawn(points[middle], points[0], points[-1], outward[middle])
    if _lies_along(value, outward):
        longest = min(longest, 0.75 * run.length / len(points))
    step = longest * value / largest
    far = _draw_arrows(canvas, points + start * outward, outward, step)
    if isinstance(acting.load, TotalMoment):
        centre = run.middle + (start + longest + 36) * outward[middle]
        turning_arrow(canvas, centre, 24, LOAD, clockwise=acting.factor * acting.load.moment < 0)
    best = int(np.argmax(size)) if size[middle] < 0.5 * largest else middle
    return Drawn(far[best], far[0], far[-1], outward[best])


def _stations(run: Run, load: Load) -> tuple[Array, Array, Array, Array]:
    """Where arrows stand on a side: points, outward, part of its length, and the load there."""
    spacing = min(SPACING, max(9.0, run.length / 5))
    points, outward, part = run.stations(spacing, ends=True)
    value = along_side(load, outward, part)
    if _lies_along(value, outward):  # arrows in a row need room for their length
        points, outward, part = run.stations(SPACING)
        value = along_side(load, outward, part)
    return points, outward, part, value


def _lies_along(value: Array, outward: Array) -> bool:
    """Whether a load acts rather along its side than across it."""
    across = np.abs(np.einsum("ij,ij->i", value, outward))
    return bool((across < ALONG_THE_SIDE * np.linalg.norm(value, axis=1)).any())


def _draw_arrows(canvas: Canvas, base: Array, outward: Array, step: Array) -> Array:
    """Arrows on the outer side of `base`, along `step`; returns their far ends.

    The far ends of neighbours that push (or pull) alike are joined by a line.
    """
    size = np.linalg.norm(step, axis=1)
    tail: Array
    far: Array
    if _lies_along(step, outward):
        tail = base + 2 * GAP * outward - step / 2
        far = tip = tail + step
    else:
        pulls = np.einsum("ij,ij->i", step, outward) > 0
        tail = base - np.where(pulls[:, None], 0.0, step)
        tip = tail + step
        far = np.where(pulls[:, None], tip, tail)
        for kind in (pulls, ~pulls):
            _join(canvas, far, kind & (size > 1e-6 * size.max()))
    for number in np.flatnonzero(size > SHORTEST):
        arrow(canvas, tail[number], tip[number], LOAD, width=2.2)
    return far


def _join(canvas: Canvas, far: Array, chosen: NDArray[np.bool_]) -> None:
    """Lines from chosen ends to their neighbours; around a hole the last and first are such."""
    following = np.roll(far, -1, axis=0)
    gap = np.linalg.norm(far - following, axis=1)
    joined = (chosen | np.roll(chosen, -1)) & (gap < 2.5 * np.median(gap))
    for number in np.flatnonzero(joined):
        canvas.line([far[number], following[number]], LOAD, 1.6)

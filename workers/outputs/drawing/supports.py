"""What holds the plate, drawn as the trade draws it.

Both directions held along a side: hatched ground on the side. One direction: rollers whose axis is
that direction. Both at a point: a pin. Springs: zigzags. A prescribed displacement: an arrow.
"""

from collections.abc import Callable, Collection, Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh
from workers.analysis.selection import select
from workers.job import Job, Support, Units
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.labels import Label, layouts
from workers.outputs.drawing.numbers import show, vector
from workers.outputs.drawing.palette import SUPPORT
from workers.outputs.drawing.stations import Run, lone_nodes, outward_at, runs
from workers.outputs.drawing.symbols import (
    arrow,
    ground,
    held_stub,
    left_of,
    pin,
    roller,
    spring,
    unit,
)
from workers.outputs.drawing.view import View

Array = NDArray[np.floating[Any]]

SPACING = 74.0  # of rollers and springs along a side [pixels]
CLEAR_OF_SIGNS = 52.0  # from the outline to what stands behind a roller
MOVE = 46.0  # length of the arrow of a prescribed displacement
ALONG_THE_SIDE = 0.2  # cosine of the angle to the normal below which a direction lies in the side
BELOW = np.array([-0.1, -1.0])  # where the sign of a support goes if the side does not say
DOWN = np.array([0.0, -1.0])


@dataclass(frozen=True, eq=False)
class Place:
    """Where one sign of a support goes: pixels, the way out of the material, the size of it."""

    at: Array
    outward: Array
    scale: float


def draw_supports(canvas: Canvas, job: Job, mesh: Mesh, view: View) -> list[Label]:
    """Draw every support and say which labels they want."""
    return [_draw_support(canvas, job, mesh, view, support) for support in job.supports]


def _draw_support(canvas: Canvas, job: Job, mesh: Mesh, view: View, support: Support) -> Label:
    selection = select(mesh, support.on, f"{support.pointer}/on")
    sides = runs(mesh, selection.facets, view)
    places: list[Place] = []
    for run in sides:
        scale = _scale(run)
        if _is_fixed(support):
            ground(canvas, run.points, run.outward, SUPPORT, scale=scale)
        points, outward, _ = run.stations(SPACING * scale)
        places += [Place(p, o, scale) for p, o in zip(points, outward, strict=True)]
    lone = [_point_place(mesh, view, int(n)) for n in lone_nodes(mesh, selection)]
    if _is_fixed(support):
        for place in lone:
            pin(canvas, place.at, place.outward, SUPPORT)
    for number, place in enumerate(places):
        _draw_signs(canvas, support, place, turn=number)
    for place in lone:
        _draw_signs(canvas, support, place, turn=None)
    label_at = _middle(sides) if sides else lone[len(lone) // 2]
    return _label(job.units, support, label_at, on_side=bool(sides))


def _middle(sides: Sequence[Run]) -> Place:
    """The middle of the longest run of a support."""
    longest = max(sides, key=lambda run: run.length)
    outward = np.array([np.interp(longest.length / 2, longest.at, c) for c in longest.outward.T])
    return Place(longest.middle, unit(outward), _scale(longest))


def _scale(run: Run) -> float:
    """Signs shrink with the side that they stand on."""
    return float(np.clip(run.length / 150.0, 0.45, 1.0))


def _is_fixed(support: Support) -> bool:
    return support.ux is not None and support.uy is not None


def _point_place(mesh: Mesh, view: View, node: int) -> Place:
    outward = outward_at(mesh, node)
    return Place(view.pixels(mesh.nodes[node]), DOWN if outward is None else outward, 1.0)


def _draw_signs(canvas: Canvas, support: Support, place: Place, *, turn: int | None) -> None:
    """The signs of a support at one place; along a side the kinds of signs take turns."""
    signs: list[tuple[Callable[..., None], Array]] = []
    if not _is_fixed(support):
        signs += [(roller, direction) for direction, _ in _held(support, place.outward)]
    signs += [(spring, direction) for direction in _spring_directions(support, place.outward)]
    if signs and turn is not None:
        signs = [signs[turn % len(signs)]]
    for sign, direction in signs:
        _draw_sign(canvas, sign, direction, place)


def _draw_sign(canvas: Canvas, sign: Callable[..., None], direction: Array, place: Place) -> None:
    """A sign on the outer side of the plate; one that holds along a side stands on an arm."""
    lean = float(direction @ place.outward)
    at = place.at
    if abs(lean) < ALONG_THE_SIDE:
        at = held_stub(canvas, at, place.outward, SUPPORT, scale=place.scale)
        lean = float(direction @ BELOW)
    sign(canvas, at, direction if lean > 0 else -direction, SUPPORT, scale=place.scale)


def _held(support: Support, outward: Array) -> Iterable[tuple[Array, float]]:
    """Directions in which the support holds, and by how much it moves the plate that way."""
    if support.ux is not None:
        yield np.array([1.0, 0.0]), support.ux
    if support.uy is not None:
        yield np.array([0.0, 1.0]), support.uy
    if support.normal is not None:
        yield outward, support.normal
    if support.along is not None:
        yield unit(support.along), support.displacement or 0.0


def _spring_directions(support: Support, outward: Array) -> Iterable[Array]:
    if support.spring is None:
        return
    tangent = left_of(outward)
    for stiffness, direction in (
        (support.spring.x, np.array([1.0, 0.0])),
        (support.spring.y, np.array([0.0, 1.0])),
        (support.spring.normal, outward),
        (support.spring.tangential, tangent),
    ):
        if stiffness > 0:
            yield direction


# --- prescribed displacements and labels ---------------------------------------------------------


def draw_moves(canvas: Canvas, job: Job, mesh: Mesh, view: View, cases: Collection[str]) -> None:
    """An arrow for each displacement that a support prescribes, always or in one of the cases."""
    for support in job.supports:
        if support.case is not None and support.case not in cases:
            continue
        selection = select(mesh, support.on, f"{support.pointer}/on")
        for run in runs(mesh, selection.facets, view):
            _, outward, _ = run.stations(2 * run.length)
            _draw_move(canvas, support, run.middle, outward[0])
        for node in lone_nodes(mesh, selection):
            place = _point_place(mesh, view, int(node))
            _draw_move(canvas, support, place.at, place.outward)


def _draw_move(canvas: Canvas, support: Support, at: Array, outward: Array) -> None:
    for direction, value in _held(support, outward):
        if value:
            way = np.sign(value) * direction
            beyond = CLEAR_OF_SIGNS * (direction if direction @ outward > 0 else -direction)
            start = at + beyond - (MOVE * way if way @ beyond < 0 else 0.0 * way)
            arrow(canvas, start, start + MOVE * way, SUPPORT, width=4.0)


def _label(units: Units, support: Support, place: Place, *, on_side: bool) -> Label:
    reach = (16.0 if _is_fixed(support) and on_side else 40.0) * place.scale
    conditions = _conditions(units, support, on_side)
    return Label(
        place.at + reach * place.outward,
        layouts(support.label, conditions),
        colour=SUPPORT,
        toward=place.outward,
    )


def _conditions(units: Units, support: Support, on_side: bool) -> list[str]:
    """What the support does, one line for each kind of condition."""
    if support.ux == 0 and support.uy == 0:
        held = ["fixed"]
    else:
        named = (("ux", support.ux), ("uy", support.uy), ("normal", support.normal))
        held = [_equals(name, value, units) for name, value in named if value is not None]
    if support.along is not None:
        held.append(_equals(f"along {vector(*support.along)}", support.displacement or 0.0, units))
    lines = [", ".join(held)] if held else []
    if support.case is not None:
        lines.append(f"moved in case {support.case}")
    if support.spring is not None:
        unit_name = f"{units.force}/{units.length}{'²' if on_side else ''}"
        given = (
            ("x", support.spring.x),
            ("y", support.spring.y),
            ("normal", support.spring.normal),
            ("tangential", support.spring.tangential),
        )
        lines += [f"spring {way} {show(k)} {unit_name}" for way, k in given if k > 0]
    return lines


def _equals(name: str, value: float, units: Units) -> str:
    return f"{name} = {show(value)} {units.length}" if value else f"{name} = 0"

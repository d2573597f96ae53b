"""Pictures of a solved state: filled fields of stress."""

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.field_mesh import FieldMesh
from workers.analysis.fields import Fields
from workers.analysis.plane_stress import principal, von_mises
from workers.analysis.singularities import SingularPlace
from workers.job import Job
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.legend import Scale
from workers.outputs.drawing.marks import Mark, draw_marks, where_words
from workers.outputs.drawing.numbers import show
from workers.outputs.drawing.page import Page
from workers.outputs.drawing.painting import fill, lay_out, surface_of
from workers.outputs.drawing.palette import INK, PAPER
from workers.outputs.drawing.plate import draw_outline
from workers.outputs.drawing.view import View

Array = NDArray[np.floating[Any]]
Limits = tuple[float, float]
Peak = Mapping[str, Any]  # `value`, `at` and `singular`, as the results have it

# A stress below this part of Young's modulus, or of the state's largest stress, is rounding.
ROUNDING_OF_MODULUS, ROUNDING_OF_STATE = 1e-12, 1e-9
FAINTEST = 0.02  # of the legend's range; a smaller stress has no tick
TICK_SPACING = 44.0  # of the ticks along principal directions [pixels]


@dataclass(frozen=True)
class StressQuantity:
    """A scalar of the stress state that is drawn as a filled field."""

    heading: str
    of_stress: Callable[[Array], Array]
    peak: Callable[[Array], np.intp]
    signed: bool

    def beyond(self, values: Array, peak: float) -> NDArray[np.bool_]:
        """Which values are worse than the peak, by more than rounding."""
        sign = -1 if self.peak is np.argmin else 1
        return np.asarray(sign * (values - peak) > ROUNDING_OF_STATE * abs(peak))


STRESS_QUANTITIES = {
    "von_mises": StressQuantity("Von Mises stress", von_mises, np.argmax, signed=False),
    "principal_max": StressQuantity(
        "Larger principal stress", lambda s: principal(s)[0], np.argmax, signed=True
    ),
    "principal_min": StressQuantity(
        "Smaller principal stress", lambda s: principal(s)[1], np.argmin, signed=True
    ),
}


def draw_stress(
    page: Page,
    job: Job,
    mesh: FieldMesh,
    fields: Fields,
    name: str,
    *,
    limits: Limits | None,
    peak: Peak | None,
    places: Iterable[SingularPlace],
) -> None:
    """Fill the plate with a stress; mark its peak, and the singular places that it leaves out.

    Principal stresses have ticks along their directions.
    """
    quantity = STRESS_QUANTITIES[name]
    nodal = quantity.of_stress(fields.stress)
    rounding = _rounding(job, fields)
    scale = stress_scale(nodal, limits, rounding, signed=quantity.signed)
    heading = (quantity.heading, f"[{job.units.stress}]")
    low, high = mesh.points.min(axis=0), mesh.points.max(axis=0)
    view = lay_out(page, scale, heading, low, high)
    surface = surface_of(mesh, view.scale, np.column_stack((mesh.points, fields.stress)))
    values = quantity.of_stress(surface.values[:, 2:])
    fill(page, view, surface, values, scale)
    draw_outline(page.canvas, mesh.mesh, view, mesh.mesh.nodes)
    if quantity.signed:
        _draw_directions(page.canvas, mesh, view, fields, quantity, scale)
    if peak is None:
        number = int(quantity.peak(nodal))
        peak = {"value": float(nodal[number]), "at": mesh.points[number]}
    value = peak["value"] if abs(peak["value"]) > rounding else 0.0
    text = f"{show(value)} {job.units.stress}"
    marks = [Mark(np.asarray(peak["at"]), text, where_words(mesh, peak["at"], job))]
    if peak.get("singular"):
        beyond = np.flatnonzero(quantity.beyond(nodal, peak["value"]))
        marks += _singular_marks(mesh, job, peak["singular"], mesh.points[beyond], places)
    draw_marks(page, view, marks)


def stress_scale(nodal: Array, limits: Limits | None, rounding: float, *, signed: bool) -> Scale:
    """The range of a legend: the given one, else the field's own; never one of mere rounding.

    That of a size begins at zero.
    """
    lowest, highest = (0.0 if abs(v) <= rounding else float(v) for v in (nodal.min(), nodal.max()))
    low, high = limits or (lowest, highest)
    low = low if signed else 0.0
    low, high = (0.0 if abs(v) <= rounding else v for v in (low, high))
    if high - low <= rounding:
        low, high = _widened(low, high)
    scale = Scale.diverging(low, high) if signed else Scale.sequential(low, high)
    return scale.of_field(lowest, highest)


def _widened(low: float, high: float) -> Limits:
    """A range around a uniform value: down (or up) to zero, or one unit where all is zero."""
    if high > 0:
        return 0.0, high
    return (low, 0.0) if low < 0 else (0.0, 1.0)


def _rounding(job: Job, fields: Fields) -> float:
    modulus = max(m.youngs_modulus for m in job.materials.values())
    largest = float(np.abs(fields.von_mises).max())
    return max(ROUNDING_OF_MODULUS * modulus, ROUNDING_OF_STATE * largest)


def _singular_marks(
    mesh: FieldMesh, job: Job, worst: Peak, beyond: Array, places: Iterable[SingularPlace]
) -> list[Mark]:
    """The singular place with the worst stress, and the others near points beyond the peak."""
    others = [
        Mark(np.array(place.at), "", "", singular=True)
        for place in places
        if list(place.at) != list(worst["at"])
        and (np.linalg.norm(beyond - place.at, axis=1) <= place.radius).any()
    ]
    which = (
        "infinite stress at \N{WHITE DIAMOND}, left out: to"
        if others
        else "infinite stress, left out:"
    )
    text = f"{which} {show(worst['value'])} {job.units.stress}"
    where = f"on this mesh {where_words(mesh, worst['at'], job)}"
    return [Mark(np.asarray(worst["at"]), text, where, singular=True), *others]


def _draw_directions(
    canvas: Canvas,
    mesh: FieldMesh,
    view: View,
    fields: Fields,
    quantity: StressQuantity,
    scale: Scale,
) -> None:
    """Ticks along the principal direction in a thinned set of element centres.

    None where the stress is next to nothing: its direction there is that of the error.
    """
    corners = [
        points[:, : block.element.corners]
        for block, points in zip(mesh.mesh.blocks, mesh.connectivity, strict=True)
    ]
    centres = view.pixels(np.concatenate([mesh.points[c].mean(axis=1) for c in corners]))
    stress = np.concatenate([fields.stress[c].mean(axis=1) for c in corners])
    cells = np.floor(centres / TICK_SPACING).astype(int)
    _, chosen = np.unique(cells, axis=0, return_index=True)
    size = np.abs(quantity.of_stress(stress[chosen]))
    chosen = chosen[size > FAINTEST * (scale.high - scale.low)]
    xx, yy, xy = stress[chosen].T
    angle = 0.5 * np.arctan2(2 * xy, xx - yy) + (np.pi / 2 if quantity.peak is np.argmin else 0.0)
    half = 0.3 * TICK_SPACING * np.column_stack((np.cos(angle), np.sin(angle)))
    ticks = np.stack((centres[chosen] - half, centres[chosen] + half), axis=1)
    if len(ticks):
        canvas.line(ticks, PAPER, 4.6, alpha=0.75)  # so that they show on the dark end of the map
        canvas.line(ticks, INK, 2.0)

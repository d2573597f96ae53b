"""Pictures of a job as PNG files, drawn off-screen.

Each picture carries the job's title, the case and the review cautions, in the picture and as text
in the file. A machine that cannot render off-screen raises PicturesUnavailableError with the
reason; its jobs finish without pictures.
"""

from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.field_mesh import FieldMesh
from workers.analysis.fields import Fields
from workers.analysis.mesh import Mesh
from workers.analysis.singularities import SingularPlace
from workers.cautions import Caution
from workers.job import Job
from workers.outputs.drawing.deformed import deformation_factor, draw_deformed
from workers.outputs.drawing.fields import (
    ROUNDING_OF_MODULUS,
    STRESS_QUANTITIES,
    draw_stress,
)
from workers.outputs.drawing.governing import HEADINGS, draw_governing
from workers.outputs.drawing.graph import Panel, draw_graph
from workers.outputs.drawing.model import draw_model
from workers.outputs.drawing.numbers import TIMES, show, vector
from workers.outputs.drawing.offscreen import probe, require
from workers.outputs.drawing.page import Page
from workers.outputs.wording import factor_words

__all__ = [
    "QUANTITIES", "probe", "render_deformed", "render_field", "render_governing", "render_line",
    "render_model",
]  # fmt: skip

QUANTITIES = ("model", "deformed", *STRESS_QUANTITIES)


def render_model(
    path: Path,
    job: Job,
    mesh: Mesh,
    *,
    case: str | None,
    cautions: Sequence[Caution],
) -> None:
    """Draw plate, mesh, dimensions, supports, and the loads of one case or combination.

    Needs nothing solved; with no case, no loads.

    Raises
    ------
    KeyError    no case and no combination has that name
    MeshError   a support or load acts on something that the mesh does not have
    and PicturesUnavailableError, OSError as `render_field` does.
    """
    require()
    subtitle = "Model" if case is None else f"{_with_factors(job, case)} · Model and loads"
    page = Page(job.title, subtitle, cautions)
    draw_model(page, job, mesh, case)
    page.save(path, _facts(case or "", "model", job.units.length))


def render_field(
    path: Path,
    job: Job,
    mesh: FieldMesh,
    fields: Fields,
    quantity: str,
    *,
    cautions: Sequence[Caution],
    limits: tuple[float, float] | None = None,
    peak: Mapping[str, Any] | None = None,
    places: Iterable[SingularPlace] = (),
) -> None:
    """Draw "von_mises", "principal_max" or "principal_min" of a state as a filled field.

    Principal stresses have ticks along their directions.

    limits : a range for the legend [F/L^2], so that pictures of several states compare; what goes
        beyond takes the colour of the end, and the legend says how far it goes
    peak : the extreme as the results have it: `value`, `at` and `singular`, a place that it leaves
        out; None: that of the field
    places : all singular ones; those at which the field goes beyond the peak are marked as well

    Raises
    ------
    PicturesUnavailableError   this machine cannot render
    KeyError                   no such quantity
    OSError                    the file could not be written
    """
    heading = STRESS_QUANTITIES[quantity].heading
    require()
    ticks = ", ticks along it" if STRESS_QUANTITIES[quantity].signed else ""
    page = Page(job.title, f"{fields.name} · {heading}{ticks}", cautions)
    draw_stress(page, job, mesh, fields, quantity, limits=limits, peak=peak, places=places)
    page.save(path, _facts(fields.name, quantity, job.units.stress))


def render_deformed(
    path: Path,
    job: Job,
    mesh: FieldMesh,
    fields: Fields,
    *,
    cautions: Sequence[Caution],
    largest: float | None = None,
) -> None:
    """Draw the deformed shape of a state over the undeformed outline, scale stated.

    largest : end of the legend [L], so that pictures of several states compare

    Raises PicturesUnavailableError and OSError as `render_field` does.
    """
    require()
    factor = deformation_factor(mesh, fields.displacement)
    subtitle = f"{fields.name} · Deformed shape, displacements drawn {TIMES} {show(factor, 1)}"
    page = Page(job.title, subtitle, cautions)
    draw_deformed(page, job, mesh, fields, factor, largest=largest)
    facts = _facts(fields.name, "deformed", job.units.length)
    page.save(path, {**facts, "Scale": show(factor, 1)})


def render_governing(
    path: Path,
    job: Job,
    mesh: FieldMesh,
    state: NDArray[np.int32],
    quantity: str,
    names: Sequence[str],
    peak: Mapping[str, Any] | None,
    *,
    cautions: Sequence[Caution],
) -> None:
    """Draw which state governs where, for one measure of an envelope.

    state : (P,)   number of the governing state at each field point
    names : of the states
    peak : the extreme as the results have it: `value`, `at` and `governs`; None: none is known

    Raises PicturesUnavailableError, KeyError and OSError as `render_field` does.
    """
    heading = HEADINGS[quantity]
    require()
    page = Page(job.title, f"Envelope · Which case governs: {heading}", cautions)
    draw_governing(page, job, mesh, state, quantity, names, peak)
    page.save(path, _facts("envelope", quantity, job.units.stress))


def render_line(
    path: Path, job: Job, name: str, line: Mapping[str, Any], *, cautions: Sequence[Caution]
) -> None:
    """Draw what the results hold of one line: von Mises stress and the stress across it.

    Needs no off-screen rendering. `line` is `results["lines"][name]`.

    Raises OSError where the file could not be written.
    """
    points, distance = np.array(line["points"]), np.array(line["distance"])
    start, end = (vector(float(x), float(y), digits=4) for x, y in points[[0, -1]])
    page = Page(job.title, f"{name} · Stress along the line from {start} to {end}", cautions)
    dx, dy = (points[-1] - points[0]) / distance[-1]
    stress = np.array([state["stress"] for state in line["cases"].values()])
    across = stress @ np.array([dy * dy, dx * dx, -2 * dx * dy])  # n sigma n with n = (-dy, dx)
    unit, length = job.units.stress, job.units.length
    draw_graph(
        page.canvas,
        page.drawing,
        distance,
        [
            Panel(
                f"Von Mises stress [{unit}]",
                np.array([state["von_mises"] for state in line["cases"].values()]),
            ),
            Panel(f"Normal stress across the line [{unit}]", across),
        ],
        list(line["cases"]),
        along=f"Distance from {start} [{length}]",
        unit=unit,
        rounding=ROUNDING_OF_MODULUS * max(m.youngs_modulus for m in job.materials.values()),
    )
    page.save(path, {**_facts("", "line", unit), "Line": name})


def _with_factors(job: Job, state: str) -> str:
    """A state with its factors, e.g. "ULS = 1.5 × lift + 1.35 × self weight"."""
    for combination in (*job.cases, *job.combinations):
        if combination.name == state:
            return f"{state} = {factor_words(combination)}"
    return state


def _facts(case: str, quantity: str, unit: str) -> dict[str, str]:
    return {"Case": case, "Quantity": quantity, "Unit": unit, "Software": "Fishplate"}

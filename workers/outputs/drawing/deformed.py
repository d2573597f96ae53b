"""The deformed shape of a solved state."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.field_mesh import FieldMesh
from workers.analysis.fields import Fields
from workers.job import Job
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.legend import Scale
from workers.outputs.drawing.marks import Mark, draw_marks, where_words
from workers.outputs.drawing.numbers import round_factor, show
from workers.outputs.drawing.page import HEIGHT, WIDTH, Page, over
from workers.outputs.drawing.painting import fill, lay_out, surface_of
from workers.outputs.drawing.plate import draw_mesh, draw_outline

Array = NDArray[np.floating[Any]]

DEFORMED_PART = 0.07  # the largest displacement is drawn as about this part of the plate's diagonal


def deformation_factor(mesh: FieldMesh, displacement: Array) -> float:
    """A round factor that makes the displacements visible; 1 when nothing moves."""
    largest = float(np.linalg.norm(displacement, axis=1).max())
    if largest <= 1e-15 * mesh.mesh.diagonal:
        return 1.0
    return round_factor(DEFORMED_PART * mesh.mesh.diagonal / largest)


def draw_deformed(
    page: Page,
    job: Job,
    mesh: FieldMesh,
    fields: Fields,
    factor: float,
    *,
    largest: float | None = None,
) -> None:
    """The deformed shape, filled by the size of the displacement, over the undeformed outline.

    largest : end of the legend; the largest displacement of this state if left out
    """
    size = np.linalg.norm(fields.displacement, axis=1)
    end = float(size.max()) if largest is None else largest
    scale = Scale.sequential(0.0, end if end > 0 else 1.0).of_field(0.0, float(size.max()))
    unit = job.units.length
    moved = mesh.points + factor * fields.displacement
    both = np.vstack((mesh.points, moved))
    view = lay_out(page, scale, ("Displacement", f"[{unit}]"), both.min(axis=0), both.max(axis=0))
    surface = surface_of(mesh, view.scale, np.column_stack((moved, fields.displacement)))
    fill(page, view, surface, np.linalg.norm(surface.values[:, 2:], axis=1), scale)
    positions = _by_node(mesh, moved)
    sheet = Canvas(WIDTH, HEIGHT)
    draw_mesh(sheet, mesh.mesh, view, positions)
    page.paper = over(page.paper, sheet.pixels())
    draw_outline(page.canvas, mesh.mesh, view, mesh.mesh.nodes, dashed=True)
    draw_outline(page.canvas, mesh.mesh, view, positions)
    peak = int(np.argmax(size))
    value = f"{show(size[peak])} {unit}"
    draw_marks(page, view, [Mark(moved[peak], value, where_words(mesh, mesh.points[peak], job))])


def _by_node(mesh: FieldMesh, values: Array) -> Array:
    """Values of the field points at the mesh nodes; displacements are the same in each region."""
    found = mesh.mesh.nodes.copy()
    found[mesh.origin] = values
    return found

"""The plate itself: mesh lines, outline and borders of regions, on undeformed or moved nodes."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.palette import FAINT, INK
from workers.outputs.drawing.tessellation import all_sides, facet_curves, region_borders, runs_of
from workers.outputs.drawing.view import View

Array = NDArray[np.floating[Any]]

SMALLEST_SIDE = 7.0  # a finer mesh would be a grey veil: it is left out [pixels]
OUTLINE, BORDER, DASHED = 2.6, 2.0, (10.0, 7.0)


def draw_mesh(sheet: Canvas, mesh: Mesh, view: View, positions: Array) -> bool:
    """Draw the sides of all elements, if they are far enough apart to be told apart.

    Returns whether they were drawn.
    """
    sides = all_sides(mesh)
    ends = view.scale * np.diff(positions[mesh.facet_ends(sides)], axis=1)[:, 0]
    if np.median(np.linalg.norm(ends, axis=1)) < SMALLEST_SIDE:
        return False
    curves = facet_curves(mesh, sides, positions, pieces=4)
    sheet.line(view.pixels(curves), FAINT, 0.8, alpha=0.55)
    return True


def draw_outline(
    canvas: Canvas, mesh: Mesh, view: View, positions: Array, *, dashed: bool = False
) -> None:
    """Draw the edge of the plate and of its holes, and the borders of its regions."""
    colour, dash = (FAINT, DASHED) if dashed else (INK, None)
    width = 1.6 if dashed else OUTLINE
    for run in runs_of(mesh, mesh.boundary, positions):
        canvas.line(view.pixels(run), colour, width, dash=dash)
    borders = region_borders(mesh)
    if len(borders) and not dashed:
        for run in runs_of(mesh, borders, positions):
            canvas.line(view.pixels(run), INK, BORDER, dash=(14.0, 4.0, 2.0, 4.0))

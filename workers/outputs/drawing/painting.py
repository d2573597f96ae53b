"""Painting a field: where plate and legend stand on the page, colours, isolines."""

from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.field_mesh import FieldMesh
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.legend import Scale, draw_isoline, draw_legend, legend_size
from workers.outputs.drawing.page import HEIGHT, WIDTH, Page, over
from workers.outputs.drawing.raster import isolines, paint
from workers.outputs.drawing.tessellation import Surface, tessellate
from workers.outputs.drawing.view import Box, View

Array = NDArray[np.floating[Any]]

EVEN = 1e-7  # of the range: a smaller difference across a piece of an element is rounding
AIR = 34  # between the plate and the edge of its room, for the peak's mark [pixels]
CALLOUT = 62  # above and below the plate, for the peak's label [pixels]


def lay_out(page: Page, scale: Scale, heading: tuple[str, ...], low: Array, high: Array) -> View:
    """Draw the legend where it costs least room, and fit the plate into the rest."""
    room = page.drawing
    width, height = high - low
    upright = width * room.height < 1.25 * height * room.width
    size = legend_size(page.canvas, scale, heading, upright)
    if upright:
        middle, tall = (room.bottom + room.top) / 2, min(room.height - 20, 720)
        box = Box(room.right - size, middle - tall / 2, room.right, middle + tall / 2)
        view = View.fit(low, high, room.inset(AIR, CALLOUT, AIR + size + 30, CALLOUT))
    else:
        view = View.fit(low, high, room.inset(AIR, size + 10 + CALLOUT, AIR, CALLOUT))
        wide = min(room.width - 120, 1100)
        middle, below = (room.left + room.right) / 2, view.pixels(low)[1] - CALLOUT
        bottom = max(room.bottom, below - size - 30)
        box = Box(middle - wide / 2, bottom, middle + wide / 2, bottom + size)
    draw_legend(page.canvas, box, scale, heading, upright)
    return view


def surface_of(mesh: FieldMesh, scale: float, nodal: Array) -> Surface:
    """Triangles that follow the elements, with the values (P, k); scale in pixels per length."""
    elements = [block.element for block in mesh.mesh.blocks]
    return tessellate(elements, mesh.connectivity, nodal, scale)


def fill(page: Page, view: View, surface: Surface, values: Array, scale: Scale) -> None:
    """Paint the field onto the paper of the page, with an isoline at each tick of the legend."""
    points = view.pixels(surface.values[:, :2])
    painted = paint(
        (WIDTH, HEIGHT),
        points,
        surface.triangles,
        values,
        colours=scale.colours,
        limits=scale.reach,
    )
    sheet = Canvas(WIDTH, HEIGHT)
    for level, triangles in _crossed(surface.triangles, values, scale):
        for line in isolines(points, triangles, values, level):
            draw_isoline(sheet, line, level)
    page.paper = over(painted, sheet.pixels())


def _crossed(
    triangles: NDArray[np.int64], values: Array, scale: Scale
) -> Iterator[tuple[float, NDArray[np.int64]]]:
    """Each tick of the legend but zero, with the triangles that its isoline may cross."""
    first, second, third = values[triangles.T]
    low = np.minimum(np.minimum(first, second), third)
    high = np.maximum(np.maximum(first, second), third)
    # Where the field is even up to rounding, a line would wander.
    sloping = high - low > EVEN * (scale.high - scale.low)
    for level in filter(None, scale.ticks):
        yield level, triangles[sloping & (low <= level) & (level <= high)]

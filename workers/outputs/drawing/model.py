"""The picture of the model: plate and mesh, dimensions, supports, and the loads of one case.

Needs only the job and its mesh, so it can be drawn before anything is solved.
"""

from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import PLATE as PLATE_REGION
from workers.analysis.mesh import Mesh
from workers.job import Job
from workers.outputs.drawing.acting import acting_cases, acting_loads
from workers.outputs.drawing.body_loads import draw_body_loads, list_height
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.labels import Label, Labels, layouts
from workers.outputs.drawing.loads import draw_loads
from workers.outputs.drawing.numbers import show
from workers.outputs.drawing.page import HEIGHT, LABEL_SIZE, WIDTH, Page, over
from workers.outputs.drawing.palette import FAINT, PLATE, PLATE_THICK, PLATE_THIN
from workers.outputs.drawing.plate import draw_mesh, draw_outline
from workers.outputs.drawing.raster import paint
from workers.outputs.drawing.supports import draw_moves, draw_supports
from workers.outputs.drawing.symbols import arrow, dimension
from workers.outputs.drawing.tessellation import tessellate
from workers.outputs.drawing.view import View

Array = NDArray[np.floating[Any]]

SIDE_ROOM, TOP_ROOM, BOTTOM_ROOM = 225.0, 140.0, 175.0  # for signs, labels and dimensions
STRIP = 18  # half the strip that a dimension line takes [pixels]
LABEL_BAND = 46  # left free for a label between the signs at the plate and a dimension line
SMALL = 22.0
TINTS = (PLATE_THIN, PLATE, PLATE_THICK)


def draw_model(page: Page, job: Job, mesh: Mesh, state: str | None) -> None:
    """Draw the model with the loads of a case or combination; with none of them for None."""
    acting = acting_loads(job, state)
    top = TOP_ROOM + list_height(acting)
    room = page.drawing.inset(SIDE_ROOM, BOTTOM_ROOM, SIDE_ROOM, top)
    low, high = mesh.nodes.min(axis=0), mesh.nodes.max(axis=0)
    view = View.fit(low, high, room)
    _paint_plate(page, job, mesh, view)
    canvas = page.canvas
    draw_outline(canvas, mesh, view, mesh.nodes)
    wanted = draw_supports(canvas, job, mesh, view)
    draw_moves(canvas, job, mesh, view, acting_cases(job, state))
    wanted += draw_loads(canvas, job, mesh, view, acting)
    draw_body_loads(canvas, job, view, acting, (page.drawing.left, page.drawing.top))
    _draw_axes(page)
    _draw_caption(page, job, mesh)
    _draw_dimensions(page, job.units.length, view, (low, high), wanted)
    labels = Labels(canvas, page.drawing, page.paper)
    for label in [*_region_labels(job, mesh, view), *wanted]:
        labels.place(label)


def _paint_plate(page: Page, job: Job, mesh: Mesh, view: View) -> None:
    """Fill the plate, thicker regions darker, and draw the mesh where it can be told apart."""
    tint = np.array([_tint(job, name) for name in mesh.regions], float)
    elements, chosen, levels = [], [], []
    for block in mesh.blocks:
        for level in np.unique(tint[block.region]):
            elements.append(block.element)
            chosen.append(block.connectivity[tint[block.region] == level])
            levels.append(level)
    surface = tessellate(elements, chosen, mesh.nodes, view.scale)
    painted = paint(
        (WIDTH, HEIGHT),
        view.pixels(surface.values),
        surface.triangles,
        np.repeat(levels, surface.counts),
        colours=np.array([_rgb(colour) for colour in TINTS], np.uint8),
        limits=(0.0, len(TINTS) - 1.0),
    )
    sheet = Canvas(WIDTH, HEIGHT)
    draw_mesh(sheet, mesh, view, mesh.nodes)
    page.paper = over(painted, sheet.pixels())


def _tint(job: Job, region: str) -> int:
    """Index into TINTS: thinner than the plate, its own thickness, thicker."""
    return 1 + int(np.sign(job.thickness_of(region) - job.plate.thickness))


def _rgb(colour: str) -> tuple[int, ...]:
    return tuple(int(colour[i : i + 2], 16) for i in (1, 3, 5))


# --- dimensions, axes, captions ------------------------------------------------------------------


def _draw_dimensions(
    page: Page, unit: str, view: View, corners: tuple[Array, Array], wanted: Sequence[Label]
) -> None:
    """Overall width below the plate and height beside it, where there is a free strip."""
    canvas, room = page.canvas, page.drawing
    low, high = corners
    (left, bottom), (right, top) = view.pixels(low), view.pixels(high)
    inked = np.asarray(canvas.pixels()[::-1, :, 3] > 24)
    rows = np.asarray(inked[:, int(left) : int(right) + 1].any(axis=1))
    y = bottom - _free_strip(rows[int(room.bottom) : int(bottom) - 4][::-1], LABEL_BAND)
    width, height = (f"{show(v, 4)} {unit}" for v in high - low)
    start, end = np.array([left, bottom]), np.array([right, bottom])
    dimension(canvas, start, end, np.array([0.0, y - bottom]), width, LABEL_SIZE)
    columns = np.asarray(inked[int(bottom) : int(top) + 1].any(axis=0))
    # Labels beside the plate are wide: the height goes where fewer of them will be.
    labels_right = sum(label.anchor[0] > right - 20 for label in wanted)
    labels_left = sum(label.anchor[0] < left + 20 for label in wanted)
    if labels_right > labels_left:
        free = columns[int(room.left) : int(left) - 4][::-1]
        x, edge = left - _free_strip(free, 0), left
    else:
        free = columns[int(right) + 4 : int(room.right)]
        x, edge = right + _free_strip(free, 0), right
    start, end = np.array([edge, bottom]), np.array([edge, top])
    dimension(canvas, start, end, np.array([x - edge, 0.0]), height, LABEL_SIZE)


def _free_strip(inked: NDArray[np.bool_], band: int) -> int:
    """Distance from the plate to the middle of the first strip free of ink.

    inked : whether there is ink at 4, 5, 6, ... pixels from the plate
    band : what must be free between strip and ink, for a label
    """
    last = 0
    for number in range(len(inked)):
        if inked[number]:
            last = number + 1
        elif number - last >= 2 * STRIP + (band if last else 0):
            return number + 4 - STRIP
    return min(last + 4 + STRIP, len(inked) + 4 - STRIP)


def _draw_axes(page: Page) -> None:
    corner = np.array([page.drawing.left + 6, page.drawing.bottom + 12])
    for direction, name in ((np.array([1.0, 0.0]), "x"), (np.array([0.0, 1.0]), "y")):
        tip = corner + 52 * direction
        arrow(page.canvas, corner, tip, FAINT, width=2.0)
        page.canvas.text(tip + 13 * direction, name, SMALL, colour=FAINT, align="centre")


def _draw_caption(page: Page, job: Job, mesh: Mesh) -> None:
    """Elements, nodes and section, at the lower right."""
    counts: dict[str, int] = {}
    for block in mesh.blocks:
        name = block.element.name
        counts[name] = counts.get(name, 0) + block.element_count
    elements = " + ".join(f"{count} {name}" for name, count in counts.items())
    section = f"t = {show(job.plate.thickness)} {job.units.length}, {job.plate.material}"
    text = f"{section} · {elements}, {mesh.node_count} nodes"
    at = (page.drawing.right, page.drawing.bottom + 14)
    page.canvas.text(at, text, SMALL, colour=FAINT, align="right")


def _region_labels(job: Job, mesh: Mesh, view: View) -> Iterator[Label]:
    """Name, thickness and material of each region that is not the plate."""
    for number, name in enumerate(mesh.regions):
        if name == PLATE_REGION:
            continue
        nodes = [b.connectivity[b.region == number].ravel() for b in mesh.blocks]
        inside = mesh.nodes[np.unique(np.concatenate(nodes))]
        if not len(inside):
            continue
        middle = inside[np.argmin(np.linalg.norm(inside - inside.mean(axis=0), axis=1))]
        section = f"t = {show(job.thickness_of(name))} {job.units.length}"
        material = job.material_of(name).name
        lines = [section] if material == job.plate.material else [section, material]
        yield Label(view.pixels(middle), layouts(name, lines), covering=True)

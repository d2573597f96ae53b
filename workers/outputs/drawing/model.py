"""The picture of the model: plate and mesh, dimensions, supports, and the loads of one case.

Needs only the job and its mesh, so it can be drawn before anything is solved.
"""

from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import PLATE as PLATE_REGION
from workers.analysis.mesh import Mesh
from workers.geometry import CircleShape, OutlineGeometry
from workers.job import Job
from workers.outputs.drawing.acting import acting_cases, acting_loads
from workers.outputs.drawing.body_loads import draw_body_loads, list_height
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.labels import LINE, Label, Labels, layouts
from workers.outputs.drawing.loads import draw_loads
from workers.outputs.drawing.numbers import show
from workers.outputs.drawing.page import HEIGHT, LABEL_SIZE, SMALL_SIZE, WIDTH, Page, over
from workers.outputs.drawing.palette import FAINT, PLATE, PLATE_THICK, PLATE_THIN
from workers.outputs.drawing.plate import draw_mesh, draw_outline
from workers.outputs.drawing.raster import paint
from workers.outputs.drawing.supports import draw_moves, draw_supports
from workers.outputs.drawing.symbols import arrow, dimension
from workers.outputs.drawing.tessellation import tessellate
from workers.outputs.drawing.view import Box, View

Array = NDArray[np.floating[Any]]

# Beside the signs at the plate [pixels]: for a label, a dimension with its number, and the axes.
LABEL_WIDTH, DIMENSION, LEAST_ROOM, FOOT = 225.0, 64.0, 20.0, 34.0
NEAR = 20.0  # a label that begins so near to the edge of the plate goes outside it
MOST_HOLES = 6  # with a label
STRIP = 18  # half the strip that a dimension line takes [pixels]
SLENDER = 1.5  # height over width of a plate beside which there is always room
TINTS = (PLATE_THIN, PLATE, PLATE_THICK)


def draw_model(page: Page, job: Job, mesh: Mesh, state: str | None) -> None:
    """Draw the model with the loads of a case or combination; with none of them for None."""
    acting = acting_loads(job, state)
    low, high = mesh.nodes.min(axis=0), mesh.nodes.max(axis=0)
    view = View.fit(low, high, _room(page, job, mesh, state))
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
    for label in [*_region_labels(job, mesh, view), *wanted, *_hole_labels(job, view)]:
        labels.place(label)


def _room(page: Page, job: Job, mesh: Mesh, state: str | None) -> Box:
    """What the signs at the plate leave for it: how far they reach is seen on a trial drawing."""
    low, high = mesh.nodes.min(axis=0), mesh.nodes.max(axis=0)
    acting = acting_loads(job, state)
    slender = (high - low)[1] > SLENDER * (high - low)[0]
    # Beside a slender plate there is room for labels, and nothing under it in the corners.
    below = page.drawing.inset(0, 0 if slender else FOOT, 0, list_height(acting))
    spare = LABEL_WIDTH + DIMENSION
    view = View.fit(low, high, below.inset(spare, spare, spare, spare))
    trial = Canvas(WIDTH, HEIGHT)
    wanted = [
        *draw_supports(trial, job, mesh, view),
        *draw_loads(trial, job, mesh, view, acting),
    ]
    draw_moves(trial, job, mesh, view, acting_cases(job, state))
    inked = np.asarray(trial.pixels()[::-1, :, 3] > 24)
    (left, bottom), (right, top) = view.pixels(low), view.pixels(high)
    columns = np.append(np.flatnonzero(inked.any(axis=0)), [left, right])
    rows = np.append(np.flatnonzero(inked.any(axis=1)), [bottom, top])
    at = np.array([label.anchor for label in wanted]).reshape(-1, 2)
    over = 0.0 if slender else _height([w for w in wanted if w.anchor[1] > top - NEAR])
    under = 0.0 if slender else _height([w for w in wanted if w.anchor[1] < bottom + NEAR])

    def beside(outside: NDArray[np.bool_]) -> float:
        return LABEL_WIDTH if outside.any() else LEAST_ROOM

    return below.inset(
        left - columns.min() + beside(at[:, 0] < left + NEAR),
        bottom - rows.min() + max(under, LEAST_ROOM) + DIMENSION,
        columns.max() - right + beside(at[:, 0] > right - NEAR) + DIMENSION,
        rows.max() - top + max(over, LEAST_ROOM),
    )


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
    under = round(_height([label for label in wanted if label.anchor[1] < bottom + NEAR]))
    y = bottom - _free_strip(rows[int(room.bottom) : int(bottom) - 4][::-1], under)
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
        elif number - last >= 2 * STRIP + band:
            return number + 4 - STRIP
    return min(last + 4 + band + STRIP, len(inked) + 4 - STRIP)


def _draw_axes(page: Page) -> None:
    corner = np.array([page.drawing.left + 6, page.drawing.bottom + 12])
    for direction, name in ((np.array([1.0, 0.0]), "x"), (np.array([0.0, 1.0]), "y")):
        tip = corner + 52 * direction
        arrow(page.canvas, corner, tip, FAINT, width=2.0)
        page.canvas.text(tip + 13 * direction, name, SMALL_SIZE, colour=FAINT, align="centre")


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
    page.canvas.text(at, text, SMALL_SIZE, colour=FAINT, align="right")


def _height(labels: Sequence[Label]) -> float:
    """What labels side by side need above or below a plate [pixels]."""
    lines = max((len(label.layouts[0]) for label in labels), default=0)
    return LINE * LABEL_SIZE * lines + (20 if lines else 0)


def _hole_labels(job: Job, view: View) -> Iterator[Label]:
    """Name and diameter of round holes, where these are few."""
    holes = job.geometry.holes if isinstance(job.geometry, OutlineGeometry) else ()
    if len(holes) > MOST_HOLES:
        return
    for hole in holes:
        if isinstance(hole.shape, CircleShape):
            radius = hole.shape.radius
            edge = np.array(hole.shape.centre) + radius * np.sqrt(0.5)
            text = f"{hole.name} ⌀\N{NO-BREAK SPACE}{show(2 * radius, 4)}"
            yield Label(view.pixels(edge), [[text]], FAINT)


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

"""Which state governs where: the plate in zones, each with a letter, a hatching and a name.

The states that govern the largest part of the plate get a zone of their own; the others share one.
A zone reaches half-way to the next node, which is all that is known.
"""

from collections.abc import Mapping, Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from workers.analysis.field_mesh import FieldMesh
from workers.job import Job
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.hatching import HATCHINGS, hatch, swatch
from workers.outputs.drawing.marks import Mark, draw_marks, where_words
from workers.outputs.drawing.numbers import show
from workers.outputs.drawing.page import HEIGHT, LABEL_SIZE, WIDTH, Page
from workers.outputs.drawing.painting import surface_of
from workers.outputs.drawing.palette import FAINT, INK, PAPER
from workers.outputs.drawing.plate import draw_outline
from workers.outputs.drawing.raster import paint
from workers.outputs.drawing.tessellation import Surface
from workers.outputs.drawing.view import Box, View

HEADINGS = {
    "von_mises": "largest von Mises stress",
    "principal_max": "largest principal stress",
    "principal_min": "smallest principal stress",
    "shear_max": "largest shear stress",
    "displacement": "largest displacement",
}
LETTERS = "ABCDEFGH"
AIR = 50  # around the plate, for the peak's label [pixels]
BESIDE = 500.0  # width of a legend beside the plate
SWATCH = (46, 30)
ROW = 44.0  # of the legend
COLUMNS = 3  # of a legend below the plate
LETTER_SIZE = 30
SMALLEST = 20  # half the width of a zone that takes its letter [pixels]
COARSE = 4  # letters are placed on every so many pixels


class Zone(NamedTuple):
    """What one area stands for; share is its part of the plate."""

    number: int
    letter: str
    name: str
    share: float


def draw_governing(
    page: Page,
    job: Job,
    mesh: FieldMesh,
    state: NDArray[np.int32],
    quantity: str,
    names: Sequence[str],
    peak: Mapping[str, Any] | None,
) -> None:
    """Paint the zones of a measure; mark the extreme of all.

    state : (P,)   number of the governing state at each field point
    peak : the extreme as the results have it: `value`, `at` and `governs`; None: none is known
    """
    low, high = mesh.points.min(axis=0), mesh.points.max(axis=0)
    beside = (high - low)[0] * page.drawing.height < 1.6 * (high - low)[1] * page.drawing.width
    surface = surface_of(mesh, 1.0, mesh.points)
    zones, number_of = _zones(state[surface.nearest], _areas(surface), names)
    view, legend = _lay_out(page, low, high, len(zones), beside)
    numbers = _paint(surface_of(mesh, view.scale, mesh.points), view, state, number_of)
    page.paper = hatch(numbers)
    _part(page, numbers)
    draw_outline(page.canvas, mesh.mesh, view, mesh.mesh.nodes)
    _draw_letters(page.canvas, numbers, zones)
    _draw_legend(page.canvas, legend, zones, beside)
    if peak is not None:
        _mark(page, job, mesh, view, quantity, peak)


def _areas(surface: Surface) -> NDArray[np.float64]:
    a, b, c = (surface.values[surface.triangles[:, i]] for i in range(3))
    first, second = b - a, c - a
    return np.abs(first[:, 0] * second[:, 1] - first[:, 1] * second[:, 0]) / 2


def _zones(
    state: NDArray, area: NDArray, names: Sequence[str]
) -> tuple[list[Zone], NDArray[np.int64]]:
    """The zones, largest first, and the zone number of every state."""
    share = np.bincount(state, area, minlength=len(names)) / area.sum()
    largest = [s for s in np.argsort(-share, kind="stable")[: len(HATCHINGS)] if share[s] > 0]
    number_of = np.full(len(names), len(HATCHINGS))
    number_of[largest] = np.arange(len(largest))
    zones = [
        Zone(number, LETTERS[number], names[s], float(share[s])) for number, s in enumerate(largest)
    ]
    others = int((share > 0).sum()) - len(largest)
    if others:
        rest = 1.0 - sum(zone.share for zone in zones)
        zones.append(Zone(len(HATCHINGS), "", f"{others} others", rest))
    return zones, number_of


def _lay_out(page: Page, low: NDArray, high: NDArray, count: int, beside: bool) -> tuple[View, Box]:
    """Where the plate and the legend are: side by side, or one above the other."""
    room = page.drawing
    if beside:
        legend = Box(room.right - BESIDE, room.bottom, room.right, room.top)
        return View.fit(low, high, room.inset(AIR, AIR, AIR + BESIDE, AIR)), legend
    tall = ROW * -(-count // COLUMNS) + 10
    legend = Box(room.left, room.bottom, room.right, room.bottom + tall)
    return View.fit(low, high, room.inset(AIR, AIR + tall, AIR, AIR)), legend


def _paint(
    surface: Surface, view: View, state: NDArray, number_of: NDArray[np.int64]
) -> NDArray[np.int64]:
    """The zone number of every pixel, -1 outside the plate."""
    levels = len(HATCHINGS) + 1
    step = 255 // (levels + 1)
    codes = np.repeat((step * np.arange(levels))[:, None], 3, axis=1).astype(np.uint8)
    corners = surface.triangles.ravel()
    painted = paint(
        (WIDTH, HEIGHT),
        view.pixels(surface.values[corners]),
        np.arange(len(corners)).reshape(-1, 3),
        np.repeat(number_of[state[surface.nearest]], 3).astype(float),
        colours=codes,
        limits=(-0.5, levels - 0.5),
    )
    numbers = np.rint(painted[..., 0] / step).astype(np.int64)
    numbers[numbers >= levels] = -1
    return numbers


def _part(page: Page, numbers: NDArray[np.int64]) -> None:
    """A dark line between zones."""
    edge = np.zeros(numbers.shape, bool)
    for axis in (0, 1):
        one = np.take(numbers, range(numbers.shape[axis] - 1), axis)
        other = np.take(numbers, range(1, numbers.shape[axis]), axis)
        changes = (one != other) & (one >= 0) & (other >= 0)
        edge |= np.pad(changes, [(0, int(axis == 0)), (0, int(axis == 1))])
    page.paper[ndimage.binary_dilation(edge) & (numbers >= 0)] = (60, 66, 72)


def _draw_letters(canvas: Canvas, numbers: NDArray[np.int64], zones: Sequence[Zone]) -> None:
    """The letter of each zone where the zone is widest."""
    coarse = numbers[::COARSE, ::COARSE]
    for zone in zones:
        depth = ndimage.distance_transform_edt(np.pad(coarse == zone.number, 1))[1:-1, 1:-1]
        row, column = np.unravel_index(int(depth.argmax()), depth.shape)
        if zone.letter and COARSE * depth[row, column] >= SMALLEST:
            at = np.array([COARSE * column, HEIGHT - COARSE * row], float)
            canvas.disc(at, 0.72 * LETTER_SIZE, fill=PAPER, edge=INK, width=1.6)
            canvas.text(at, zone.letter, LETTER_SIZE, colour=INK, bold=True, align="centre")


def _draw_legend(canvas: Canvas, room: Box, zones: Sequence[Zone], beside: bool) -> None:
    columns = 1 if beside else COLUMNS
    width = room.width / columns
    middle = (room.bottom + room.top) / 2 + ROW * len(zones) / 2 if beside else room.top
    for place, zone in enumerate(zones):
        x = room.left + width * (place % columns)
        y = middle - ROW * (place // columns + 0.5)
        _draw_entry(canvas, zone, x, y, width - 24)


def _draw_entry(canvas: Canvas, zone: Zone, x: float, y: float, width: float) -> None:
    wide, tall = SWATCH
    left, bottom = round(x), round(y - tall / 2)
    canvas.image((left, bottom), swatch(zone.number, wide, tall))
    frame = [(left, bottom), (left + wide, bottom), (left + wide, bottom + tall),
             (left, bottom + tall)]  # fmt: skip
    canvas.line(frame, FAINT, 1.5, closed=True)
    canvas.text((x + wide + 12, y), zone.letter, LABEL_SIZE, colour=INK, bold=True)
    part = f"{zone.share:.0%}" if zone.share >= 0.01 else "<1%"
    canvas.text((x + width, y), part, LABEL_SIZE, colour=FAINT, align="right")
    name = canvas.fit(zone.name, LABEL_SIZE, width - wide - 44 - 76)
    canvas.text((x + wide + 44, y), name, LABEL_SIZE, colour=INK)


def _mark(
    page: Page, job: Job, mesh: FieldMesh, view: View, quantity: str, peak: Mapping[str, Any]
) -> None:
    """The extreme over the whole plate, with the state that it belongs to."""
    unit = job.units.length if quantity == "displacement" else job.units.stress
    name = page.canvas.fit(peak["governs"], LABEL_SIZE, 400, bold=True)
    where = f"in {name}, {where_words(mesh, peak['at'], job)}"
    mark = Mark(np.array(peak["at"]), f"{show(peak['value'])} {unit}", where)
    draw_marks(page, view, [mark])

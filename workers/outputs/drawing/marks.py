"""Marks of single places on a picture: the peak, and what is singular, each with its value."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from workers.analysis.field_mesh import FieldMesh
from workers.job import Job
from workers.outputs.drawing.labels import Label, Labels
from workers.outputs.drawing.numbers import vector
from workers.outputs.drawing.page import Page
from workers.outputs.drawing.palette import INK, PAPER
from workers.outputs.drawing.view import View

Array = NDArray[np.floating[Any]]

DIAMOND = 13 * np.array([(1.0, 0.0), (0.0, 1.0), (-1.0, 0.0), (0.0, -1.0)])


@dataclass(frozen=True, eq=False)
class Mark:
    """A value at a place of the plate; a singular one has a diamond, the peak a ring.

    value : no label where it is empty
    """

    at: Array
    value: str
    where: str
    singular: bool = False


def draw_marks(page: Page, view: View, marks: Sequence[Mark]) -> None:
    """A sign at each place and a label with its value, on one line or two."""
    places = [view.pixels(mark.at) for mark in marks]
    for mark, place in zip(marks, places, strict=True):
        for colour, width in ((PAPER, 6.5), (INK, 3.0)):
            if mark.singular:
                page.canvas.line(place + DIAMOND, colour, width, closed=True)
            else:
                page.canvas.disc(place, 11, fill=None, edge=colour, width=width)
    labels = Labels(page.canvas, page.drawing, page.paper)
    for mark, place in zip(marks, places, strict=True):
        if not mark.value:
            continue
        layouts = [(f"{mark.value} {mark.where}",), (mark.value, mark.where)]
        labels.place(Label(place, layouts, bold=not mark.singular))


def where_words(mesh: FieldMesh, at: ArrayLike, job: Job) -> str:
    """A position to four digits; what is rounding against the size of the plate is zero."""
    place = np.asarray(at, float)
    x, y = np.where(np.abs(place) < 1e-9 * mesh.mesh.diagonal, 0.0, place)
    return f"at {vector(x, y, digits=4)} {job.units.length}"

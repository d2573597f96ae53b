"""Graphs of lines read back as pixels: curves are where their values are."""

from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from tests.output_samples import mapped_mesh, plain_job, rectangle
from workers.cautions import STANDING
from workers.outputs.drawing.graph import PENS
from workers.outputs.preview import render_line

DISTANCE = np.linspace(0.0, 10.0, 21)


def line(**stress_xx) -> dict:
    """A line from (0, 5) to (10, 5) with a uniaxial stress yy of each state at its points."""
    cases = {}
    for name, values in stress_xx.items():
        yy = np.broadcast_to(values, DISTANCE.shape).astype(float)
        stress = np.column_stack((0 * yy, yy, 0 * yy))
        cases[name] = {"stress": stress.tolist(), "von_mises": np.abs(yy).tolist()}
    points = np.column_stack((DISTANCE, 5 + 0 * DISTANCE))
    return {"points": points.tolist(), "distance": DISTANCE.tolist(), "cases": cases}


def drawn(tmp_path: Path, of: dict, name: str = "net section") -> Image.Image:
    job = plain_job(mapped_mesh("Q4", (1, 1), rectangle(10, 10)))
    path = tmp_path / "line.png"
    render_line(path, job, name, of, cautions=STANDING)
    with Image.open(path) as image:
        image.load()
        return image


def curve(image: Image.Image, pen: int, rows: slice = slice(None)) -> tuple[np.ndarray, np.ndarray]:
    """Columns and mean rows of the pixels in the colour of a pen, outside the key."""
    colour = [int(PENS[pen][0][i : i + 2], 16) for i in (1, 3, 5)]
    pixels = np.asarray(image.convert("RGB")).astype(int)[rows]
    y, x = np.nonzero(np.abs(pixels - colour).max(axis=2) < 12)
    gap = np.flatnonzero(np.diff(np.unique(x)) > 25)  # between the curve and the key
    keep = x <= (np.unique(x)[gap[-1]] if len(gap) else x.max())
    columns = np.unique(x[keep])
    return columns, np.array([y[keep][x[keep] == c].mean() for c in columns])


def test_a_linear_stress_is_a_straight_line_from_corner_to_corner(tmp_path: Path) -> None:
    """Of two states the second highest has the second pen, here half the first everywhere.

    Upper panel: within a pixel of a straight line (the pen is 3 wide).
    """
    image = drawn(tmp_path, line(low=10 * DISTANCE, high=20 * DISTANCE))
    x, y = curve(image, 1, slice(0, 520))
    slope, start = np.polyfit(x, y, 1)
    assert np.abs(y - (slope * x + start)).max() < 1.5
    assert slope < 0  # rows count downwards


def test_the_lower_panel_shows_the_stress_across_the_line_with_its_sign(tmp_path: Path) -> None:
    """100 and -90 without change along the line: side by side in the upper panel, which knows no
    sign; far apart, on both sides of zero, in the lower one."""

    def level(image: Image.Image, pen: int) -> np.ndarray:
        """Rows of the level pieces of a curve, upper panel first."""
        colour = [int(PENS[pen][0][i : i + 2], 16) for i in (1, 3, 5)]
        near = np.abs(np.asarray(image.convert("RGB")).astype(int) - colour).max(axis=2) < 12
        rows = np.flatnonzero(near[:, 150:1000].sum(axis=1) > 300)
        pieces = np.split(rows, np.flatnonzero(np.diff(rows) > 9) + 1)
        return np.array([piece.mean() for piece in pieces])

    pulled = level(drawn(tmp_path, line(pull=100.0, push=-90.0)), 1)
    swapped = level(drawn(tmp_path, line(pull=-100.0, push=90.0)), 1)
    assert len(pulled) == len(swapped) == 2
    assert pulled[0] == swapped[0]
    assert pulled[1] - swapped[1] > 150


def test_what_is_drawn_is_written_into_the_file(tmp_path: Path) -> None:
    text = drawn(tmp_path, line(lift=5.0), name="Schnitt β").text
    assert text["Line"] == "Schnitt β"
    assert text["Quantity"] == "line"
    assert "engineer-review" in text["Cautions"]


@pytest.mark.parametrize("value", [0.0, 1e-13, -3e-14])
def test_a_line_without_stress_is_drawn_on_zero(tmp_path: Path, value: float) -> None:
    """Rounding is not blown up to a mountain: it is below 1e-12 of Young's modulus."""
    image = drawn(tmp_path, line(lift=value * (-1.0) ** np.arange(21)))
    assert image.size == (1600, 1200)
    ink = np.asarray(image.convert("L"))[200:480, 180:1000] < 60
    assert not ink.any()  # nothing between the zero line and the heading


def test_of_many_states_the_highest_are_named(tmp_path: Path) -> None:
    """Forty states: six pens, the rest grey; drawing them costs no more paper."""
    states = {f"rope {k}": 10.0 + k for k in range(40)}
    image = drawn(tmp_path, line(**states))
    for pen in range(1, len(PENS)):
        assert len(curve(image, pen)[0])

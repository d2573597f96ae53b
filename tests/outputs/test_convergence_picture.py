"""The picture of the convergence record, read back as pixels."""

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from PIL import Image

from tests.output_samples import mapped_mesh, plain_job, rectangle
from workers.cautions import STANDING
from workers.outputs.convergence import render_convergence
from workers.outputs.drawing.palette import INK, LOAD

Json = dict[str, Any]


def record(dofs: list[int], errors: list[float], target: float | None = 0.02) -> Json:
    meshes = [
        {"dofs": n, "elements": n, "relative_error": error, "case": "pull"}
        for n, error in zip(dofs, errors, strict=True)
    ]
    if target is None:
        return {"kind": "series", "meshes": meshes}
    return {"kind": "adaptive", "meshes": meshes, "target_error": target, "message": "reached"}


def drawn(tmp_path: Path, of: Json) -> Image.Image:
    job = plain_job(mapped_mesh("Q8", (1, 1), rectangle(10, 10)))
    path = tmp_path / "convergence.png"
    render_convergence(path, job, of, cautions=STANDING)
    with Image.open(path) as image:
        image.load()
        return image


def discs(image: Image.Image) -> np.ndarray:
    """Centres of the points of the curve: squares of 13 pixels all in ink, (k, 2) column, row."""
    pixels = np.asarray(image.convert("RGB")).astype(int)
    ink = np.abs(pixels - _rgb(INK)).max(axis=2) < 12
    windows = np.lib.stride_tricks.sliding_window_view(ink, (12, 12)).all(axis=(2, 3))
    rows, columns = np.nonzero(windows[150:900])
    found: list[list[float]] = []
    for row, column in zip(rows + 155.5, columns + 5.5, strict=True):
        near = [f for f in found if abs(f[0] - column) < 20 and abs(f[1] - row) < 20]
        if not near:
            found.append([column, row])
    return np.array(sorted(found))


def _rgb(colour: str) -> list[int]:
    return [int(colour[i : i + 2], 16) for i in (1, 3, 5)]


def test_equal_factors_are_equal_steps(tmp_path: Path) -> None:
    """A power law is a straight line on logarithmic axes: three points at equal distances."""
    found = discs(drawn(tmp_path, record([400, 1600, 6400], [0.08, 0.02, 0.005])))
    assert len(found) == 3
    steps = np.diff(found, axis=0)
    np.testing.assert_allclose(steps[0], steps[1], atol=4)
    assert (steps[:, 0] > 0).all()
    assert (steps[:, 1] > 0).all()  # rows count downwards


def test_the_target_is_a_line_at_its_height(tmp_path: Path) -> None:
    """The middle mesh is exactly on target."""
    image = drawn(tmp_path, record([400, 1600, 6400], [0.08, 0.02, 0.005], target=0.02))
    pixels = np.asarray(image.convert("RGB")).astype(int)
    red = (np.abs(pixels - _rgb(LOAD)).max(axis=2) < 12).sum(axis=1)
    assert abs(int(red.argmax()) - discs(image)[1, 1]) <= 3


@pytest.mark.parametrize(
    "of",
    [
        record([400], [0.05]),  # one mesh
        record([400, 1600, 3600], [0.05, 0.02, 0.01], target=None),  # a series has no target
        record([400, 1600], [0.0, 0.0]),  # nothing but rounding
    ],
    ids=["one mesh", "series", "no error"],
)
def test_every_record_can_be_drawn(tmp_path: Path, of: Json) -> None:
    assert drawn(tmp_path, of).size == (1600, 1200)

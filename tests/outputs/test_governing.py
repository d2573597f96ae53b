"""Pictures of what governs where, read back as pixels."""

from itertools import combinations
from pathlib import Path

import numpy as np
import pytest

from tests.output_samples import mapped_mesh, plain_job, rectangle
from tests.pictures import Picture
from workers.analysis.envelope import WORST
from workers.analysis.field_mesh import FieldMesh
from workers.cautions import STANDING
from workers.outputs.drawing.governing import HEADINGS
from workers.outputs.drawing.hatching import HATCHINGS, REST, hatch, swatch
from workers.outputs.drawing.palette import grey, rgb
from workers.outputs.preview import render_governing


def drawn(path: Path, state_of, names, quantity="von_mises", cells=(20, 10), size=(100.0, 50.0)):
    mesh = mapped_mesh("Q8", cells, rectangle(*size))
    field_mesh = FieldMesh.build(mesh)
    state = np.broadcast_to(state_of(*field_mesh.points.T), field_mesh.point_count)
    peak = {"value": 2.0, "at": list(size), "governs": names[0]}
    render_governing(
        path, plain_job(mesh), field_mesh, state, quantity, names, peak, cautions=STANDING
    )
    return Picture(path)


def tint_around(picture: Picture, s: float, t: float) -> list[int]:
    """The commonest colour near a place: the tint below a hatching."""
    row, column = picture.place(s, t)
    patch = picture.pixels[row - 12 : row + 13, column - 12 : column + 13].reshape(-1, 3)
    colours, counts = np.unique(patch, axis=0, return_counts=True)
    return colours[counts.argmax()].tolist()


def tint(number: int) -> list[int]:
    return rgb(HATCHINGS[number][0]).tolist()


@pytest.mark.usefixtures("rendering")
def test_zones_are_where_their_states_govern(tmp_path: Path) -> None:
    """State 1 left of x = 70, state 0 beyond; the larger zone comes first."""
    picture = drawn(tmp_path / "a.png", lambda x, y: np.where(x < 70, 1, 0), ["wind", "lift"])
    for s, t, zone in ((0.1, 0.2, 0), (0.6, 0.8, 0), (0.8, 0.2, 1), (0.95, 0.9, 1)):
        assert tint_around(picture, s, t) == tint(zone)
    assert (picture.text["Case"], picture.text["Quantity"]) == ("envelope", "von_mises")
    assert "engineer" in picture.text["Cautions"]


@pytest.mark.usefixtures("rendering")
def test_the_border_of_two_zones_lies_half_way_between_their_nodes(tmp_path: Path) -> None:
    """Q8 of 5 x 5: nodes every 2.5 along the sides; the last of state 0 is at 47.5."""
    picture = drawn(tmp_path / "a.png", lambda x, y: np.where(x < 49, 0, 1), ["a", "b"])
    row, _ = picture.place(0.5, 0.15)  # clear of the letters
    line = picture.pixels[row - 40 : row + 40].mean(axis=0)
    dark = np.flatnonzero(grey(line) < 190)
    inside = dark[(dark > picture.left + 20) & (dark < picture.right - 20)]
    at = (inside.mean() - picture.left) / picture.width * 100.0
    assert at == pytest.approx(48.75, abs=1.3)


@pytest.mark.usefixtures("rendering")
def test_rare_states_share_one_zone(tmp_path: Path) -> None:
    """Twelve strips of falling width: eight have a zone of their own, the last share one."""
    edges = np.cumsum(1.0 / np.arange(1, 13))
    strips = 100 * edges / edges[-1]
    names = [f"case {n}" for n in range(12)]
    picture = drawn(
        tmp_path / "a.png",
        lambda x, y: np.searchsorted(strips, x).clip(0, 11),
        names,
        cells=(60, 6),
    )
    middles = (np.concatenate(([0], strips[:-1])) + strips) / 200
    assert tint_around(picture, middles[0], 0.3) == tint(0)
    assert tint_around(picture, middles[4], 0.3) == tint(4)
    assert tint_around(picture, middles[11], 0.3) == rgb(REST).tolist()


@pytest.mark.usefixtures("rendering")
@pytest.mark.parametrize(
    ("quantity", "size"),
    [
        ("principal_max", (100.0, 90.0)),
        ("principal_min", (100.0, 50.0)),
        ("shear_max", (1000.0, 30.0)),
        ("displacement", (30.0, 1000.0)),
    ],
)
def test_every_measure_and_shape_can_be_drawn(tmp_path: Path, quantity: str, size) -> None:
    name = "a name that is as long as a name may be, eighty letters with all of its words..."
    picture = drawn(
        tmp_path / "a.png", lambda x, y: np.where(x < 0.51 * size[0], 0, 1), [name, "b"],
        quantity, size=size,
    )  # fmt: skip
    for s, zone in ((0.25, 0), (0.75, 1)):  # clear of the letters in the middle
        assert tint_around(picture, s, 0.14) == tint(zone)


def test_every_measure_has_a_heading() -> None:
    assert HEADINGS.keys() == WORST.keys()


def test_hatchings_can_be_told_apart_on_a_grey_print() -> None:
    """In grey any two differ by their lines: by 25 steps or more on a twentieth of the area."""
    patches = [grey(swatch(n, 96, 96)) for n in range(len(HATCHINGS))]
    for one, other in combinations(patches, 2):
        lines = (one - np.median(one), other - np.median(other))
        assert np.mean(np.abs(lines[0] - lines[1]) > 25) > 0.05


def test_tints_are_light_enough_for_ink_and_nearly_alike_in_grey() -> None:
    """Contrast of black on them is above 7:1 (WCAG 2.2, 1.4.6) where grey is above 150."""
    lightness = [float(grey(rgb(tint))) for tint, _, _ in HATCHINGS]
    assert min(lightness) > 200
    assert max(lightness) - min(lightness) < 30


def test_blank_paper_stays_blank() -> None:
    numbers = np.full((4, 4), -1)
    numbers[1, 1] = len(HATCHINGS)
    image = hatch(numbers)
    assert image[1, 1].tolist() == rgb(REST).tolist()
    assert (np.delete(image.reshape(-1, 3), 5, axis=0) == 255).all()

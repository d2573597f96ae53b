"""Pictures read back as pixels: what is painted is what was computed, where it was computed."""

from pathlib import Path

import numpy as np
import pytest
from scipy import ndimage

from tests.output_samples import fields_of, mapped_mesh, plain_job, quarter_ring, rectangle
from tests.pictures import Picture, like_ink
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.fields import Fields
from workers.analysis.singularities import SingularPlace
from workers.cautions import STANDING, Caution
from workers.geometry import Region
from workers.outputs.drawing.fields import stress_scale
from workers.outputs.drawing.palette import DIVERGING, SEQUENTIAL
from workers.outputs.preview import QUANTITIES, render_deformed, render_field

pytestmark = pytest.mark.usefixtures("rendering")

STRIP, TALL = (1200.0, 60.0), (60.0, 1200.0)


def still(x, y):
    return 0 * x, 0 * y


def state(mesh, stress, displacement=still) -> tuple[FieldMesh, Fields]:
    field_mesh = FieldMesh.build(mesh)
    values = np.column_stack(np.broadcast_arrays(*stress(*field_mesh.points.T)))
    return field_mesh, fields_of(field_mesh, displacement, values.astype(float))


def drawn(tmp_path, mesh, stress, quantity="von_mises", **options) -> Picture:
    field_mesh, fields = state(mesh, stress)
    options.setdefault("cautions", STANDING)
    path = tmp_path / "a.png"
    render_field(path, plain_job(mesh), field_mesh, fields, quantity, **options)
    return Picture(path)


def expected(table: np.ndarray, part: float) -> np.ndarray:
    return table[round(part * (len(table) - 1))].astype(int)


# --- colours are values ------------------------------------------------------------------------


@pytest.mark.parametrize("element", ["T3", "Q4", "T6", "Q8"])
def test_the_colour_of_a_place_is_the_stress_there(tmp_path, element):
    """sigma_x from 30 to 130 along a plate: von Mises is sigma_x; legend from 0 to 130.

    Two steps of the table of 256 colours allow for the width of a pixel and for rounding.
    """
    mesh = mapped_mesh(element, (4, 4), rectangle(100, 90))
    shown = drawn(tmp_path, mesh, lambda x, y: (30 + x, 0 * x, 0 * x))
    for s in (0.13, 0.37, 0.61, 0.88):
        part = (30 + 100 * s) / 130
        near = [expected(SEQUENTIAL, part + d / 255) for d in range(-3, 4)]
        assert min(np.abs(shown.at(s, 0.31) - c).max() for c in near) <= 3, s


def test_a_quadratic_field_is_drawn_as_a_parabola_not_as_chords(tmp_path):
    """One Q8 with sigma_x = 40 (2 x / 100)^2 at its nodes; straight chords between its nodes would
    give 20 at the quarter point, where the parabola has 10."""
    mesh = mapped_mesh("Q8", (1, 1), rectangle(100, 90))
    shown = drawn(tmp_path, mesh, lambda x, y: (40 * (x / 50) ** 2, 0 * x, 0 * x))
    parabola, chord = expected(SEQUENTIAL, 10 / 160), expected(SEQUENTIAL, 20 / 160)
    found = shown.at(0.25, 0.4)
    assert np.abs(found - parabola).sum() < 0.25 * np.abs(chord - parabola).sum()


def test_signed_stress_is_neutral_at_zero_and_takes_the_arm_of_its_sign(tmp_path):
    mesh = mapped_mesh("Q8", (4, 2), rectangle(100, 90))
    stress = lambda x, y: (x - 50, x - 50, 0 * x)  # noqa: E731  (both principal stresses)
    shown = drawn(tmp_path, mesh, stress, "principal_max")
    for s in (0.13, 0.34, 0.66, 0.87):  # between isolines
        near = [expected(DIVERGING, s + d / 255) for d in range(-3, 4)]
        assert min(np.abs(shown.at(s, 0.3) - c).max() for c in near) <= 4, s
    assert shown.at(0.5, 0.3).min() > 235


def test_isolines_are_dashed_where_the_stress_is_negative(tmp_path):
    """So a grey print tells the sign: the line at +40 is unbroken, the one at -40 is not."""
    mesh = mapped_mesh("Q8", (4, 2), rectangle(100, 90))
    shown = drawn(tmp_path, mesh, lambda x, y: (x - 50, x - 50, 0 * x), "principal_max")
    darkness = 255 - shown.pixels[int(shown.top) + 30 : int(shown.bottom) - 30].mean(axis=2)

    def line_darkness(s: float) -> np.ndarray:
        _, column = shown.place(s, 0)
        line = darkness[:, column - 2 : column + 3].max(axis=1)
        beside = np.minimum(darkness[:, column - 8], darkness[:, column + 8])
        return (line - beside) > 18

    solid, dashed = line_darkness(0.9), line_darkness(0.1)
    assert solid.mean() > 0.98
    assert 0.3 < dashed.mean() < 0.85


def test_a_stress_that_jumps_between_regions_is_not_smeared(tmp_path):
    """Uniform 100 left and 50 right of a border: both colours stand right beside it."""
    mesh = mapped_mesh(
        "Q4", (4, 3), rectangle(100, 90), ("plate", "pad"), lambda s, t: (s > 0.5).astype(int)
    )
    field_mesh = FieldMesh.build(mesh)
    xx = np.where(field_mesh.region == 0, 100.0, 50.0)
    fields = fields_of(field_mesh, still, np.column_stack((xx, 0 * xx, 0 * xx)))
    path = tmp_path / "a.png"
    job = plain_job(mesh, regions=(Region("pad", thickness=20.0),))
    render_field(path, job, field_mesh, fields, "von_mises", cautions=STANDING)
    shown = Picture(path)
    assert np.abs(shown.at(0.493, 0.4) - expected(SEQUENTIAL, 1.0)).max() <= 2
    assert np.abs(shown.at(0.507, 0.4) - expected(SEQUENTIAL, 0.5)).max() <= 2
    (row, column), width = shown.place(0.5, 0.2), 3
    border = shown.pixels[row - 100 : row, column - width : column + width]
    assert like_ink(border).any(axis=1).mean() > 0.6  # the border itself is drawn, dash-dotted


def test_a_uniform_stress_has_no_isolines_even_where_it_equals_a_tick(tmp_path):
    """100 up to rounding everywhere, and 100 is the last tick of the legend."""
    rng = np.random.default_rng(5)
    mesh = mapped_mesh("Q8", (6, 6), rectangle(100, 90))

    def uniform(x, y):
        return 100 * (1 + 1e-14 * rng.standard_normal(len(x))), 0 * x, 0 * x

    shown = drawn(tmp_path, mesh, uniform, limits=(0.0, 140.0))
    inside = shown.pixels[int(shown.top) + 60 : int(shown.bottom) - 60, 300:900].reshape(-1, 3)
    assert np.abs(inside - expected(SEQUENTIAL, 100 / 140)).max(axis=1).mean() < 3


def test_the_same_limits_give_the_same_colour_to_the_same_stress(tmp_path):
    mesh = mapped_mesh("Q8", (4, 4), rectangle(100, 90))
    colours = [
        drawn(
            tmp_path, mesh, lambda x, y, p=peak: (p * x / 100, 0 * x, 0 * x), limits=(0.0, 200.0)
        ).at(s, 0.3)
        for peak, s in ((200.0, 0.4), (100.0, 0.8))
    ]  # fmt: skip
    assert np.abs(colours[0] - colours[1]).max() <= 4


# --- shapes ------------------------------------------------------------------------------------


def test_the_legend_of_a_size_begins_at_zero_and_shows_it():
    values = np.array([3.0, 80.0])
    for limits in (None, (2.5, 100.0)):
        scale = stress_scale(values, limits, 1e-9, signed=False)
        assert scale.low == 0.0
        assert scale.ticks[0] == 0.0
    assert stress_scale(values - 40, None, 1e-9, signed=True).low == -37.0


@pytest.mark.parametrize("element", ["T6", "Q8"])
def test_curved_sides_are_drawn_curved(tmp_path, element):
    """A quarter ring 50-100 with two elements along the arc: chords would leave 7.6 % of the
    outer radius bare in the middle of each; a parabola through points of the circle strays by at
    most 0.3 % (worked out for 45 degrees)."""
    mesh = mapped_mesh(element, (2, 2), quarter_ring(50, 100))
    shown = drawn(tmp_path, mesh, lambda x, y: (80 + 0 * x, 0 * x, 0 * x))
    for angle in np.radians([11, 22.5, 34, 56, 67.5, 79]):
        inside, outside = (shown.at(r * np.cos(angle), r * np.sin(angle)) for r in (0.985, 1.015))
        assert inside.max() - inside.min() > 30
        assert outside.min() > 235


@pytest.mark.parametrize("size", [STRIP, TALL, (100.0, 90.0)])
def test_any_plate_fills_its_room_and_keeps_its_proportions(tmp_path, size):
    mesh = mapped_mesh("Q4", (3, 3), rectangle(*size))
    shown = drawn(tmp_path, mesh, lambda x, y: (80 + 0 * x, 0 * x, 0 * x))
    assert max(shown.width / 1400, shown.height / 750) > 0.8
    assert shown.width * size[1] == pytest.approx(
        shown.height * size[0], abs=1.5 * max(size)
    )  # pixels


def test_the_deformed_shape_is_drawn_by_its_stated_round_factor(tmp_path):
    """A plate 100 x 90 that is stretched by 0.04 mm: 7 % of the diagonal 134.5 over 0.04 is 235,
    so the factor is 200 and the plate is drawn 8 mm longer."""
    mesh = mapped_mesh("Q8", (4, 4), rectangle(100, 90))
    field_mesh, fields = state(
        mesh, lambda x, y: (0 * x, 0 * x, 0 * x), lambda x, y: (4e-4 * x, 0 * y)
    )
    path = tmp_path / "a.png"
    render_deformed(path, plain_job(mesh), field_mesh, fields, cautions=STANDING)
    shown = Picture(path)
    assert shown.width / shown.height == pytest.approx(108 / 90, rel=0.005)
    assert shown.text["Scale"] == "200"


# --- the peak ----------------------------------------------------------------------------------


def test_the_peak_is_ringed_where_it_is(tmp_path):
    """The greatest stress is at the node (75, 45) of a 100 x 90 plate."""
    mesh = mapped_mesh("Q4", (4, 4), rectangle(100, 90))

    def bump(x, y):
        return 40 + 60 * np.exp(-((x - 75) ** 2 + (y - 45) ** 2) / 300), 0 * x, 0 * x

    shown = drawn(tmp_path, mesh, bump)
    row, column = shown.place(0.75, 0.5)
    angles = np.linspace(0, 2 * np.pi, 60)

    def around(radius: float) -> np.ndarray:
        rows = (row - radius * np.sin(angles)).round().astype(int)
        columns = (column + radius * np.cos(angles)).round().astype(int)
        return shown.pixels[rows, columns]

    assert np.any([like_ink(around(r)) for r in (10, 11, 12)], axis=0).mean() > 0.9
    halo = np.max([around(radius).min(axis=1) for radius in np.arange(12.5, 15.1, 0.5)], axis=0)
    assert np.mean(halo > 150) > 0.8
    assert like_ink(around(30)).mean() < 0.1


@pytest.mark.parametrize("quantity", ["von_mises", "principal_max", "principal_min"])
def test_a_stress_free_plate_is_drawn_plain_not_as_amplified_rounding(tmp_path, quantity):
    rng = np.random.default_rng(3)
    mesh = mapped_mesh("Q8", (4, 4), rectangle(100, 90))
    noise = lambda x, y: tuple(1e-10 * rng.standard_normal((3, len(x))))  # noqa: E731
    shown = drawn(tmp_path, mesh, noise, quantity)
    middle = shown.pixels[300:900, 200:1100].reshape(-1, 3)
    usual = np.median(middle, axis=0)
    assert np.mean(np.abs(middle - usual).max(axis=1) < 12) > 0.75
    assert usual.min() > 220


# --- page and file -------------------------------------------------------------------------------


def test_pictures_carry_title_case_and_cautions(tmp_path):
    mesh = mapped_mesh("Q8", (2, 2), rectangle(100, 90))
    stop = Caution("yield-exceeded", "stop", "Von Mises stress exceeds yield.", "Redesign.")
    shown = drawn(tmp_path, mesh, lambda x, y: (80 + x, 0 * x, 0 * x), cautions=[stop, *STANDING])
    pixels = shown.pixels
    assert pixels.shape == (1200, 1600, 3)
    footer = pixels[-190:]
    assert (footer.max(axis=2) < 90).sum() > 5000  # text
    assert ((footer[..., 0] - footer[..., 1]) > 90).sum() > 800  # the red tag
    assert (pixels[:60].max(axis=2) < 90).sum() > 1500  # the title
    assert shown.text["Title"] == "Slipway cradle web"
    assert shown.text["Case"] == "lift"
    assert shown.text["Quantity"] == "von_mises"
    assert shown.text["Unit"] == "MPa"
    assert "yield-exceeded" in shown.text["Cautions"]


def test_principal_directions_are_drawn_along_the_stress(tmp_path):
    """Uniform tension in x: the ticks lie level."""
    mesh = mapped_mesh("Q8", (6, 6), rectangle(100, 90))
    shown = drawn(tmp_path, mesh, lambda x, y: (100 + 0 * x, 0 * x, 0 * x), "principal_max")
    inside = shown.pixels[int(shown.top) + 8 : int(shown.bottom) - 8,
                          int(shown.left) + 30 : int(shown.right) - 8]  # fmt: skip
    ticks, count = ndimage.label(like_ink(inside))
    boxes = ndimage.find_objects(ticks)
    assert count > 30
    assert np.mean([(b[1].stop - b[1].start) > 3 * (b[0].stop - b[0].start) for b in boxes]) > 0.9


def test_the_reported_peak_is_marked_and_what_is_beyond_the_legend_has_its_end_colour(tmp_path):
    """At the corner (100, 90) the mesh shows 300, which the results leave out as singular: the ring
    is at the reported 100 at (25, 45), the legend ends there, and the corner has a mark too."""
    mesh = mapped_mesh("Q4", (8, 8), rectangle(100, 90))

    def spike(x, y):
        return np.where((x > 99) & (y > 89), 300.0, np.where(x < 51, 100.0, 50.0)), 0 * x, 0 * x

    singular = {"value": 300.0, "at": [100.0, 90.0]}
    shown = drawn(
        tmp_path, mesh, spike, limits=(0.0, 100.0),
        peak={"value": 100.0, "at": [25.0, 45.0], "singular": singular},
    )  # fmt: skip
    plain = drawn(tmp_path, mesh, spike, limits=(0.0, 100.0))
    assert np.abs(shown.at(0.75, 0.5) - expected(SEQUENTIAL, 0.5)).max() <= 2
    assert np.abs(plain.at(0.985, 0.985) - expected(SEQUENTIAL, 1.0)).max() <= 2
    row, column = shown.place(0.25, 0.5)
    assert like_ink(shown.pixels[row, column + 9 : column + 14]).any()
    assert not like_ink(plain.pixels[row, column + 9 : column + 14]).any()
    corner = shown.place(1.0, 1.0)
    assert like_ink(shown.pixels[corner[0] - 15 : corner[0] - 9, corner[1]]).any()


def test_every_singular_place_beyond_the_peak_has_a_mark_and_no_other(tmp_path):
    """Two upper corners show 300 and 200 beside a reported 100; the lower ones, as singular, do not
    go beyond it."""
    mesh = mapped_mesh("Q4", (8, 8), rectangle(100, 90))

    def spikes(x, y):
        top = np.where(x > 99, 300.0, np.where(x < 1, 200.0, 90.0))
        return np.where(y > 89, top, 90.0), 0 * x, 0 * x

    corners = [(100.0, 90.0), (0.0, 90.0), (100.0, 0.0), (0.0, 0.0)]
    singular = {"value": 300.0, "at": [100.0, 90.0]}
    shown = drawn(
        tmp_path, mesh, spikes, limits=(0.0, 100.0),
        peak={"value": 100.0, "at": [50.0, 45.0], "singular": singular},
        places=[SingularPlace("fixed-end", 0, at, 0.7, 12.0, 15.0) for at in corners],
    )  # fmt: skip

    def is_marked(s: float, t: float) -> bool:
        (row, column), outward = shown.place(s, t), 1 if t == 0 else -1
        # The tip of a diamond, outside of the plate.
        beside = shown.pixels[row + outward * 11 : row + outward * 15 : outward, column]
        return bool(like_ink(beside).any())

    found = [is_marked(s, t) for s, t in ((1, 1), (0, 1), (1, 0), (0, 0))]
    assert found == [True, True, False, False]


def test_an_unknown_quantity_is_refused(tmp_path):
    mesh = mapped_mesh("Q8", (1, 1), rectangle(1, 1))
    with pytest.raises(KeyError):
        drawn(tmp_path, mesh, lambda x, y: (0 * x, 0 * x, 0 * x), "colour")


def test_the_quantities_are_those_of_the_interface():
    assert QUANTITIES == ("model", "deformed", "von_mises", "principal_max", "principal_min")


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no /dev/full on this system")
def test_a_full_disk_is_an_error(tmp_path):
    mesh = mapped_mesh("Q8", (1, 1), rectangle(1, 1))
    field_mesh, fields = state(mesh, lambda x, y: (0 * x, 0 * x, 0 * x))
    with pytest.raises(OSError, match=r"[Ss]pace"):
        render_field(
            Path("/dev/full"), plain_job(mesh), field_mesh, fields, "von_mises", cautions=STANDING
        )

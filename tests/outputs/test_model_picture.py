"""The picture of the model: supports and loads stand where they act and point as they act."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from PIL import Image
from scipy import ndimage

from tests.output_samples import mapped_mesh, plain_job, quarter_ring, rectangle
from workers.analysis.loads.cases import resolve_loads
from workers.analysis.mesh import Mesh
from workers.analysis.model import build_model
from workers.cautions import STANDING
from workers.errors import MeshError
from workers.geometry import Region
from workers.job import (
    Acceleration,
    Bearing,
    BodyForce,
    Combination,
    Job,
    LineLoad,
    LoadCase,
    Named,
    Nodes,
    PointForce,
    Pressure,
    Shear,
    Spin,
    Spring,
    Support,
    TemperatureChange,
    TotalForce,
    TotalMoment,
    Traction,
    Units,
)
from workers.outputs.drawing.acting import Acting, acting_cases, acting_loads
from workers.outputs.drawing.body_loads import list_height
from workers.outputs.drawing.load_values import along_side, describe
from workers.outputs.drawing.loads import FORCE
from workers.outputs.drawing.palette import INK, LOAD, SUPPORT
from workers.outputs.drawing.stations import runs
from workers.outputs.drawing.view import Box, View
from workers.outputs.preview import render_model

TOP, LEFT, LOW, RIGHT = (Named(name) for name in ("high", "left", "low", "right"))


def plate() -> Mesh:
    mesh = mapped_mesh("Q8", (6, 5), rectangle(100, 80))
    corner = int(np.argmax(mesh.nodes.sum(axis=1)))
    return Mesh(mesh.nodes, mesh.blocks, mesh.regions, mesh.sides, {"tip": corner})


FIXED = Support("low", LOW, ux=0.0, uy=0.0)


class Model:
    """A rendered model; ink by colour, and the box of the plate's outline."""

    def __init__(self, path: Path, job: Job, mesh: Mesh, case: str | None = "lift") -> None:
        render_model(path, job, mesh, case=case, cautions=STANDING)
        with Image.open(path) as image:
            self.pixels = np.asarray(image.convert("RGB")).astype(int)
            self.text = image.text
        patches, _ = ndimage.label(self.ink(INK), structure=np.ones((3, 3)))
        rows, columns = max(
            ndimage.find_objects(patches),
            key=lambda b: (b[0].stop - b[0].start) * (b[1].stop - b[1].start),
        )
        self.left, self.right, self.top, self.bottom = (
            columns.start, columns.stop, rows.start, rows.stop,
        )  # fmt: skip

    def ink(self, colour: str) -> np.ndarray:
        wanted = np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)])
        return np.abs(self.pixels - wanted).max(axis=2) < 26

    def near(self, colour: str, where: str, reach: int = 60) -> int:
        """Pixels of a colour in a band beside the plate."""
        bands = {
            "below": (slice(self.bottom + 1, self.bottom + reach), slice(self.left, self.right)),
            "above": (slice(self.top - reach, self.top - 1), slice(self.left, self.right)),
            "left": (slice(self.top, self.bottom), slice(self.left - reach, self.left - 1)),
            "right": (slice(self.top, self.bottom), slice(self.right + 1, self.right + reach)),
            "inside": (slice(self.top + 6, self.bottom - 6), slice(self.left + 6, self.right - 6)),
        }
        return int(self.ink(colour)[bands[where]].sum())


@pytest.fixture
def model(rendering, tmp_path):
    def make(*loads, supports=(FIXED,), case="lift", mesh=None, **options) -> Model:
        mesh = mesh or plate()
        job = plain_job(mesh, *loads, supports=supports, **options)
        return Model(tmp_path / "model.png", job, mesh, case)

    return make


# --- supports ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("support", "where"),
    [
        (Support("a", LOW, ux=0.0, uy=0.0), "below"),
        (Support("a", LOW, uy=0.0), "below"),
        (Support("a", LOW, normal=0.0), "below"),
        (Support("a", LEFT, ux=0.0), "left"),
        (Support("a", RIGHT, normal=0.0), "right"),
        (Support("a", RIGHT, uy=0.0), "right"),
        (Support("a", TOP, along=(1.0, 1.0)), "above"),
        (Support("a", LEFT, spring=Spring(normal=5.0)), "left"),
        (Support("a", RIGHT, spring=Spring(x=5.0, tangential=3.0)), "right"),
    ],
)
def test_a_support_is_drawn_on_the_outer_side_of_what_it_holds(model, support, where):
    shown = model(supports=(support,), case=None)
    elsewhere = {"below", "above", "left", "right", "inside"} - {where}
    assert shown.near(SUPPORT, where) > 100
    assert all(shown.near(SUPPORT, other, 14) < 80 for other in elsewhere)


def test_a_held_point_stands_on_a_pin_outside_the_plate(model):
    shown = model(supports=(Support("a", Named("tip"), ux=0.0, uy=0.0),), case=None)
    beyond = shown.ink(SUPPORT)[shown.top - 50 : shown.top, shown.right : shown.right + 50]
    assert beyond.sum() > 150
    assert shown.near(SUPPORT, "inside") == 0


def test_a_prescribed_displacement_adds_an_arrow_in_its_case_only(model):
    moved = Support("low", LOW, ux=0.0, uy=-0.5, case="lift")
    elsewhere = replace(moved, case="settled")
    shown = [
        model(PointForce(on=Named("tip"), force=(0, -5)), supports=(s,)) for s in (moved, elsewhere)
    ]
    stretches = []
    for one in shown:
        middle = (one.left + one.right) // 2
        below = one.ink(SUPPORT)[one.bottom + 40 : one.bottom + 150, middle - 2 : middle + 3]
        pieces, _ = ndimage.label(below.any(axis=1))
        stretches.append(np.bincount(pieces)[1:].max(initial=0))
    assert stretches[0] > 35 > stretches[1]  # an arrow, and at most a letter


# --- loads ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("load", "where"),
    [
        (PointForce(on=Named("tip"), force=(0.0, -500.0)), "above"),
        (TotalForce(on=RIGHT, force=(900.0, 0.0)), "right"),
        (TotalMoment(on=TOP, moment=5000.0), "above"),
        (Traction(on=TOP, start=(0.0, 5.0), end=(0.0, 2.0)), "above"),
        (Pressure(on=LEFT, start=4.0, end=0.0), "left"),
        (Shear(on=TOP, start=4.0, end=4.0), "above"),
        (LineLoad(on=RIGHT, start=(3.0, -4.0), end=(3.0, -4.0)), "right"),
    ],
)
def test_a_load_is_drawn_beside_the_side_that_it_acts_on(model, load, where):
    shown = model(load)
    assert shown.near(LOAD, where, 110) > 250
    assert shown.near(LOAD, "inside") == 0


@pytest.mark.parametrize("sign", [1, -1])
def test_arrows_of_a_pressure_point_into_the_material_those_of_suction_out(model, sign):
    """The head of an arrow is three times as wide as its shaft: the rows beside the outline hold
    more ink than those at the far end for pressure, less for suction."""
    shown = model(Pressure(on=TOP, start=4.0 * sign, end=4.0 * sign))
    rows = shown.ink(LOAD)[shown.top - 60 : shown.top - 7, shown.left + 20 : shown.right - 20]
    rows = rows[:, : rows.shape[1] // 3].sum(axis=1)  # beside the label
    near, far = rows[-10:].sum(), rows[:16].min()
    middle = np.median(rows)
    assert (near > 1.5 * 10 * middle) == (sign > 0)
    assert far >= 0


@pytest.mark.parametrize(
    "load",
    [
        Acceleration(acceleration=(0.0, -9810.0)),
        BodyForce(force=(1e-4, 0.0)),
        Spin(about=(50.0, 40.0), speed=30.0),
        TemperatureChange(change=-20.0),
    ],
)
def test_what_acts_on_the_whole_plate_is_listed_above_the_drawing(model, load):
    shown = model(load)
    listed = shown.ink(LOAD)[: shown.top - 20, :1000]
    assert listed.sum() > 900


def test_a_force_on_one_of_two_neighbouring_nodes_given_by_number_is_drawn(model):
    """Two nodes that share an element side are points here, not a side."""
    mesh = plate()
    nodes = mesh.facet_nodes(mesh.sides["high"][:1])
    shown = model(PointForce(on=Nodes(tuple(map(int, nodes))), force=(0.0, -500.0)), mesh=mesh)
    assert shown.near(LOAD, "above", 110) > 400


def test_a_long_list_of_body_loads_is_cut_and_counted(model):
    heats = [TemperatureChange(change=float(n)) for n in range(1, 13)]
    assert list_height([Acting(load, 1.0) for load in heats]) < 260
    assert model(*heats).ink(LOAD)[:500, :700].sum() > 3000


def test_without_a_case_no_load_is_drawn(model):
    shown = model(Pressure(on=TOP, start=4.0, end=4.0), case=None)
    assert shown.ink(LOAD)[:1050].sum() == 0
    assert shown.text["Case"] == ""


def test_a_pin_presses_on_the_half_of_the_hole_towards_its_force(model):
    """Bore of a quarter ring pressed towards +y: arrows are long at 90 degrees, nothing at 0."""
    mesh = mapped_mesh("Q8", (4, 8), quarter_ring(50, 100))
    held = Support("low", RIGHT, normal=0.0)
    shown = model(Bearing(on=LEFT, force=(0.0, 900.0)), mesh=mesh, supports=(held,))
    rows, columns = np.nonzero(shown.ink(LOAD))
    x, y = columns - shown.left, shown.bottom - rows
    radius = (shown.right - shown.left) / 2
    in_bore = (np.hypot(x, y) > radius - 62) & (np.hypot(x, y) < radius)
    angle = np.degrees(np.arctan2(y, x))[in_bore]
    assert (angle > 60).sum() > 300
    assert (angle > 60).sum() > 1.8 * (angle < 30).sum()


def test_a_load_in_a_small_hole_is_drawn_as_one_arrow_from_its_middle(model):
    """In a bore of 8 mm, arrows on its wall would be too short to be read."""
    mesh = mapped_mesh("Q8", (4, 8), quarter_ring(8, 100))
    held = Support("low", RIGHT, normal=0.0)
    shown = model(Bearing(on=LEFT, force=(0.0, 900.0)), mesh=mesh, supports=(held,))
    column = shown.ink(LOAD)[:, shown.left - 4 : shown.left + 5].any(axis=1)
    rows = np.flatnonzero(column[shown.bottom - 130 : shown.bottom + 3])
    assert rows[-1] - rows[0] == pytest.approx(FORCE, abs=6)
    assert len(rows) > 0.95 * FORCE  # in one piece


def test_thicker_regions_are_darker_and_have_a_border(model):
    mesh = mapped_mesh(
        "Q4", (4, 4), rectangle(100, 80), ("plate", "boss"), lambda s, t: (s > 0.5).astype(int)
    )
    shown = model(mesh=mesh, case=None, regions=(Region("boss", thickness=25.0),))
    rows = slice(shown.top + 10, shown.top + 60)
    middle = (shown.left + shown.right) // 2
    thin = np.median(shown.pixels[rows, shown.left + 20 : middle - 20].mean(axis=2))
    thick = np.median(shown.pixels[rows, middle + 20 : shown.right - 20].mean(axis=2))
    assert thick < thin - 15
    assert shown.ink(INK)[shown.top + 10 : shown.bottom - 10, middle - 3 : middle + 3].sum() > 300


def test_the_dimension_line_is_as_long_as_the_plate(model):
    shown = model(case=None)
    grey = np.abs(shown.pixels - np.array([0x5B, 0x66, 0x70])).max(axis=2) < 40
    below = grey[shown.bottom + 20 : shown.bottom + 150]
    below[:, : shown.left - 20] = below[:, shown.right + 20 :] = False  # axes and caption
    longest = max(below, key=lambda row: row.sum())
    columns = np.flatnonzero(longest)
    assert columns[-1] - columns[0] == pytest.approx(shown.right - shown.left, abs=12)


def test_an_unknown_case_and_an_unknown_side_are_refused(model):
    with pytest.raises(KeyError):
        model(case="no such case")
    lost = Pressure(on=Named("ledge"), start=1.0, end=1.0, pointer="/load_cases/lift/0")
    with pytest.raises(MeshError) as caught:
        model(lost)
    assert caught.value.faults[0].pointer == "/load_cases/lift/0/on"


# --- the same loads as the analysis --------------------------------------------------------------


@pytest.mark.parametrize(
    "load",
    [
        TotalForce(on=RIGHT, force=(900.0, -200.0)),
        Traction(on=TOP, start=(1.0, 5.0), end=(0.0, 2.0)),
        LineLoad(on=LEFT, start=(1.0, 5.0), end=(-3.0, 2.0)),
        Pressure(on=LEFT, start=4.0, end=1.0),
        Shear(on=TOP, start=4.0, end=1.0),
        Shear(on=RIGHT, start=4.0, end=4.0),
        TotalMoment(on=TOP, moment=5000.0),
        TotalMoment(on=RIGHT, moment=-300.0),
    ],
)
def test_drawn_arrows_have_the_resultant_of_the_nodal_loads_of_the_analysis(load):
    """Arrows at many places, added up along the side, against the analysis' own nodal forces.

    Both are scaled to unit size: arrows show relative size only. 400 places by the midpoint rule
    on loads that vary linearly: a few parts in 100 000.
    """
    mesh = plate()
    job = plain_job(mesh, load, supports=(FIXED,))
    nodal = resolve_loads(build_model(job, mesh)).applied[:, :, 0]
    view = View.fit((0, 0), (100, 80), Box(0, 0, 1000, 800))
    (run,) = runs(mesh, mesh.sides[load.on.name], view)
    points, outward, part = run.stations(run.length / 400)
    arrows = along_side(load, outward, part)

    def resultant(at: np.ndarray, force: np.ndarray) -> np.ndarray:
        arm = at - np.array([20.0, 30.0])
        moment = (arm[:, 0] * force[:, 1] - arm[:, 1] * force[:, 0]).sum() / 100
        total = np.array([*force.sum(axis=0), moment])
        return total / np.abs(total).max()

    assert resultant(view.position(points), arrows) == pytest.approx(
        resultant(mesh.nodes, nodal), abs=1e-3
    )


def test_a_combination_acts_with_its_factors():
    mesh = plate()
    job = plain_job(mesh, Pressure(on=TOP, start=4.0, end=4.0), case="a")
    more = LoadCase("b", (Acceleration(acceleration=(0.0, -9810.0)),))
    idle = LoadCase("c", (TemperatureChange(change=10.0),))
    both = Combination("ULS", {"a": 1.5, "b": -2.0, "c": 0.0})
    job = Job(
        job.title, job.units, job.materials, job.geometry, job.plate, (FIXED,),
        (*job.load_cases, more, idle), (both,),
    )  # fmt: skip
    acting = acting_loads(job, "ULS")
    units = Units("mm", "N")
    assert [describe(one.load, one.factor, units) for one in acting] == [
        "pressure 6 MPa",
        "acceleration 19\N{NO-BREAK SPACE}620 mm/s²",
    ]
    assert [one.factor for one in acting_loads(job, "a")] == [1.0]
    assert acting_cases(job, "ULS") == {"a", "b"}
    assert acting_cases(job, None) == set()

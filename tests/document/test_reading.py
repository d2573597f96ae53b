"""What good documents become: the numbers, names and places of the job."""

from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

from tests.good_documents import good
from workers import geometry as shapes
from workers import job as parts
from workers.document.read import load
from workers.geometry import MeshGeometry, OutlineGeometry, PatchGeometry
from workers.job import Units


def test_units_are_converted_to_the_declared_ones() -> None:
    """By hand: 210 GPa = 210 000 N/mm2, 7850 kg/m3 = 7.85e-9 N s2/mm4, 2.5 cm = 25 mm."""
    job = load(good("outline"))
    steel = job.materials["steel"]
    assert job.units == Units("mm", "N")
    assert (steel.youngs_modulus, steel.density) == (210_000, 7.85e-9)
    assert (steel.yield_strength, steel.thermal_expansion) == (355, 1.2e-5)
    assert isinstance(job.geometry, OutlineGeometry)
    assert job.geometry.holes[0].shape == shapes.CircleShape((80, 90), 25)
    assert job.meshing.sizes == {"pin": 2, "boss": 4, "tip": 1, "round": 3}


def test_every_kind_of_load_is_read() -> None:
    cases = {case.name: case.loads for case in load(good("outline")).load_cases}
    plain = {
        name: [(type(one), getattr(one.on, "name", None), values_of(one)) for one in loads]
        for name, loads in cases.items()
    }
    assert plain == {
        "lift": [
            (parts.Bearing, "pin", {"force": (0, 80_000)}),
            (parts.PointForce, "tip", {"force": (1, -2)}),
        ],
        "self weight": [(parts.Acceleration, None, {"acceleration": (0, -9810)})],
        "wind": [
            (parts.TotalForce, "right", {"force": (300, 0)}),
            (parts.TotalMoment, "right", {"moment": 2e6}),
            (parts.Traction, "crown", {"start": (1, 0), "end": (0, 1)}),
            (parts.Pressure, "crown", {"start": 0, "end": 3}),
            (parts.Shear, "slot", {"start": 2, "end": 2}),
            (parts.LineLoad, "slot low", {"start": (5, 0), "end": (5, 0)}),
        ],
        "sun": [(parts.TemperatureChange, "insert", {"change": 20})],
        "turning": [
            (parts.Spin, None, {"about": (0, 0), "speed": pytest.approx(np.pi)}),
            (parts.BodyForce, "boss", {"force": (0, 1e-6)}),
        ],
        "settled": [],
    }


def values_of(load: parts.Load) -> dict[str, object]:
    return {key: value for key, value in vars(load).items() if key not in ("on", "pointer")}


def test_every_kind_of_support_and_target_is_read() -> None:
    supports = load(good("outline")).supports
    assert supports[1].normal == 0.1
    assert supports[1].case == "settled"
    assert supports[2].spring == parts.Spring(x=50, tangential=3)
    assert (supports[3].along, supports[3].displacement) == ((1, 1), 0.5)
    assert [support.on for support in supports] == [
        parts.Named("base"),
        parts.Named("left"),
        parts.Named("left"),
        parts.Named("tip"),
        parts.Segment((160, 0), (160, 90), 0.1),
        parts.Box((0, 0), (10, 10)),  # the corners were given as right-low and left-high
        parts.OnCircle((80, 90), 25),
    ]


def test_supports_are_labelled_by_name_target_or_number_without_doubles() -> None:
    labels = [support.label for support in load(good("outline")).supports]
    assert labels == [
        "foundation", "left", "left (2)", "tip", "support 5", "support 6", "support 7",
    ]  # fmt: skip


def test_many_supports_of_one_side_have_labels_that_are_names() -> None:
    """The rule for names allows 80 characters; the number takes its place among them."""
    document = good("mesh")
    name = "x" * 80
    document["geometry"]["mesh"]["sides"][name] = [[0, 1]]
    document["supports"] = [{"on": name, "ux": 0}] * 3000
    labels = [support.label for support in load(document).supports]
    assert labels[0] == name
    assert labels[1] == "x" * 76 + " (2)"
    assert labels[-1] == "x" * 73 + " (3000)"
    assert len(set(labels)) == 3000


def test_a_given_label_goes_before_one_made_up() -> None:
    document = good("mesh")
    document["supports"] = [{"on": "wall", "ux": 0}, {"name": "wall", "on": "low", "uy": 0}]
    assert [support.label for support in load(document).supports] == ["wall (2)", "wall"]


def test_parts_know_their_places() -> None:
    job = load(good("outline"))
    assert isinstance(job.geometry, OutlineGeometry)
    assert job.geometry.outline[2].pointer == "/geometry/outline/2"
    assert job.geometry.holes[1].shape[1].pointer == "/geometry/holes/1/outline/1"
    assert job.geometry.regions[1].pointer == "/geometry/regions/1"
    assert job.supports[3].pointer == "/supports/3"
    assert job.load_cases[1].pointer == "/load_cases/self weight"
    assert job.load_cases[2].loads[4].pointer == "/load_cases/wind/4"
    assert job.combinations[0].pointer == "/combinations/lift x 1.5"
    assert job.requests.lines["net section"].pointer == "/requests/lines/net section"
    assert job.requests.cuts["root"].pointer == "/requests/cuts/root"


def test_a_region_may_be_a_name_for_loads_only() -> None:
    """A part that is warmed has the thickness and the material of the plate unless told."""
    document = good("outline")
    del document["geometry"]["regions"][0]["thickness"]
    document["load_cases"]["sun"] = [{"on": "boss", "temperature_change": 20}]
    job = load(document)
    assert job.thickness_of("boss") == job.plate.thickness
    assert job.material_of("boss").name == job.plate.material


def test_patches_are_read_with_their_defaults() -> None:
    """30 mm is 30 / 25.4 in."""
    geometry = load(good("patches")).geometry
    assert isinstance(geometry, PatchGeometry)
    web, toe = geometry.patches
    assert web.divisions == (8, 4)
    assert (web.grading, toe.grading) == ((2, 1), (1, 1))
    assert web.sides == ("low", None, "high", "wall")
    assert (web.through[0], toe.through) == ((5, -1), (None,) * 4)
    assert (web.region, toe.region) == (None, "thick")
    assert geometry.regions[0].thickness == pytest.approx(30 / 25.4, rel=1e-15)


def test_a_mesh_becomes_arrays() -> None:
    geometry = load(good("mesh")).geometry
    assert isinstance(geometry, MeshGeometry)
    assert geometry.nodes.dtype == np.float64
    assert geometry.nodes.shape == (7, 2)
    assert geometry.nodes[5].tolist() == [2, 1.5]
    quadrilaterals, triangle = geometry.blocks
    assert quadrilaterals.connectivity.dtype == np.int32
    assert quadrilaterals.connectivity.tolist() == [[0, 1, 4, 3], [1, 2, 5, 4]]
    assert (quadrilaterals.element, quadrilaterals.region) == ("Q4", "web")
    assert (triangle.element, triangle.region) == ("T3", None)
    assert triangle.pointer == "/geometry/mesh/blocks/1"
    assert geometry.sides == {"wall": ((3, 0),), "low": ((0, 1), (1, 2))}
    assert geometry.points == {"nose": 6}


def test_what_is_left_out_has_its_default() -> None:
    job = load(good("mesh"))
    assert job.meshing == parts.Meshing()
    assert job.requests == parts.Requests()
    assert job.limits == parts.Limits()
    assert job.combinations == ()
    assert job.label is None


def test_documents_read_at_once_keep_their_own_units() -> None:
    """12 mm is 0.012 m and 12 mm whatever another thread reads meanwhile."""
    metres, millimetres = good("mesh"), good("mesh")
    millimetres["units"]["length"] = "mm"
    with ThreadPoolExecutor(4) as pool:
        jobs = list(pool.map(load, [metres, millimetres] * 40))
    assert [job.plate.thickness for job in jobs] == [0.012, 12.0] * 40

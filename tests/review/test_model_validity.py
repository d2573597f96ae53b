"""Thickness against the size of the plate, of holes and rounds, and of short sides."""

from dataclasses import replace
from types import MappingProxyType

import numpy as np
import pytest

from tests.plates import grid, ring
from tests.reviewed import raised, sound_job, sound_mesh
from workers.analysis.mesh import Mesh
from workers.geometry import (
    Geometry,
    Hole,
    MeshGeometry,
    OutlineGeometry,
    Patch,
    PatchGeometry,
    Region,
    Vertex,
)
from workers.job import Job, Plate
from workers.review.features import holes, parts

RECTANGLE = ((0.0, 0.0), (200.0, 0.0), (200.0, 100.0), (0.0, 100.0))


def job_of(thickness: float, geometry: Geometry | None = None) -> Job:
    job = sound_job(plate=Plate("steel", thickness), load_cases=(), supports=())
    return replace(job, geometry=geometry) if geometry else job


def found(job: Job, mesh: Mesh | None = None) -> dict[str, dict]:
    cautions = raised(job, results={}, mesh=mesh or sound_mesh()).get("thick-plate", [])
    return {caution.evidence["quantity"]: dict(caution.evidence) for caution in cautions}


# --- size of the plate -------------------------------------------------------------------------


@pytest.mark.parametrize("thickness", [26.0, 100.0])
def test_a_plate_a_quarter_as_thick_as_wide_is_thick(thickness: float) -> None:
    evidence = found(job_of(thickness))["plate"]
    assert evidence["value"] == pytest.approx(thickness / 100)
    assert evidence["limit"] == 0.25


@pytest.mark.parametrize("thickness", [24.0, 1.0])
def test_a_plate_less_than_a_quarter_as_thick_as_wide_is_thin(thickness: float) -> None:
    assert found(job_of(thickness)) == {}


def test_a_thick_region_counts_and_a_region_without_elements_does_not() -> None:
    boss = PatchGeometry((), (Region("boss", thickness=60.0), Region("unused", thickness=500.0)))
    mesh = grid("Q8", 12, 6, size=(200.0, 100.0), regions=("plate", "boss", "unused"),
                region_of_column=np.repeat([0, 1], 6))  # fmt: skip
    evidence = found(job_of(5.0, boss), mesh)["plate"]
    assert evidence["region"] == "boss"
    assert evidence["value"] == pytest.approx(0.6)


def test_the_size_of_a_turned_strip_is_its_width() -> None:
    angle = 0.5
    turn = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    strip = grid("Q4", 20, 2, size=(200.0, 10.0))
    turned = Mesh(strip.nodes @ turn, strip.blocks)
    assert [part.size for part in parts(turned)] == [pytest.approx(10.0)]


def test_the_size_of_a_plate_does_not_depend_on_where_its_mesh_is_fine() -> None:
    """Nodes drawn to two opposite corners of 100 x 60 would tilt the axes of their cloud."""

    def towards_corners(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        s = 2 * x / 100 - 1
        away = y / 60 - 0.5
        return 50 * (1 + np.sign(s) * np.abs(s) ** (1 / (2 + 2 * np.sign(s) * away))), y

    mesh = grid("Q4", 20, 20, size=(100.0, 60.0), shape=towards_corners)
    assert [part.size for part in parts(mesh)] == [pytest.approx(60.0)]


def test_the_size_of_a_thin_ring_is_near_twice_its_wall_not_its_diameter() -> None:
    """4 area / perimeter = 2 (R - r) for a ring."""
    assert [p.size for p in parts(ring("Q8", 48, 2, 90.0, 100.0))] == [pytest.approx(20, rel=1e-4)]


def test_each_part_has_its_own_size() -> None:
    large, small = (grid("Q4", 4, 4, size=size) for size in ((100.0, 100.0), (20.0, 10.0)))
    nodes = np.vstack((large.nodes, small.nodes + np.array([300.0, 0.0])))
    block = small.blocks[0]
    block = replace(block, connectivity=block.connectivity + np.int32(len(large.nodes)))
    both = Mesh(nodes, (*large.blocks, block))
    assert sorted(p.size for p in parts(both)) == [pytest.approx(10.0), pytest.approx(100.0)]


# --- holes and rounds --------------------------------------------------------------------------


def test_the_radius_of_a_round_hole_comes_from_the_mesh() -> None:
    (hole,) = holes(ring("Q8", 48, 4, 10.0, 100.0))
    assert hole.size == pytest.approx(10.0, rel=1e-4)


@pytest.mark.parametrize("thickness", [20.2, 40.0])
def test_a_hole_of_less_diameter_than_the_thickness_is_told(thickness: float) -> None:
    evidence = found(job_of(thickness), ring("Q8", 48, 4, 10.0, 400.0))["radius"]
    assert evidence["value"] == pytest.approx(thickness / 10, rel=1e-4)
    assert np.hypot(*evidence["at"]) == pytest.approx(10.0)


@pytest.mark.parametrize("thickness", [19.9, 2.0])
def test_a_hole_wider_than_the_thickness_is_silent(thickness: float) -> None:
    assert found(job_of(thickness), ring("Q8", 48, 4, 10.0, 400.0)) == {}


def outline(**first_vertex: object) -> OutlineGeometry:
    vertices = [Vertex(at) for at in RECTANGLE]
    return OutlineGeometry((replace(vertices[0], **first_vertex), *vertices[1:]))


# An arc from (0, 0) to (200, 0) through (100, -h) has the radius (100^2 + h^2) / (2 h).
PATCH_ARC = PatchGeometry(
    (Patch("a", RECTANGLE, (12, 6), through=((100.0, -100.0), None, None, None)),)
)


@pytest.mark.parametrize(
    ("geometry", "thickness", "radius"),
    [
        (outline(fillet=4.0), 9.0, 4.0),
        (outline(fillet=1.0), 24.0, 1.0),
        (outline(through=(100.0, -1e-3)), 24.0, None),  # all but straight
        (outline(fillet=4.0), 7.9, None),
        (outline(through=(100.0, -100.0)), 24.0, None),
        (outline(through=(100.0, -100.0)), 201.0, 100.0),
        (PATCH_ARC, 201.0, 100.0),
        (PATCH_ARC, 24.0, None),
    ],
)
def test_fillets_and_arcs_are_compared_with_the_thickness(geometry, thickness, radius) -> None:
    evidence = found(job_of(thickness, geometry)).get("radius")
    if radius is None:
        assert evidence is None
    else:
        assert evidence["value"] == pytest.approx(thickness / radius)


def test_the_fillet_of_a_drawn_hole_is_compared_as_well() -> None:
    slot = tuple(Vertex(at, fillet=2.0) for at in ((50.0, 40.0), (90.0, 40.0), (90.0, 60.0)))
    geometry = replace(outline(), holes=(Hole("slot", slot),))
    assert found(job_of(5.0, geometry))["radius"]["places"] == 3


# --- short sides -------------------------------------------------------------------------------


def notched(length: float) -> OutlineGeometry:
    """A corner cut off, so that one side is that long."""
    cut = length / np.sqrt(2)
    ends = (Vertex((cut, 0.0)), *(Vertex(at) for at in RECTANGLE[1:]), Vertex((0.0, cut), "cut"))
    return OutlineGeometry(ends)


@pytest.mark.parametrize(("length", "thickness"), [(2.0, 4.1), (10.0, 24.0)])
def test_a_side_of_less_than_half_the_thickness_is_told(length: float, thickness: float) -> None:
    evidence = found(job_of(thickness, notched(length)))["side"]
    assert evidence["value"] == pytest.approx(thickness / length)


@pytest.mark.parametrize(("length", "thickness"), [(2.0, 3.9), (40.0, 24.0)])
def test_a_side_of_more_than_half_the_thickness_is_silent(length: float, thickness: float) -> None:
    assert found(job_of(thickness, notched(length))) == {}


def test_a_short_named_side_of_the_clients_own_mesh_is_told() -> None:
    mesh = sound_mesh()
    first = MappingProxyType(dict(mesh.sides) | {"pad": mesh.sides["bottom"][:1]})  # 16.7 mm
    own = MeshGeometry(mesh.nodes, ())
    assert found(job_of(34.0, own), replace(mesh, sides=first))["side"]["value"] > 2
    assert "side" not in found(job_of(33.0, own), replace(mesh, sides=first))

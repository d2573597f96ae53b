"""Where stress is infinite: found on shapes drawn by hand, all else left alone."""

from collections.abc import Sequence

import numpy as np
import pytest

from tests.plates import ELEMENTS, grid, plate_job, ring, warp
from workers.analysis.mesh import Mesh
from workers.analysis.model import build_model
from workers.analysis.singularities import SingularPlace, find_singular_places
from workers.analysis.turns import turns
from workers.geometry import Region
from workers.job import Load, Named, Nodes, PointForce, Segment, Spring, Support, Traction

ROLLER = Support("wall", Named("left"), ux=0.0)
FIXED = Support("wall", Named("left"), ux=0.0, uy=0.0)


def places(
    mesh: Mesh, supports: Sequence[Support] = (), loads: Sequence[Load] = (), **more
) -> list[SingularPlace]:
    job = plate_job(supports, loads, **more)
    return list(find_singular_places(build_model(job, mesh)))


def kinds(found: Sequence[SingularPlace]) -> list[tuple[str, float, float]]:
    return sorted((place.kind, *np.round(place.at, 6).tolist()) for place in found)


def panel(kind: str, cells: int = 4) -> Mesh:
    """An L of three squares: (0, 0) to (2, 2) without the upper right one, corner at (1, 1)."""
    whole = grid(kind, 2 * cells, 2 * cells, size=(2.0, 2.0))
    block = whole.blocks[0]
    centre = whole.nodes[block.connectivity[:, : block.element.corners]].mean(axis=1)
    kept = block.connectivity[~(centre > 1).all(axis=1)]
    used, numbers = np.unique(kept, return_inverse=True)
    region = np.zeros(len(kept), np.int32)
    connectivity = numbers.reshape(kept.shape).astype(np.int32)
    return Mesh(whole.nodes[used], (type(block)(block.element, connectivity, region),))


# --- corners -------------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ELEMENTS)
def test_the_one_reentrant_corner_of_a_panel_is_found(kind: str) -> None:
    """Williams 1952: 0.5445 for 270 degrees."""
    (place,) = places(panel(kind))
    assert (place.kind, place.at) == ("re-entrant-corner", (1.0, 1.0))
    assert place.exponent == pytest.approx(0.5445, abs=1e-3)


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize("around", [12, 40])
def test_the_chords_of_a_hole_are_no_corners(kind: str, around: int) -> None:
    assert places(ring(kind, around, 2, 1.0, 3.0)) == []


@pytest.mark.parametrize("kind", ["T3", "Q8"])
def test_a_curved_border_has_no_corners(kind: str) -> None:
    assert places(grid(kind, 8, 6, shape=warp)) == []


@pytest.mark.parametrize("kind", ["Q4", "T6"])
def test_quarter_of_a_ring_on_its_symmetry_lines_is_finite_everywhere(kind: str) -> None:
    """Chords meet the rollers at less than a right angle, the arcs that they stand for do not."""

    def quarter(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        return (1 + 2 * x) * np.cos(np.pi / 2 * y), (1 + 2 * x) * np.sin(np.pi / 2 * y)

    mesh = grid(kind, 3, 4, shape=quarter)
    rollers = [Support("low", Named("bottom"), uy=0.0), Support("left", Named("top"), ux=0.0)]
    assert places(mesh, rollers) == []


# --- supports ------------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ELEMENTS)
def test_both_ends_of_a_fixed_side_are_found(kind: str) -> None:
    """0.758 for a right angle between fixed and free, nu = 0.3 (Williams 1952, plane stress)."""
    found = places(grid(kind, 6, 3, size=(4.0, 2.0)), [FIXED])
    assert kinds(found) == [("fixed-end", 0, 0), ("fixed-end", 0, 2)]
    assert found[0].exponent == pytest.approx(0.758, abs=1e-3)


@pytest.mark.parametrize(
    "supports",
    [
        [ROLLER],  # a symmetry line
        [Support("wall", Named("left"), normal=0.0)],
        [Support("bed", Named("left"), spring=Spring(x=1e5, y=1e5))],  # gives way
    ],
    ids=["roller", "normal", "spring"],
)
def test_sides_that_let_the_plate_contract_are_harmless(supports: list[Support]) -> None:
    assert places(grid("Q8", 6, 3, size=(4.0, 2.0)), supports) == []


def test_without_contraction_a_fixed_side_is_harmless() -> None:
    assert places(grid("Q8", 6, 3), [FIXED], poissons_ratio=0.0) == []


def test_a_roller_that_ends_within_a_straight_side_is_as_strong_as_a_crack() -> None:
    mesh = grid("Q4", 4, 4, size=(4.0, 4.0))
    (place,) = places(mesh, [Support("half", Segment((0.0, 0.0), (0.0, 2.0)), ux=0.0)])
    assert (place.kind, place.at) == ("fixed-end", (0.0, 2.0))
    assert place.exponent == pytest.approx(0.5, abs=1e-3)


def test_a_single_supported_node_is_found_with_its_support() -> None:
    mesh = grid("Q8", 4, 2)
    (place,) = places(mesh, [ROLLER, Support("pin", Named("SE"), uy=0.0)])
    assert (place.kind, place.at, place.support) == ("point-support", (1.0, 0.0), "pin")


# --- sections ------------------------------------------------------------------------------------


def test_a_step_of_thickness_counts_where_it_meets_the_edge() -> None:
    """Four to one, at right angles: between no step (finite) and a rigid part (0.758)."""
    mesh = grid("Q8", 8, 4, size=(8.0, 4.0), region_of_column=[0] * 4 + [1] * 4,
                regions=("thin", "thick"))  # fmt: skip
    regions = (Region("thin", thickness=1.0), Region("thick", thickness=4.0))
    found = places(mesh, regions=regions)
    assert kinds(found) == [("thickness-step", 4, 0), ("thickness-step", 4, 4)]
    assert 0.758 < found[0].exponent < 0.95
    equal = (Region("thin", thickness=4.0), Region("thick", thickness=4.0))
    assert places(mesh, regions=equal) == []


def test_the_corners_of_a_thicker_part_inside_the_plate_count() -> None:
    """A square pad on the middle cells of a grid: its four corners."""
    mesh = grid("Q4", 6, 6, size=(6.0, 6.0))
    block = mesh.blocks[0]
    centre = mesh.nodes[block.connectivity].mean(axis=1)
    pad = ((centre > 2) & (centre < 4)).all(axis=1).astype(np.int32)
    mesh = Mesh(
        mesh.nodes, (type(block)(block.element, block.connectivity, pad),), ("plate", "pad")
    )
    found = places(mesh, regions=(Region("pad", thickness=20.0),))
    assert kinds(found) == [("thickness-step", x, y) for x in (2, 4) for y in (2, 4)]


# --- loads ---------------------------------------------------------------------------------------


def test_forces_that_cancel_in_a_node_are_no_point_load() -> None:
    mesh = grid("Q4", 3, 3)
    up, down = (PointForce(on=Named("NE"), force=(0.0, f)) for f in (5.0, -5.0))
    assert places(mesh, [ROLLER], [up, down]) == []
    (place,) = places(mesh, [ROLLER], [up])
    assert (place.kind, place.exponent) == ("point-load", 0.0)


def test_a_point_load_knows_its_cases() -> None:
    mesh = grid("Q4", 3, 3)
    push = PointForce(on=Named("NE"), force=(1.0, 0.0))
    pull = Traction(on=Named("right"), start=(1.0, 0.0), end=(1.0, 0.0))
    job = plate_job([FIXED], {"pull": [pull], "push": [push]}, poissons_ratio=0.0)
    (place,) = find_singular_places(build_model(job, mesh))
    assert place.cases is not None
    assert place.cases.tolist() == [False, True]


# --- the neighbourhood ---------------------------------------------------------------------------


def radius(thickness: float, cells: int) -> float:
    """Of the corner of the panel, whose nearest other corner is 1 away."""
    job = plate_job(thickness=thickness)
    (place,) = find_singular_places(build_model(job, panel("Q4", cells)))
    return place.radius


def test_radius_is_two_elements_until_half_the_thickness_or_a_tenth_of_the_feature() -> None:
    assert radius(0.01, 10) == pytest.approx(2 * 0.1)  # two elements
    assert radius(0.16, 40) == pytest.approx(0.08)  # half the thickness
    assert radius(0.4, 40) == pytest.approx(0.1)  # a tenth of the way to the next corner
    assert radius(0.01, 2) == pytest.approx(0.5)  # never beyond half of that way


def test_a_support_on_nodes_of_a_side_is_no_point_support() -> None:
    """Nodes that span a whole element side hold it as a side."""
    mesh = grid("Q4", 2, 2)
    left = np.flatnonzero(mesh.nodes[:, 0] == 0)
    found = places(mesh, [Support("nodes", Nodes(tuple(left.tolist())), ux=0.0, uy=0.0)])
    assert {place.kind for place in found} == {"fixed-end"}


# --- turns ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ELEMENTS)
def test_angles_of_a_border_add_up(kind: str) -> None:
    """The turns of a closed border without holes make one full turn: sum of (pi - angle) = 2 pi."""
    mesh = panel(kind)
    found = turns(mesh, mesh.boundary)
    assert (np.pi - found.angle).sum() == pytest.approx(2 * np.pi)
    assert found.is_corner.sum() == 6


def test_two_plates_that_touch_in_a_node_keep_their_corners_apart() -> None:
    """Squares at lower left and upper right of (1, 1): eight right angles, none of 270 degrees."""
    whole = grid("Q4", 2, 2, size=(2.0, 2.0))
    block = whole.blocks[0]
    centre = whole.nodes[block.connectivity].mean(axis=1)
    kept = block.connectivity[(centre[:, 0] > 1) == (centre[:, 1] > 1)]
    used, numbers = np.unique(kept, return_inverse=True)
    mesh = Mesh(
        whole.nodes[used],
        (
            type(block)(
                block.element, numbers.reshape(-1, 4).astype(np.int32), np.zeros(2, np.int32)
            ),
        ),
    )
    found = turns(mesh, mesh.boundary)
    np.testing.assert_allclose(found.angle, np.pi / 2)
    assert len(found.angle) == 8

"""What targets catch on a plate, and what is said when they catch nothing."""

import numpy as np
import pytest

from tests.plates import grid, ring
from workers.analysis.mesh import Mesh
from workers.analysis.selection import Finder, region_border, select
from workers.errors import MeshError
from workers.job import Box, Named, Nodes, OnCircle, Segment, Target

HERE = "/supports/0/on"


def plate() -> Mesh:
    """4 x 3 by 2, Q8, in cells of 1 by 2/3; the right half is the region "web"."""
    return grid(
        "Q8", 4, 3, size=(4.0, 2.0), region_of_column=(0, 0, 1, 1), regions=("plate", "web")
    )


def message(mesh: Mesh, target: Target) -> str:
    with pytest.raises(MeshError) as caught:
        select(mesh, target, HERE)
    (fault,) = caught.value.faults
    assert fault.pointer == HERE
    return fault.message


# --- names -----------------------------------------------------------------------------------


def test_a_side_gives_its_facets_and_their_nodes() -> None:
    mesh = plate()
    selection = select(mesh, Named("bottom"), HERE)
    np.testing.assert_array_equal(selection.facets, mesh.sides["bottom"])
    np.testing.assert_array_equal(selection.nodes, np.flatnonzero(mesh.nodes[:, 1] == 0))
    assert selection.element_count == 0


def test_a_point_gives_one_node() -> None:
    mesh = plate()
    selection = select(mesh, Named("NE"), HERE)
    assert mesh.nodes[selection.nodes].tolist() == [[4.0, 2.0]]
    assert selection.facets.shape == (0, 3)


def test_a_region_gives_its_elements_nodes_and_border() -> None:
    """The web is 2 x 2 in 2 x 3 cells: 6 elements, a border of 2 + 3 + 2 + 3 facets."""
    mesh = plate()
    selection = select(mesh, Named("web"), HERE)
    assert [len(numbers) for numbers in selection.elements] == [6]
    np.testing.assert_array_equal(selection.nodes, np.flatnonzero(mesh.nodes[:, 0] >= 2))
    assert len(selection.facets) == 10
    assert mesh.facet_lengths(selection.facets).sum() == pytest.approx(8.0, rel=1e-14)


def test_the_border_of_a_region_belongs_to_its_own_elements() -> None:
    mesh = plate()
    for region in (0, 1):
        assert (mesh.facet_regions(region_border(mesh, region)) == region).all()


@pytest.mark.parametrize(("name", "meant"), [("botom", "bottom"), ("Web", "web")])
def test_an_unknown_name_is_answered_with_the_nearest(name: str, meant: str) -> None:
    assert f"did you mean '{meant}'?" in message(plate(), Named(name))


def test_an_unknown_name_is_answered_with_what_there_is() -> None:
    said = message(plate(), Named("?"))
    assert "sides 'bottom', 'top', 'left', 'right'; points 'SW'" in said
    assert "regions 'plate', 'web'" in said


# --- segments --------------------------------------------------------------------------------


def test_a_segment_catches_the_boundary_between_its_ends() -> None:
    mesh = plate()
    selection = select(mesh, Segment((1.0, 2.0), (3.0, 2.0)), HERE)
    x, y = mesh.nodes[selection.nodes].T
    assert sorted(x.tolist()) == [1.0, 1.5, 2.0, 2.5, 3.0]
    assert (y == 2.0).all()
    assert len(selection.facets) == 2


def test_a_segment_may_reach_beyond_the_plate() -> None:
    mesh = plate()
    selection = select(mesh, Segment((-5.0, 0.0), (50.0, 0.0)), HERE)
    assert len(selection.facets) == 4


def test_a_segment_works_in_both_directions_and_askew() -> None:
    mesh = grid("Q4", 3, 3, shape=lambda x, y: (x - y, x + y))
    for ends in (((0.0, 0.0), (1.0, 1.0)), ((1.0, 1.0), (0.0, 0.0))):
        selection = select(mesh, Segment(*ends), HERE)
        assert len(selection.facets) == 3


def test_a_segment_inside_the_plate_catches_nothing() -> None:
    said = message(plate(), Segment((2.0, 0.0), (2.0, 2.0)))
    assert "no boundary lies on the segment from (2, 0) to (2, 2)" in said
    assert "no whole element side is" in said


def test_a_segment_beside_the_plate_names_the_nearest_node() -> None:
    said = message(plate(), Segment((0.0, -0.25), (4.0, -0.25)))
    assert "the nearest boundary node is" in said
    assert "0.25 away" in said


def test_a_segment_that_ends_inside_a_facet_is_refused() -> None:
    said = message(plate(), Segment((0.0, 0.0), (1.7, 0.0)))
    assert "ends inside the element side from (1, 0) to (2, 0)" in said


def test_a_segment_without_length_is_refused() -> None:
    assert "no length" in message(plate(), Segment((1.0, 0.0), (1.0, 0.0)))


def test_a_wider_tolerance_catches_more() -> None:
    mesh = plate()
    beside = Segment((0.0, -0.01), (4.0, -0.01))
    message(mesh, beside)
    assert len(select(mesh, Segment(beside.start, beside.end, 0.02), HERE).facets) == 4


# --- boxes, circles, nodes -------------------------------------------------------------------


def test_a_box_catches_nodes_border_and_whole_elements() -> None:
    """x up to 2 and y up to 4/3: 2 x 2 elements, 2 facets below and 2 on the left."""
    mesh = plate()
    selection = select(mesh, Box((-1.0, -1.0), (2.0, 4 / 3)), HERE)
    x, y = mesh.nodes.T
    inside = np.flatnonzero((x <= 2) & (y <= 4 / 3 + 1e-9))
    np.testing.assert_array_equal(selection.nodes, inside)
    assert selection.element_count == 4
    assert len(selection.facets) == 4


def test_a_box_may_be_given_by_any_two_corners() -> None:
    mesh = plate()
    one = select(mesh, Box((2.0, 1.4), (-1.0, -1.0)), HERE)
    other = select(mesh, Box((-1.0, -1.0), (2.0, 1.4)), HERE)
    np.testing.assert_array_equal(one.nodes, other.nodes)


def test_an_empty_box_names_the_nearest_node() -> None:
    said = message(plate(), Box((5.0, 3.0), (6.0, 4.0)))
    assert "no node lies in the box from (5, 3) to (6, 4)" in said
    assert "at (4, 2), 1.41421 away" in said


@pytest.mark.parametrize("kind", ["T3", "Q4", "T6", "Q8"])
def test_a_circle_catches_the_hole_that_lies_on_it(kind: str) -> None:
    mesh = ring(kind, 12, 3, 1.0, 2.0)
    selection = select(mesh, OnCircle((0.0, 0.0), 1.0), HERE)
    assert sorted(selection.facets.tolist()) == sorted(mesh.sides["bore"].tolist())


def test_a_circle_inside_the_material_catches_nothing() -> None:
    said = message(ring("Q8", 12, 4, 1.0, 2.0), OnCircle((0.0, 0.0), 1.4))
    assert "no boundary lies on the circle of radius 1.4 about (0, 0)" in said
    assert "0.4 away" in said


def test_nodes_catch_the_border_among_them() -> None:
    mesh = plate()
    numbers = mesh.facet_nodes(mesh.sides["left"])
    selection = select(mesh, Nodes(tuple(numbers[::-1].tolist())), HERE)
    np.testing.assert_array_equal(selection.nodes, numbers)
    assert sorted(selection.facets.tolist()) == sorted(mesh.sides["left"].tolist())


def test_every_node_number_that_does_not_exist_is_reported() -> None:
    with pytest.raises(MeshError) as caught:
        select(plate(), Nodes((0, 999, -1)), HERE)
    assert [fault.pointer for fault in caught.value.faults] == [
        f"{HERE}/nodes/1",
        f"{HERE}/nodes/2",
    ]
    assert "there is no node 999" in caught.value.faults[0].message


def test_an_empty_list_of_nodes_is_refused() -> None:
    with pytest.raises(MeshError, match="empty"):
        select(plate(), Nodes(()), HERE)


# --- finding once ----------------------------------------------------------------------------


def test_a_finder_looks_a_target_up_once() -> None:
    finder = Finder(plate())
    assert finder.find(Named("top"), "/a") is finder.find(Named("top"), "/b")


def test_a_finder_reports_a_repeated_fault_at_each_place() -> None:
    finder = Finder(plate())
    for place in ("/load_cases/a/0/on", "/load_cases/b/3/on"):
        with pytest.raises(MeshError) as caught:
            finder.find(Nodes((999,)), place)
        assert caught.value.faults[0].pointer == f"{place}/nodes/0"

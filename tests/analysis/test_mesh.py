"""Facets, boundary, chains and parts of a mesh."""

import numpy as np
import pytest
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from tests.plates import ELEMENTS, MIXED, grid, ring, warp
from workers.analysis.connected import label_components
from workers.analysis.mesh import BrokenChainError, Mesh

# --- counting --------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", [*ELEMENTS, *MIXED])
def test_euler_characteristic_of_a_disc_is_one(kind: str) -> None:
    """Corners - edges + elements = 1 for a plate without holes (Euler)."""
    mesh = grid(kind, 4, 3, shape=warp, shuffle=1)
    assert _corner_count(mesh) - len(mesh.edges.counts) + mesh.element_count == 1


@pytest.mark.parametrize("kind", ELEMENTS)
def test_euler_characteristic_of_a_ring_is_zero(kind: str) -> None:
    """A hole takes one away (Euler)."""
    mesh = ring(kind, 8, 3, 1.0, 2.0)
    assert _corner_count(mesh) - len(mesh.edges.counts) + mesh.element_count == 0


def _corner_count(mesh: Mesh) -> int:
    corners = [b.connectivity[:, : b.element.corners].ravel() for b in mesh.blocks]
    return len(np.unique(np.concatenate(corners)))


@pytest.mark.parametrize("kind", [*ELEMENTS, *MIXED])
def test_every_side_is_on_the_boundary_or_shared_by_two(kind: str) -> None:
    mesh = grid(kind, 4, 3)
    sides = sum(b.element_count * b.element.corners for b in mesh.blocks)
    one, _ = mesh.shared_facets()
    assert len(mesh.boundary) + 2 * len(one) == sides
    assert len(mesh.boundary) == 2 * (4 + 3)


def test_flat_numbers_come_back_as_block_element_and_side() -> None:
    mesh = grid("T6+Q8", 4, 3)
    facets = mesh.facet_of(np.arange(len(mesh.flat_table())))
    expected = [
        (b, e, s)
        for b, block in enumerate(mesh.blocks)
        for e in range(block.element_count)
        for s in range(block.element.corners)
    ]
    assert facets.tolist() == [list(row) for row in expected]


# --- direction and size ----------------------------------------------------------------------


@pytest.mark.parametrize("kind", [*ELEMENTS, *MIXED])
def test_boundary_runs_with_the_material_on_its_left(kind: str) -> None:
    """Green: the integral of (x dy - y dx)/2 along the boundary is the area, here 3 x 2."""
    mesh = grid(kind, 4, 3, size=(3.0, 2.0), shuffle=2)
    a, b = mesh.nodes[mesh.facet_ends(mesh.boundary)].transpose(1, 0, 2)
    assert np.sum(a[:, 0] * b[:, 1] - b[:, 0] * a[:, 1]) / 2 == pytest.approx(6.0, rel=1e-14)


def test_shared_facets_run_opposite_ways() -> None:
    mesh = grid("T6+Q8", 4, 3, shuffle=3)
    one, other = (mesh.facet_table(facets) for facets in mesh.shared_facets())
    np.testing.assert_array_equal(one[:, [1, 0, 2]], other)


@pytest.mark.parametrize(("kind", "order"), [("T3", 2), ("Q4", 2), ("T6", 4), ("Q8", 4)])
def test_facet_lengths_converge_to_the_circumference(kind: str, order: int) -> None:
    """Chords err by h^2, parabolas through three points of a circle by h^4."""
    errors = []
    for around in (16, 32):
        mesh = ring(kind, around, 2, 1.0, 2.0)
        errors.append(4 * np.pi - mesh.facet_lengths(mesh.sides["rim"]).sum())
    assert np.log2(errors[0] / errors[1]) == pytest.approx(order, abs=0.1)


def test_facet_nodes_of_a_quadratic_side_include_mid_side_nodes() -> None:
    mesh = grid("Q8", 4, 3)
    nodes = mesh.facet_nodes(mesh.sides["bottom"])
    np.testing.assert_array_equal(nodes, np.flatnonzero(mesh.nodes[:, 1] == 0))


def test_facet_groups_part_the_facets_by_block_and_side() -> None:
    mesh = grid("T3+Q4", 4, 3)
    seen = np.zeros(len(mesh.boundary), int)
    for group in mesh.facet_groups(mesh.boundary):
        seen[group.rows] += 1
        rows = mesh.boundary[group.rows]
        assert (rows[:, 0] == group.block).all()
        assert (rows[:, 2] == group.side).all()
        np.testing.assert_array_equal(rows[:, 1], group.elements)
    assert (seen == 1).all()


def test_facet_regions_are_those_of_the_elements() -> None:
    mesh = grid("Q4", 4, 1, region_of_column=(0, 0, 1, 1), regions=("plate", "web"))
    x = mesh.nodes[mesh.facet_ends(mesh.sides["bottom"])].mean(axis=1)[:, 0]
    np.testing.assert_array_equal(mesh.facet_regions(mesh.sides["bottom"]), x > 0.5)


# --- finding facets --------------------------------------------------------------------------


def test_an_inner_edge_is_found_with_its_element_on_the_left() -> None:
    """Nodes of two cells side by side: 0-2-4 below, 1-3-5 above; 2-3 between the cells."""
    mesh = grid("Q4", 2, 1)
    up, down = mesh.find_facets(np.array([[2, 3], [3, 2]]))
    assert (up[1], down[1]) == (0, 1)


def test_a_boundary_edge_is_found_in_either_direction() -> None:
    mesh = grid("Q4", 2, 1)
    forth, back = mesh.find_facets(np.array([[0, 2], [2, 0]]))
    assert forth.tolist() == back.tolist() == [0, 0, 0]


def test_what_is_no_edge_is_not_found() -> None:
    mesh = grid("Q4", 2, 1)
    assert (mesh.find_facets(np.array([[0, 3], [0, 4], [1, 0]]))[:, 0] == [-1, -1, 0]).all()


# --- chains ----------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", [*ELEMENTS, "T3+Q4"])
def test_chain_measures_the_distance_along_a_side(kind: str) -> None:
    """On a straight side of length 1 traversed with the material on the left, from x = 0 on."""
    mesh = grid(kind, 4, 2, shape=lambda x, y: (x**2, y), straight=True, shuffle=4)
    facets = np.random.default_rng(5).permutation(mesh.sides["bottom"])
    start, end = mesh.chain(facets)
    x = mesh.nodes[mesh.facet_ends(facets), 0]
    np.testing.assert_allclose(np.stack((start, end), axis=1), x, atol=1e-15)


def test_chain_along_the_top_starts_at_the_right() -> None:
    mesh = grid("Q4", 4, 2)
    start, _ = mesh.chain(mesh.sides["top"])
    first = mesh.facet_ends(mesh.sides["top"][[start.argmin()]])[0, 0]
    assert mesh.nodes[first].tolist() == [1.0, 1.0]


@pytest.mark.parametrize(("side", "turn"), [("rim", 1), ("bore", -1)])
def test_chain_round_a_loop_starts_at_the_greatest_x(side: str, turn: int) -> None:
    """With the material on the left a rim runs counter-clockwise and a bore clockwise."""
    mesh = ring("Q8", 12, 2, 1.0, 2.0)
    start, _ = mesh.chain(mesh.sides[side])
    x, y = mesh.nodes[mesh.facet_ends(mesh.sides[side])[:, 0]].T
    angle = np.mod(turn * np.arctan2(y, x) / (2 * np.pi), 1)
    np.testing.assert_allclose(np.mod(start + 1e-9, 1), np.mod(angle + 1e-9, 1), atol=1e-8)


def test_chain_of_two_pieces_is_broken() -> None:
    mesh = grid("Q4", 4, 2)
    facets = np.concatenate((mesh.sides["bottom"][:1], mesh.sides["bottom"][2:]))
    with pytest.raises(BrokenChainError, match=r"2 separate pieces.*\(0.5, 0\)"):
        mesh.chain(facets)


def test_chain_of_a_side_and_a_loop_is_broken() -> None:
    mesh = ring("Q4", 8, 2, 1.0, 2.0)
    with pytest.raises(BrokenChainError, match="loop beside"):
        mesh.chain(np.concatenate((mesh.sides["bore"], mesh.sides["rim"][1:])))


def test_chain_that_branches_is_broken() -> None:
    """The bottom of a plate of two cells, and the edge between the cells."""
    mesh = grid("Q4", 2, 1)
    facets = np.concatenate((mesh.sides["bottom"], mesh.find_facets(np.array([[2, 3]]))))
    with pytest.raises(BrokenChainError, match="branches"):
        mesh.chain(facets)


def test_chain_of_nothing_is_broken() -> None:
    with pytest.raises(BrokenChainError, match="no facets"):
        grid("Q4", 1, 1).chain(np.empty((0, 3), np.int32))


# --- parts -----------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", range(8))
def test_components_are_those_of_scipy(seed: int) -> None:
    """Random sparse graphs against scipy.sparse.csgraph, a general reference library."""
    rng = np.random.default_rng(seed)
    count = 300
    first, second = rng.integers(0, count, (2, 30 * (seed + 1)))
    labels = label_components(count, first, second)
    adjacency = coo_array((np.ones(len(first)), (first, second)), shape=(count, count))
    number, expected = connected_components(adjacency, directed=False)
    assert labels.max() + 1 == number
    pairs = np.unique(np.stack((labels, expected), axis=1), axis=0)
    assert len(pairs) == number


def test_components_of_a_long_chain_in_any_numbering() -> None:
    """The slow case of label propagation: a path whose numbers jump about."""
    path = np.random.default_rng(0).permutation(5000)
    assert (label_components(5000, path[:-1], path[1:]) == 0).all()


def test_components_of_a_star_whose_centre_has_the_highest_number() -> None:
    leaves = np.arange(1000)
    assert (label_components(1001, leaves, np.full(1000, 1000)) == 0).all()


def test_parts_are_numbered_by_their_lowest_node() -> None:
    assert label_components(5, np.array([3]), np.array([1])).tolist() == [0, 1, 2, 1, 3]


def test_two_plates_in_one_mesh_are_two_parts() -> None:
    mesh = grid("T6", 2, 2)
    count, block = mesh.node_count, mesh.blocks[0]
    both = np.concatenate((block.connectivity, block.connectivity + count))
    pair = Mesh(
        np.concatenate((mesh.nodes, mesh.nodes + np.array([3.0, 0.0]))),
        (type(block)(block.element, both, np.zeros(len(both), np.int32)),),
    )
    assert pair.component_count == 2
    np.testing.assert_array_equal(pair.components, np.repeat([0, 1], count))

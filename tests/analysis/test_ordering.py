"""Elimination orders: permutations, cheap ones, for any mesh."""

import numpy as np
import pytest
from scipy.sparse.linalg import splu

from tests.plates import ELEMENTS, MIXED, grid, plate_job, warp
from workers.analysis.assembly import assemble_stiffness
from workers.analysis.mesh import Block, Mesh
from workers.analysis.model import build_model
from workers.analysis.ordering import along_curve, order_nodes


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_order_is_a_permutation_with_its_inverse(kind: str) -> None:
    mesh = grid(kind, 7, 5, shape=warp, shuffle=3)
    order = order_nodes(mesh)
    np.testing.assert_array_equal(np.sort(order.order), np.arange(mesh.node_count))
    np.testing.assert_array_equal(order.order[order.position], np.arange(mesh.node_count))


@pytest.mark.parametrize("kind", ["Q8", "T6", "T6+Q8"])
def test_mid_side_nodes_go_before_the_corners_of_their_side(kind: str) -> None:
    mesh = grid(kind, 6, 4, shuffle=5)
    position = order_nodes(mesh).position
    for block in mesh.blocks:
        at = position[block.connectivity]
        for a, b, mid in block.element.sides:
            assert (at[:, mid] < np.minimum(at[:, a], at[:, b])).all()


@pytest.mark.parametrize("kind", ["T3", "Q8"])
def test_order_fills_in_less_than_half_of_the_row_by_row_order(kind: str) -> None:
    """Nested dissection: n log n entries against n^1.5 (George 1973); the ratio at this size is
    about three for either kind."""
    mesh = grid(kind, 60, 60)
    model = build_model(plate_job(), mesh)

    def entries(position: np.ndarray | None) -> int:
        K = assemble_stiffness(model, position).tocsc()
        K.setdiag(K.diagonal() * 1.001)  # free plate: make it definite
        options = {"SymmetricMode": True}
        return splu(K, permc_spec="NATURAL", diag_pivot_thresh=0.0, options=options).nnz

    rows = np.lexsort(mesh.nodes.round(9).T)
    by_row = np.empty_like(rows)
    by_row[rows] = np.arange(len(rows))
    assert entries(order_nodes(mesh).position) < 0.5 * entries(by_row)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_a_single_cell_can_be_ordered(kind: str) -> None:
    mesh = grid(kind, 1, 1)
    assert sorted(order_nodes(mesh).order) == list(range(mesh.node_count))


def test_disconnected_parts_can_be_ordered() -> None:
    one = grid("Q8", 3, 2)
    block = one.blocks[0]
    other = Block(block.element, block.connectivity + one.node_count, block.region)
    mesh = Mesh(np.concatenate((one.nodes, one.nodes + 5.0)), (block, other))
    assert sorted(order_nodes(mesh).order) == list(range(mesh.node_count))


def test_curve_keeps_quadrants_together() -> None:
    """A Z-shaped curve finishes each quadrant before the next."""
    points = np.random.default_rng(1).random((200, 2))
    points = np.concatenate((points, [[0, 0], [1, 1]]))
    ordered = points[along_curve(points)]
    quadrant = (ordered[:, 0] >= 0.5) + 2 * (ordered[:, 1] >= 0.5)
    assert np.count_nonzero(np.diff(quadrant)) == 3

"""The direct solver against dense solutions, and its measures of quality."""

import numpy as np
import pytest
from scipy.sparse import bsr_array, eye_array

from tests.plates import ELEMENTS, MIXED, grid, plate_job, warp
from workers.analysis.assembly import assemble_stiffness
from workers.analysis.constraints import decouple
from workers.analysis.model import build_model
from workers.analysis.ordering import order_nodes
from workers.analysis.solver import (
    SingularMatrixError,
    backward_error,
    factorise,
    relative_residual,
    weakest_motion,
)


def _plate_matrix(kind: str, nx: int = 6, ny: int = 4, **shape: object) -> bsr_array:
    """Stiffness of a plate clamped at its left side, in elimination order."""
    mesh = grid(kind, nx, ny, shuffle=2, **shape)  # type: ignore[arg-type]
    order = order_nodes(mesh)
    K = assemble_stiffness(build_model(plate_job(), mesh), order.position)
    held = np.zeros((mesh.node_count, 2), dtype=bool)
    held[mesh.facet_nodes(mesh.sides["left"])] = True
    decouple(K, held[order.order])
    return K


def _loads(size: int, columns: int = 3) -> np.ndarray:
    return np.random.default_rng(11).standard_normal((size, columns))


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_solution_equals_the_dense_solution(kind: str) -> None:
    K = _plate_matrix(kind, shape=warp)
    b = _loads(K.shape[0])
    expected = np.linalg.solve(K.toarray(), b)
    # Condition about 1e4 at this size.
    np.testing.assert_allclose(factorise(K).solve(b), expected, rtol=1e-9, atol=1e-12)


def test_springs_over_twelve_decades_keep_a_small_backward_error() -> None:
    """Weak and stiff springs on one plate: each row must balance on its own scale."""
    K = _plate_matrix("Q8")
    stiffness = 10.0 ** np.random.default_rng(3).uniform(-1, 11, K.shape[0])
    stiff = (K.tocsr() + eye_array(K.shape[0]).tocsr() * 0).tocsr()
    stiff.setdiag(stiff.diagonal() + stiffness)
    K = stiff.tobsr((2, 2))
    b = _loads(K.shape[0])
    u = factorise(K).solve(b)
    assert backward_error(K, u, b, b - K @ u).max() < 1e-14
    # Scaled by its diagonal the matrix is well conditioned, so dense elimination is an oracle.
    scale = 1 / np.sqrt(K.diagonal())
    dense = np.linalg.solve(scale[:, None] * K.toarray() * scale, scale[:, None] * b)
    np.testing.assert_allclose(u / scale[:, None], dense, rtol=1e-9, atol=1e-12)


def test_slender_strip_is_solved_to_rounding_of_its_condition() -> None:
    """1 to 200, condition about 1e10: backward error at rounding, the dense solution to 1e-6."""
    K = _plate_matrix("Q8", 200, 1, size=(200.0, 1.0))
    b = np.zeros((K.shape[0], 1))
    b[-2:] = 1.0
    u = factorise(K).solve(b)
    assert backward_error(K, u, b, b - K @ u)[0] < 1e-15
    np.testing.assert_allclose(u, np.linalg.solve(K.toarray(), b), rtol=1e-6, atol=1e-6 * u.max())


def test_exactly_singular_matrix_is_refused() -> None:
    K = bsr_array(np.kron(np.eye(3), np.ones((2, 2))), blocksize=(2, 2))
    with pytest.raises(SingularMatrixError, match="singular"):
        factorise(K)


def test_node_without_stiffness_is_refused() -> None:
    K = bsr_array(np.diag([1.0, 1.0, 0.0, 1.0]), blocksize=(2, 2))
    with pytest.raises(SingularMatrixError, match="row 2"):
        factorise(K)


def test_unknown_method_lists_the_known_ones() -> None:
    with pytest.raises(LookupError, match="superlu"):
        factorise(_plate_matrix("T3"), "magic")


def test_relative_residual_is_zero_without_load() -> None:
    left = np.array([[3.0, 0.0], [4.0, 0.0]])
    load = np.array([[50.0, 0.0], [0.0, 0.0]])
    np.testing.assert_allclose(relative_residual(left, load), [0.1, 0.0])


def test_backward_error_finds_the_change_that_was_made() -> None:
    """The solution of a matrix changed by 1e-6 in one entry has a backward error near 1e-6."""
    K = _plate_matrix("Q4")
    b = _loads(K.shape[0], 1)
    changed = K.toarray()
    changed[0, 0] *= 1 + 1e-6
    u = np.linalg.solve(changed, b)
    assert 1e-9 < backward_error(K, u, b, b - K @ u)[0] <= 1e-6


@pytest.mark.parametrize("kind", ["T3", "Q8"])
def test_weakest_motion_is_the_lowest_eigenvector(kind: str) -> None:
    """Against dense eigenvalues of the matrix scaled to a unit diagonal."""
    K = _plate_matrix(kind, size=(10.0, 1.0))
    scale = 1 / np.sqrt(K.diagonal())
    values, vectors = np.linalg.eigh(scale[:, None] * K.toarray() * scale)
    condition, motion = weakest_motion(K, factorise(K), steps=8)
    # From above, and the bound by row sums is at most a few times the largest eigenvalue.
    assert 0.1 < condition / (values[0] / values[-1]) < 1.01
    lowest = vectors[:, 0] * scale
    lowest /= lowest[np.argmax(np.abs(lowest))]
    motion /= motion[np.argmax(np.abs(motion))]
    np.testing.assert_allclose(motion, lowest, atol=1e-3)


def test_stiff_springs_do_not_look_like_a_mechanism() -> None:
    """A unit diagonal takes out plain differences of stiffness between nodes."""
    K = _plate_matrix("Q4")
    before, _ = weakest_motion(K, factorise(K))
    stiff = K.tocsr()
    diagonal = stiff.diagonal()
    diagonal[::7] *= 1e12
    stiff.setdiag(diagonal)
    K = stiff.tobsr((2, 2))
    after, _ = weakest_motion(K, factorise(K))
    assert after > 0.3 * before

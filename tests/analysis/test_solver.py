"""The direct solver against dense solutions, and its measures of quality."""

from importlib.util import find_spec

import numpy as np
import pytest
from scipy.sparse import bsr_array

from tests.plates import ELEMENTS, MIXED, grid, plate_job, warp
from workers.analysis.accuracy import backward_error, relative_residual, weakest_motion
from workers.analysis.assembly import assemble_stiffness
from workers.analysis.constraints import decouple
from workers.analysis.mesh import Mesh
from workers.analysis.model import build_model
from workers.analysis.solver import (
    Factor,
    Plan,
    SingularMatrixError,
    SuperLUFactor,
    plan_solution,
)

METHODS = (
    "multifrontal",
    "superlu",
    pytest.param(
        "pardiso",
        marks=pytest.mark.skipif(find_spec("pypardiso") is None, reason="needs fishplate[mkl]"),
    ),
)


def _clamped(mesh: Mesh, plan: Plan) -> bsr_array:
    """Stiffness of a plate clamped at its left side, in elimination order."""
    K = assemble_stiffness(build_model(plate_job(), mesh), plan.order.position)
    held = np.zeros((mesh.node_count, 2), dtype=bool)
    held[mesh.facet_nodes(mesh.sides["left"])] = True
    decouple(K, held[plan.order.order])
    return K


def _plate(method: str, mesh: Mesh) -> tuple[Plan, bsr_array]:
    plan = plan_solution(mesh, method)
    return plan, _clamped(mesh, plan)


def _with_diagonal(K: bsr_array, diagonal: np.ndarray) -> bsr_array:
    rows = K.tocsr()
    rows.setdiag(diagonal)
    return rows.tobsr((2, 2))


def _loads(size: int, columns: int = 3) -> np.ndarray:
    return np.random.default_rng(11).standard_normal((size, columns))


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_solution_equals_the_dense_solution(kind: str, method: str) -> None:
    plan, K = _plate(method, grid(kind, 6, 4, shape=warp, shuffle=2))
    b = _loads(K.shape[0])
    expected = np.linalg.solve(K.toarray(), b)
    # Condition about 1e4 at this size.
    np.testing.assert_allclose(plan.factorise(K).solve(b), expected, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("method", METHODS)
def test_springs_over_twelve_decades_keep_a_small_backward_error(method: str) -> None:
    """Weak and stiff springs on one plate: each row must balance on its own scale."""
    plan, K = _plate(method, grid("Q8", 6, 4))
    stiffness = 10.0 ** np.random.default_rng(3).uniform(-1, 11, K.shape[0])
    K = _with_diagonal(K, K.diagonal() + stiffness)
    b = _loads(K.shape[0])
    u = plan.factorise(K).solve(b)
    assert backward_error(K, u, b, b - K @ u).max() < 1e-14
    # Scaled by its diagonal the matrix is well conditioned, so dense elimination is an oracle.
    scale = 1 / np.sqrt(K.diagonal())
    dense = np.linalg.solve(scale[:, None] * K.toarray() * scale, scale[:, None] * b)
    np.testing.assert_allclose(u / scale[:, None], dense, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("method", METHODS)
def test_slender_strip_is_solved_to_rounding_of_its_condition(method: str) -> None:
    """1 to 200, condition about 1e10: backward error at rounding, the dense solution to 1e-6."""
    plan, K = _plate(method, grid("Q8", 200, 1, size=(200.0, 1.0)))
    b = np.zeros((K.shape[0], 1))
    b[-2:] = 1.0
    u = plan.factorise(K).solve(b)
    assert backward_error(K, u, b, b - K @ u)[0] < 1e-14
    np.testing.assert_allclose(u, np.linalg.solve(K.toarray(), b), rtol=1e-6, atol=1e-6 * u.max())


@pytest.mark.parametrize("method", METHODS)
def test_exactly_singular_matrix_is_refused(method: str) -> None:
    """Each node resists u + v only: pivots 1, 0, 1, 0, ..."""
    plan, K = _plate(method, grid("Q4", 1, 1))
    K.data[:] = 0
    on_diagonal = np.repeat(np.arange(4), np.diff(K.indptr)) == K.indices
    K.data[on_diagonal] = 1.0
    with pytest.raises(SingularMatrixError, match="singular"):
        plan.factorise(K)


@pytest.mark.parametrize("method", METHODS)
def test_node_without_stiffness_is_refused(method: str) -> None:
    plan, K = _plate(method, grid("Q4", 1, 1))
    K = _with_diagonal(K, np.where(np.arange(8) == 2, 0.0, K.diagonal()))
    with pytest.raises(SingularMatrixError, match="row 2"):
        plan.factorise(K)


def test_unknown_method_lists_the_known_ones() -> None:
    with pytest.raises(LookupError, match="multifrontal, superlu, pardiso"):
        plan_solution(grid("T3", 1, 1), "magic")


def test_factors_say_who_they_are() -> None:
    mesh = grid("T6", 2, 2)
    names = []
    for method in ("multifrontal", "superlu"):
        plan, K = _plate(method, mesh)
        factor: Factor = plan.factorise(K)
        names.append(factor.name)
        assert factor.entries > K.shape[0]
    assert names == ["multifrontal Cholesky", "SuperLU"]


def test_relative_residual_is_zero_without_load() -> None:
    left = np.array([[3.0, 0.0], [4.0, 0.0]])
    load = np.array([[50.0, 0.0], [0.0, 0.0]])
    np.testing.assert_allclose(relative_residual(left, load), [0.1, 0.0])


def test_backward_error_finds_the_change_that_was_made() -> None:
    """The solution of a matrix changed by 1e-6 in one entry has a backward error near 1e-6."""
    _, K = _plate("superlu", grid("Q4", 6, 4))
    b = _loads(K.shape[0], 1)
    changed = K.toarray()
    changed[0, 0] *= 1 + 1e-6
    u = np.linalg.solve(changed, b)
    assert 1e-9 < backward_error(K, u, b, b - K @ u)[0] <= 1e-6


@pytest.mark.parametrize("kind", ["T3", "Q8"])
def test_weakest_motion_is_the_lowest_eigenvector(kind: str) -> None:
    """Against dense eigenvalues of the matrix scaled to a unit diagonal."""
    _, K = _plate("superlu", grid(kind, 6, 4, size=(10.0, 1.0)))
    scale = 1 / np.sqrt(K.diagonal())
    values, vectors = np.linalg.eigh(scale[:, None] * K.toarray() * scale)
    condition, motion = weakest_motion(K, SuperLUFactor(K), steps=8)
    # From above, and the bound by row sums is at most a few times the largest eigenvalue.
    assert 0.1 < condition / (values[0] / values[-1]) < 1.01
    lowest = vectors[:, 0] * scale
    lowest /= lowest[np.argmax(np.abs(lowest))]
    motion /= motion[np.argmax(np.abs(motion))]
    np.testing.assert_allclose(motion, lowest, atol=1e-3)


def test_stiff_springs_do_not_look_like_a_mechanism() -> None:
    """A unit diagonal takes out plain differences of stiffness between nodes."""
    _, K = _plate("superlu", grid("Q4", 6, 4))
    before, _ = weakest_motion(K, SuperLUFactor(K))
    diagonal = K.diagonal()
    diagonal[::7] *= 1e12
    K = _with_diagonal(K, diagonal)
    after, _ = weakest_motion(K, SuperLUFactor(K))
    assert after > 0.3 * before

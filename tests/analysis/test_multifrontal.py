"""The multifrontal factorisation: its tree, fronts and positions, then solutions on any mesh."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial import Delaunay

from elements.registry import get
from tests.plates import ELEMENTS, MIXED, grid, plate_job, warp
from workers.analysis.accuracy import backward_error
from workers.analysis.assembly import NodePairs, assemble_stiffness, numbered
from workers.analysis.constraints import decouple
from workers.analysis.mesh import Block, Mesh
from workers.analysis.model import build_model
from workers.analysis.multifrontal import numeric
from workers.analysis.multifrontal.factor import MultifrontalFactor
from workers.analysis.multifrontal.layout import lay_out
from workers.analysis.multifrontal.numeric import NotPositiveDefiniteError
from workers.analysis.multifrontal.symbolic import Analysis, analyse
from workers.analysis.multifrontal.tree import elimination_tree, postorder, renumber, subtree_sums
from workers.analysis.solver import SuperLUFactor

# --- meshes --------------------------------------------------------------------------------------


def free_mesh(kind: str, seed: int, points: int = 120) -> Mesh:
    """Delaunay triangles on random points: valences from 3 to 12, slivers left out."""
    rng = np.random.default_rng(seed)
    nodes = rng.random((points, 2))
    cells = Delaunay(nodes).simplices
    corner = nodes[cells]
    a, b = corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]
    area = a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]
    cells = np.where((area < 0)[:, None], cells[:, [0, 2, 1]], cells)
    cells = cells[np.abs(area) > 1e-3 / points]
    if kind == "T6":
        nodes, cells = _with_middles(nodes, cells)
    used, cells = np.unique(cells, return_inverse=True)
    cells = cells.reshape(-1, 3 if kind == "T3" else 6).astype(np.int32)
    return Mesh(nodes[used], (Block(get(kind), cells, np.zeros(len(cells), np.int32)),))


def _with_middles(nodes: np.ndarray, cells: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    sides = np.sort(cells[:, [[0, 1], [1, 2], [2, 0]]], axis=2)
    edges, which = np.unique(sides.reshape(-1, 2), axis=0, return_inverse=True)
    middles = len(nodes) + which.reshape(-1, 3)
    return np.concatenate((nodes, nodes[edges].mean(axis=1))), np.hstack((cells, middles))


def two_parts(kind: str) -> Mesh:
    one, other = grid(kind, 5, 4, shuffle=1), grid(kind, 3, 7, shuffle=2)
    nodes = np.concatenate((one.nodes, other.nodes + 3.0))
    blocks = [one.blocks[0]]
    block = other.blocks[0]
    blocks.append(Block(block.element, block.connectivity + one.node_count, block.region))
    return Mesh(nodes, tuple(blocks))


MESHES = {
    **{
        f"warped {kind}": lambda kind=kind: grid(kind, 13, 9, shape=warp, shuffle=4)
        for kind in ELEMENTS + MIXED
    },
    **{
        f"free {kind} {seed}": lambda kind=kind, seed=seed: free_mesh(kind, seed)
        for kind in ("T3", "T6")
        for seed in range(3)
    },
    **{f"one cell of {kind}": lambda kind=kind: grid(kind, 1, 1) for kind in ELEMENTS},
    "strip": lambda: grid("Q8", 150, 1, size=(150.0, 1.0), shuffle=3),
    "row of linear cells": lambda: grid("Q4", 200, 1, size=(20.0, 1.0), shuffle=3),
    "two parts": lambda: two_parts("Q8"),
    "fine": lambda: grid("Q4", 40, 40, shape=warp, shuffle=9),
}


def _system(mesh: Mesh, *, held: int = 3):
    """Analysis and stiffness, the lowest nodes of every part held."""
    analysis = analyse(mesh)
    K = assemble_stiffness(build_model(plate_job(), mesh), analysis.order.position)
    fixed = np.zeros((mesh.node_count, 2), dtype=bool)
    for part in range(mesh.component_count):
        nodes = np.flatnonzero(mesh.components == part)
        fixed[nodes[np.argsort(mesh.nodes[nodes, 0])[:held]]] = True
    decouple(K, fixed[analysis.order.order])
    return analysis, K


def _factor(analysis: Analysis, K) -> MultifrontalFactor:
    return MultifrontalFactor(analysis.fronts, K.indptr, K.indices, K.data)


# --- the tree ------------------------------------------------------------------------------------


def _random_pattern(n: int, edges: list[tuple[int, int]]) -> np.ndarray:
    A = np.eye(n, dtype=bool)
    for i, j in edges:
        A[i % n, j % n] = A[j % n, i % n] = True
    return A


def _filled(A: np.ndarray) -> np.ndarray:
    """Pattern of the Cholesky factor by elimination, one column at a time."""
    L = A.copy()
    for k in range(len(L)):
        below = np.flatnonzero(L[:, k])
        below = below[below > k]
        L[np.ix_(below, below)] = True
    return np.tril(L)


patterns = st.integers(1, 14).flatmap(
    lambda n: st.builds(
        _random_pattern, st.just(n), st.lists(st.tuples(st.integers(0, n), st.integers(0, n)))
    )
)


def _csr(A: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    _, columns = np.nonzero(A)
    return np.concatenate(([0], np.cumsum(A.sum(axis=1)))), columns


@given(patterns)
@settings(max_examples=200, deadline=None)
def test_parent_is_the_first_entry_below_the_diagonal_of_the_factor(A: np.ndarray) -> None:
    """The definition of the elimination tree, on the factor filled in by hand."""
    L = _filled(A)
    expected = [next(iter(np.flatnonzero(L[k + 1 :, k]) + k + 1), -1) for k in range(len(A))]
    assert elimination_tree(*_csr(A)).tolist() == expected


@given(patterns)
@settings(max_examples=100, deadline=None)
def test_postorder_keeps_every_subtree_together_and_the_fill(A: np.ndarray) -> None:
    parent = elimination_tree(*_csr(A))
    position = postorder(parent)
    assert sorted(position) == list(range(len(A)))
    renamed = renumber(parent, position)
    sizes = subtree_sums(renamed, np.ones(len(A), np.int64))
    for child, above in enumerate(renamed):
        if above >= 0:
            assert above - sizes[above] < child - sizes[child] + 1 <= child < above
    order = np.argsort(position)
    assert _filled(A[np.ix_(order, order)]).sum() == _filled(A).sum()


# --- fronts --------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", MESHES)
def test_fronts_hold_the_whole_factor(name: str) -> None:
    """Every entry of the factor, filled in by hand, lies in a front; nodes are dealt out once."""
    mesh = MESHES[name]()
    analysis = analyse(mesh)
    fronts = analysis.fronts
    assert sorted(analysis.order.order) == list(range(mesh.node_count))
    assert fronts.first[0] == 0
    assert fronts.node_count == mesh.node_count
    assert (np.diff(fronts.first) > 0).all()
    if mesh.node_count > 600:
        return  # filling in by hand takes too long
    model = build_model(plate_job(), mesh)
    pairs = NodePairs.build(numbered(model, analysis.order.position), mesh.node_count)
    A = np.zeros((mesh.node_count, mesh.node_count), bool)
    A[np.repeat(np.arange(mesh.node_count), np.diff(pairs.indptr)), pairs.indices] = True
    L = _filled(A)
    room = np.zeros_like(L)
    for front in range(fronts.count):
        own = np.arange(fronts.first[front], fronts.first[front + 1])
        border = fronts.border[fronts.border_first[front] : fronts.border_first[front + 1]]
        assert (np.diff(border) > 0).all()
        assert (border >= fronts.first[front + 1]).all()
        room[np.ix_(np.concatenate((own, border)), own)] = True
    assert not (L & ~room).any()


def test_fronts_store_few_zeros() -> None:
    """Fronts hold more than the factor itself, whose entries SuperLU counts; by half here."""
    mesh = grid("Q8", 40, 40, shape=warp)
    analysis, K = _system(mesh)
    entries = SuperLUFactor(K).entries / 2  # L and U
    assert analysis.fronts.entries < 1.6 * entries


def test_matrix_of_another_mesh_is_refused() -> None:
    mesh = grid("Q4", 20, 20)
    fronts = analyse(mesh).fronts
    everything = NodePairs.build([np.arange(mesh.node_count)[None]], mesh.node_count)
    with pytest.raises(LookupError, match="outside the fronts"):
        lay_out(fronts, everything.indptr, everything.indices)


# --- solutions -----------------------------------------------------------------------------------


@pytest.mark.parametrize("name", MESHES)
def test_solutions_equal_superlu_and_leave_rounding(name: str) -> None:
    analysis, K = _system(MESHES[name]())
    b = np.random.default_rng(5).standard_normal((K.shape[0], 4))
    u = _factor(analysis, K).solve(b)
    assert backward_error(K, u, b, b - K @ u).max() < 1e-14
    other = SuperLUFactor(K).solve(b)
    # Two sound solutions differ by the condition number times rounding: at worst 1e10 (strip).
    np.testing.assert_allclose(u, other, rtol=1e-5, atol=1e-6 * np.abs(other).max())


@pytest.mark.parametrize("name", ["warped T6+Q8", "free T6 0", "two parts"])
def test_solution_equals_the_dense_solution(name: str) -> None:
    analysis, K = _system(MESHES[name]())
    b = np.random.default_rng(6).standard_normal((K.shape[0], 3))
    expected = np.linalg.solve(K.toarray(), b)
    u = _factor(analysis, K).solve(b)
    np.testing.assert_allclose(u, expected, atol=1e-9 * np.abs(expected).max())


def test_one_right_hand_side_equals_many() -> None:
    analysis, K = _system(MESHES["warped Q8"]())
    factor = _factor(analysis, K)
    b = np.random.default_rng(7).standard_normal((K.shape[0], 5))
    together = factor.solve(np.asfortranarray(b))
    alone = np.hstack([factor.solve(b[:, [k]]) for k in range(5)])
    np.testing.assert_allclose(together, alone, rtol=1e-9, atol=1e-13)


def test_right_hand_sides_are_left_alone_and_none_is_allowed() -> None:
    analysis, K = _system(MESHES["warped Q4"]())
    factor = _factor(analysis, K)
    b = np.ones((K.shape[0], 2))
    factor.solve(b)
    factor.solve(b[:, :1])
    np.testing.assert_array_equal(b, 1.0)
    assert factor.solve(np.empty((K.shape[0], 0))).shape == (K.shape[0], 0)


@pytest.mark.parametrize("list_cost", [0.0, 1.0], ids=["by index lists", "by runs"])
def test_both_ways_of_adding_a_child_agree(
    list_cost: float, monkeypatch: pytest.MonkeyPatch
) -> None:
    analysis, K = _system(MESHES["free T6 1"]())
    b = np.random.default_rng(8).standard_normal((K.shape[0], 2))
    expected = _factor(analysis, K).solve(b)
    monkeypatch.setattr(numeric, "LIST_COST", list_cost)
    monkeypatch.setattr(numeric, "NUMBER_COST", 0.0)
    np.testing.assert_allclose(_factor(analysis, K).solve(b), expected, rtol=1e-8, atol=1e-12)


def test_new_values_on_one_pattern_need_no_new_analysis() -> None:
    analysis, K = _system(MESHES["warped Q8"]())
    b = np.ones((K.shape[0], 1))
    once = _factor(analysis, K).solve(b)
    K.data *= 4.0
    np.testing.assert_allclose(_factor(analysis, K).solve(b), once / 4, rtol=1e-12)


def test_indefinite_matrix_names_the_row_that_fails() -> None:
    """A dof that is coupled to nothing and has a negative stiffness can only fail by itself."""
    analysis, K = _system(MESHES["warped Q8"]())
    row = int(np.flatnonzero(np.abs(K.tocsr()).sum(axis=1) == K.diagonal())[0])
    place = np.flatnonzero(K.indices[K.indptr[row // 2] : K.indptr[row // 2 + 1]] == row // 2)[0]
    K.data[K.indptr[row // 2] + place, row % 2, row % 2] = -1.0
    with pytest.raises(NotPositiveDefiniteError) as caught:
        _factor(analysis, K)
    assert caught.value.row == row


@given(st.integers(0, 10**6), st.sampled_from(["T3", "T6"]))
@settings(max_examples=25, deadline=None)
def test_random_free_meshes_with_wild_springs_balance(seed: int, kind: str) -> None:
    """Springs over twelve decades on random plates: every row balances on its own scale."""
    analysis, K = _system(free_mesh(kind, seed, points=40))
    rows = K.tocsr()
    rows.setdiag(rows.diagonal() + 10.0 ** np.random.default_rng(seed).uniform(-1, 11, K.shape[0]))
    K = rows.tobsr((2, 2))
    b = np.random.default_rng(seed).standard_normal((K.shape[0], 2))
    u = _factor(analysis, K).solve(b)
    assert backward_error(K, u, b, b - K @ u).max() < 1e-13

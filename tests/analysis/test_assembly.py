"""Sparse assembly against a dense sum, element by element."""

import numpy as np
import pytest

from tests.plates import ELEMENTS, MIXED, grid, plate_job, warp
from workers.analysis.assembly import NodePairs, assemble_stiffness, element_blocks, pair_positions
from workers.analysis.mesh import Mesh
from workers.analysis.model import Model, build_model
from workers.geometry import Region


def _dense(model: Model) -> np.ndarray:
    """Add every element matrix to a dense matrix, one at a time."""
    K = np.zeros((model.mesh.dof_count, model.mesh.dof_count))
    for number, (block, section) in enumerate(zip(model.mesh.blocks, model.sections, strict=True)):
        matrices = block.element.stiffness(
            model.mesh.coords(number), section.constitutive, section.thickness
        )
        for nodes, matrix in zip(block.connectivity, matrices, strict=True):
            dofs = np.column_stack((2 * nodes, 2 * nodes + 1)).ravel()
            K[np.ix_(dofs, dofs)] += matrix
    return K


def _model(kind: str) -> Model:
    mesh = grid(
        kind, 4, 3, shape=warp, shuffle=1, region_of_column=[0, 0, 1, 1], regions=("plate", "web")
    )
    return build_model(plate_job(regions=(Region("web", thickness=5.0),)), mesh)


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_sparse_assembly_equals_the_dense_sum(kind: str) -> None:
    model = _model(kind)
    expected = _dense(model)
    K = assemble_stiffness(model).toarray()
    # The order of the additions differs: rounding only.
    np.testing.assert_allclose(K, expected, atol=1e-14 * np.abs(expected).max())
    np.testing.assert_allclose(K, K.T, atol=1e-14 * np.abs(expected).max())


@pytest.mark.parametrize("kind", ["Q8", "T3+Q4"])
def test_renumbered_assembly_is_the_permuted_matrix(kind: str) -> None:
    model = _model(kind)
    position = np.random.default_rng(7).permutation(model.mesh.node_count)
    K, turned = assemble_stiffness(model), assemble_stiffness(model, position)
    dofs = (2 * position[:, None] + np.arange(2)).ravel()
    np.testing.assert_allclose(
        turned.toarray()[np.ix_(dofs, dofs)], K.toarray(), atol=1e-9, rtol=1e-12
    )


@pytest.mark.parametrize("kind", ELEMENTS)
def test_rigid_motions_cost_no_force(kind: str) -> None:
    model = _model(kind)
    x, y = model.mesh.nodes.T
    one, none = np.ones_like(x), np.zeros_like(x)
    motions = np.stack([[one, none], [none, one], [-y, x]]).transpose(2, 1, 0).reshape(-1, 3)
    K = assemble_stiffness(model)
    forces = K @ motions
    np.testing.assert_allclose(forces, 0, atol=1e-13 * np.abs(K.data).max())


def test_columns_of_the_pattern_ascend_and_are_unique() -> None:
    pairs = NodePairs.build([np.array([[3, 0, 1], [1, 2, 3]])], 4)
    assert pairs.indptr.tolist() == [0, 3, 7, 10, 14]
    assert pairs.indices.tolist() == [0, 1, 3, 0, 1, 2, 3, 1, 2, 3, 0, 1, 2, 3]


def test_pattern_serves_again_when_values_change() -> None:
    model = _model("Q4")
    pairs = NodePairs.build([b.connectivity for b in model.mesh.blocks], model.mesh.node_count)
    once, twice = pairs.add_up(element_blocks(model)), pairs.add_up(2 * element_blocks(model))
    np.testing.assert_allclose(twice.data, 2 * once.data)


def test_pattern_gives_an_unused_node_an_empty_row() -> None:
    pairs = NodePairs.build([np.array([[0, 2, 3]])], 4)
    assert pairs.indptr.tolist() == [0, 3, 3, 6, 9]


def test_pair_positions_find_blocks_and_refuse_strangers() -> None:
    mesh = grid("Q4", 2, 1)
    K = assemble_stiffness(build_model(plate_job(), mesh))
    place = pair_positions(K, np.array([2]), np.array([3]))
    np.testing.assert_array_equal(K.data[place[0]], K.toarray()[4:6, 6:8])
    with pytest.raises(LookupError, match="share no element"):
        pair_positions(K, np.array([mesh.points["SW"]]), np.array([mesh.points["NE"]]))


def test_regions_give_elements_their_own_section() -> None:
    model = _model("Q4")
    assert isinstance(model.mesh, Mesh)
    region = model.mesh.blocks[0].region
    np.testing.assert_array_equal(model.sections[0].thickness, np.where(region == 1, 5.0, 2.0))

"""Points found in elements, and values interpolated there."""

import numpy as np
import pytest

from tests.plates import ELEMENTS, MIXED, annulus, grid, warp
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.mesh import Mesh
from workers.analysis.probes import Located, interpolation, locate
from workers.errors import MeshError


def _positions(mesh: Mesh, located: Located) -> np.ndarray:
    """Where the located points are, from the elements' own shape functions."""
    x = np.empty((len(located.block), 2))
    for row, (number, element) in enumerate(zip(located.block, located.element, strict=True)):
        block = mesh.blocks[number]
        N = block.element.shape_functions(located.natural[[row]])
        x[row] = (N @ mesh.nodes[block.connectivity[element]])[0]
    return x


def _anywhere(mesh: Mesh, count: int) -> np.ndarray:
    """Points strictly inside random elements."""
    rng = np.random.default_rng(3)
    points = []
    for _ in range(count):
        block = mesh.blocks[rng.integers(len(mesh.blocks))]
        nodes = block.connectivity[rng.integers(block.element_count)]
        natural = rng.dirichlet(np.ones(3))[1:] if block.element.is_triangle else rng.uniform(
            -0.99, 0.99, 2
        )  # fmt: skip
        points.append(block.element.shape_functions(natural[None])[0] @ mesh.nodes[nodes])
    return np.array(points)


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_random_points_are_found_where_they_are(kind: str) -> None:
    mesh = grid(kind, 9, 7, shape=warp, shuffle=5)
    points = _anywhere(mesh, 200)
    located = locate(mesh, points, [""] * 200)
    np.testing.assert_allclose(_positions(mesh, located), points, atol=1e-11)
    assert (located.position == points).all()


@pytest.mark.parametrize("kind", ELEMENTS)
def test_nodes_themselves_are_found(kind: str) -> None:
    """Also on the border, where rounding puts half of them outside."""
    mesh = grid(kind, 5, 4, shape=warp)
    located = locate(mesh, mesh.nodes, [""] * mesh.node_count)
    np.testing.assert_allclose(_positions(mesh, located), mesh.nodes, atol=1e-9)


def test_point_far_from_all_centres_is_found_in_a_long_element() -> None:
    """Hundreds of small elements lie nearer with their centres than the one that holds it."""

    def shape(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        return np.where(x < 0.5, 100 * x, 50 + 0.1 * (x - 0.5)), y

    mesh = grid("Q4", 60, 30, shape=shape)
    point = np.array([[49.9, 0.501]])
    located = locate(mesh, point, [""])
    np.testing.assert_allclose(_positions(mesh, located), point, atol=1e-9)


def test_shared_points_belong_to_the_lowest_element() -> None:
    mesh = grid("Q4", 2, 2)
    located = locate(mesh, np.array([[0.5, 0.5], [0.5, 0.75]]), ["", ""])
    holding = [[0, 1, 2, 3], [1, 3]]
    assert located.element.tolist() == [min(e) for e in holding]


def test_points_outside_are_faults_with_their_pointers() -> None:
    mesh = grid("T6", 3, 3)
    points = np.array([[0.5, 0.5], [2.0, 0.5], [0.5, -0.2]])
    with pytest.raises(MeshError) as error:
        locate(mesh, points, ["/a", "/b", "/c"])
    assert [fault.pointer for fault in error.value.faults] == ["/b", "/c"]
    assert "(2, 0.5) is outside the plate" in error.value.faults[0].message


def test_point_in_a_hole_is_outside() -> None:
    mesh = grid("Q8", 16, 3, shape=annulus(1.0, 2.0), closed=True)
    with pytest.raises(MeshError, match="outside"):
        locate(mesh, np.array([[0.9, 0.0]]), [""])


@pytest.mark.parametrize("kind", ELEMENTS)
def test_point_on_the_true_arc_takes_the_nearest_point_of_the_chord(kind: str) -> None:
    """The rim of radius 2 in 16 chords: their middles lie 2 (1 - cos(pi/16)) = 0.038 inside it."""
    mesh = grid(kind, 16, 3, shape=annulus(1.0, 2.0), closed=True)
    angle = np.pi / 16
    rim = 2 * np.array([[np.cos(angle), np.sin(angle)]])
    located = locate(mesh, rim, [""])
    moved = np.linalg.norm(located.position - rim)
    assert moved < (0.039 if kind in ("T3", "Q4") else 1e-3)
    np.testing.assert_allclose(_positions(mesh, located), located.position, atol=1e-12)


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_linear_field_is_interpolated_exactly(kind: str) -> None:
    field_mesh = FieldMesh.build(grid(kind, 6, 5, shape=warp))
    points = _anywhere(field_mesh.mesh, 50)
    weights = interpolation(field_mesh, locate(field_mesh.mesh, points, [""] * 50))
    found = weights @ (field_mesh.points @ [2.0, -3.0] + 1)
    np.testing.assert_allclose(found, points @ [2.0, -3.0] + 1, atol=1e-10)


def test_no_points_are_no_trouble() -> None:
    field_mesh = FieldMesh.build(grid("T3", 2, 2))
    located = locate(field_mesh.mesh, np.empty((0, 2)), [])
    assert interpolation(field_mesh, located).shape == (0, field_mesh.point_count)

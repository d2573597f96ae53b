"""Free rigid motions: which, of which part, and about which point."""

from collections.abc import Sequence

import numpy as np
import pytest

from tests.plates import ELEMENTS, grid
from workers.analysis.mesh import Block, Mesh
from workers.analysis.motions import free_motions

Row = tuple[int, float, float]  # node and direction that is held


def motions(mesh: Mesh, *rows: Row) -> list[str]:
    table = np.array(rows, float).reshape(-1, 3)
    return free_motions(mesh, table[:, 0].astype(int), table[:, 1:])


def quads(nodes: Sequence[tuple[float, float]], *rows: tuple[int, ...]) -> Mesh:
    element = grid("Q4", 1, 1).blocks[0].element
    connectivity = np.array(rows, np.int32)
    return Mesh(
        np.array(nodes, float), (Block(element, connectivity, np.zeros(len(rows), np.int32)),)
    )


PLATE = quads([(0, 0), (4, 0), (4, 2), (0, 2)], (0, 1, 2, 3))


@pytest.mark.parametrize(
    ("rows", "expected"),
    [
        pytest.param([], ["has no support at all"], id="nothing"),
        pytest.param([(0, 1, 0), (0, 0, 1)], ["can rotate about (0, 0)"], id="one pin"),
        pytest.param([(0, 0, 1), (1, 0, 1)], ["can move in x"], id="two rollers below"),
        pytest.param([(0, 1, 0), (3, 1, 0)], ["can move in y"], id="two rollers at the left"),
        pytest.param(
            [(0, 1, 1), (2, 1, 1)], ["can move along (0.7071, -0.7071)"], id="skew rollers"
        ),
        pytest.param(
            [(2, 0, 1)], ["can move in x", "can rotate about (4, 1)"], id="one roller in y"
        ),
        pytest.param(
            [(0, 1, 0), (1, 1, 0)],
            ["can move in y", "can rotate about (2, 0)"],
            id="two rollers in one line",
        ),
        pytest.param(
            [(0, 1, -1), (1, -3, -1), (3, 1, -3)],
            ["can rotate about (1, -1)"],
            id="three normals through one point",
        ),
        pytest.param([(0, 1, 0), (0, 0, 1), (1, 0, 1)], [], id="pin and roller"),
        pytest.param([(0, 1, 0), (3, 1, 0), (2, 0, 1)], [], id="three links"),
    ],
)
def test_one_plate(rows: list[Row], expected: list[str]) -> None:
    """By statics of the rigid body."""
    assert motions(PLATE, *rows) == [f"the plate {words}" for words in expected]


def test_the_length_of_a_direction_does_not_matter() -> None:
    assert motions(PLATE, (0, 1e-9, 0), (0, 0, 1e9), (1, 0, 3)) == []


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize("seed", range(4))
def test_random_supports_leave_as_many_motions_as_the_rank_says(kind: str, seed: int) -> None:
    """Against the rank of the constraints on (a, b, c) about the origin, by singular values."""
    rng = np.random.default_rng(seed)
    mesh = grid(kind, 4, 3, size=(4.0, 3.0))
    count = int(rng.integers(1, 4))
    nodes = rng.integers(0, mesh.node_count, count)
    angle = rng.choice([0.0, 90.0, 30.0, 71.0], count)
    d = np.column_stack((np.cos(np.radians(angle)), np.sin(np.radians(angle))))
    x, y = mesh.nodes[nodes].T
    rank = np.linalg.matrix_rank(np.column_stack((d, d[:, 1] * x - d[:, 0] * y)), tol=1e-9)
    assert len(free_motions(mesh, nodes, d)) == 3 - rank


def test_far_from_the_origin_and_small_the_answer_is_the_same() -> None:
    """A plate of 1e-3 at 1e3: relative to its size it is a million away."""
    nodes = PLATE.nodes * 1e-3 + [1e3, -1e3]
    mesh = Mesh(nodes, PLATE.blocks)
    assert motions(mesh, (0, 1, 0), (0, 0, 1)) == ["the plate can rotate about (1000, -1000)"]
    assert motions(mesh, (0, 1, 0), (0, 0, 1), (1, 0, 1)) == []


def test_a_support_on_a_thousandth_of_the_plate_is_enough_for_a_rigid_body() -> None:
    """Whether it is stiff enough is for the solver to say."""
    mesh = grid("Q4", 2000, 1, size=(2000.0, 1.0))
    low, high = mesh.points["SW"], mesh.points["NW"]
    assert motions(mesh, (low, 1, 0), (low, 0, 1), (high, 1, 0)) == []


# --- several parts ---------------------------------------------------------------------------

TWO = quads(
    [(0, 0), (4, 0), (4, 2), (0, 2), (10, 0), (12, 0), (12, 4), (10, 4)],
    (0, 1, 2, 3), (4, 5, 6, 7),
)  # fmt: skip
FIRST = [(0, 1, 0), (0, 0, 1), (1, 0, 1)]


def test_a_part_without_support_is_named_by_number_place_and_size() -> None:
    assert motions(TWO, *FIRST) == ["part 2 of 2 (4 nodes around (11, 2)) has no support at all"]


def test_each_part_is_judged_by_its_own_supports() -> None:
    found = motions(TWO, (0, 1, 0), (0, 0, 1), (4, 1, 0), (7, 1, 0))
    assert found == [
        "part 1 of 2 (4 nodes around (2, 1)) can rotate about (0, 0)",
        "part 2 of 2 (4 nodes around (11, 2)) can move in y",
    ]


def test_two_parts_each_held_leave_nothing_free() -> None:
    assert motions(TWO, *FIRST, (4, 1, 0), (4, 0, 1), (5, 0, 1)) == []


def test_a_hundred_loose_parts_give_a_short_list() -> None:
    corners = np.array([(0, 0), (1, 0), (1, 1), (0, 1)], float)
    nodes = (corners + 3.0 * np.arange(100)[:, None, None]).reshape(-1, 2)
    mesh = quads(nodes.tolist(), *np.arange(400).reshape(-1, 4).tolist())
    found = motions(mesh, *FIRST)
    assert len(found) == 21
    assert found[-1] == "the plate has 79 more free motions"


# --- hinges ----------------------------------------------------------------------------------

HINGED = quads([(0, 0), (2, 0), (2, 1), (0, 1), (3, 1), (3, 2), (2, 2)], (0, 1, 2, 3), (2, 4, 5, 6))


def test_pieces_joined_at_one_node_can_turn_against_each_other() -> None:
    assert motions(HINGED, *FIRST) == [
        "the plate can turn in itself: its pieces are joined only at single nodes, such as node 2 "
        "at (2, 1)"
    ]


def test_a_hinge_is_no_fault_when_both_pieces_are_held() -> None:
    assert motions(HINGED, *FIRST, (5, 1, 0)) == []


def test_a_triangle_of_hinged_pieces_is_rigid() -> None:
    """Three bars, hinged at three nodes: rigid by the count of statics, 3 x 3 = 3 x 2 + 3."""
    s = 0.2
    mesh = quads(
        [
            *([0, 0], [4, 0], [2, 3]),
            *([3, -s], [1, -s]),
            *([3.9, 1.2], [2.9, 2.4]),
            *([1.1, 2.4], [0.1, 1.2]),
        ],
        (0, 4, 3, 1), (1, 5, 6, 2), (2, 7, 8, 0),
    )  # fmt: skip
    assert len(mesh.boundary) == 12
    assert motions(mesh, (0, 1, 0), (0, 0, 1), (1, 0, 1)) == []
    assert motions(mesh, (0, 1, 0), (0, 0, 1)) == ["the plate can rotate about (0, 0)"]


def test_a_square_of_hinged_pieces_is_a_mechanism() -> None:
    """Four bars: 4 x 3 - 4 x 2 = 4, one more than the three rigid motions."""
    s = 0.2
    mesh = quads(
        [
            *([0, 0], [4, 0], [4, 4], [0, 4]),
            *([1, -s], [3, -s], [4 + s, 1], [4 + s, 3], [3, 4 + s], [1, 4 + s], [-s, 3], [-s, 1]),
        ],
        (0, 4, 5, 1), (1, 6, 7, 2), (2, 8, 9, 3), (3, 10, 11, 0),
    )  # fmt: skip
    found = motions(mesh, (0, 1, 0), (0, 0, 1), (1, 0, 1))
    assert len(found) == 1
    assert "can turn in itself" in found[0]


def test_a_hole_that_touches_the_border_at_a_node_makes_no_hinge() -> None:
    """Around the hole the material goes on: eight cells of three by three, the middle and one
    corner node pinched."""
    mesh = grid("Q4", 3, 3, size=(3.0, 3.0))
    block = mesh.blocks[0]
    centres = mesh.coords(0).mean(axis=1)
    gone = [(1.5, 1.5), (0.5, 0.5)]
    kept = np.array([tuple(c) not in {(round(x, 6), round(y, 6)) for x, y in gone}
                     for c in np.round(centres, 6)])  # fmt: skip
    used, connectivity = np.unique(block.connectivity[kept], return_inverse=True)
    holed = quads(mesh.nodes[used].tolist(), *connectivity.reshape(-1, 4).tolist())
    a, b = (int(np.flatnonzero((holed.nodes == p).all(axis=1))[0]) for p in ([3, 0], [3, 3]))
    assert motions(holed, (a, 1, 0), (a, 0, 1), (b, 1, 0)) == []


def test_very_many_hinged_pieces_are_refused_as_such() -> None:
    """A chessboard of 20 x 40 squares."""
    mesh = grid("Q4", 40, 20)
    i, j = np.divmod(np.arange(800), 20)
    kept = mesh.blocks[0].connectivity[(i + j) % 2 == 0]
    used, connectivity = np.unique(kept, return_inverse=True)
    board = quads(mesh.nodes[used].tolist(), *connectivity.reshape(-1, 4).tolist())
    found = motions(board, (0, 1, 0), (0, 0, 1), (1, 1, 0))
    assert any("400 pieces; join them" in sentence for sentence in found)

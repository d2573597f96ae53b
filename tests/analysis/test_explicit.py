"""The client's own mesh: taken as it is when it is sound, refused in plain words when not."""

from dataclasses import replace

import numpy as np
import pytest

from elements.registry import get
from tests.plates import ELEMENTS, MIXED, grid, ring, warp
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.explicit import mesh_explicit
from workers.analysis.meshing.shape import shape_faults
from workers.errors import Fault, MeshError
from workers.geometry import MeshBlock, MeshGeometry, Region

NODES = "/geometry/mesh/nodes"
BLOCKS = "/geometry/mesh/blocks"
SIDES = "/geometry/mesh/sides"


def given(mesh: Mesh) -> MeshGeometry:
    """A mesh as a client would write it down."""
    blocks = tuple(
        MeshBlock(
            b.element.name,
            b.connectivity,
            None if mesh.regions[b.region[0]] == "plate" else mesh.regions[b.region[0]],
        )
        for b in mesh.blocks
    )
    sides = {}
    for name, facets in mesh.sides.items():
        table = mesh.facet_table(facets).tolist()
        sides[name] = tuple(tuple(n for n in row if n >= 0) for row in table)
    return MeshGeometry(mesh.nodes, blocks, sides, mesh.points)


def quads(
    nodes: list[tuple[float, float]], *rows: tuple[int, ...], kind: str = "Q4"
) -> MeshGeometry:
    block = MeshBlock(kind, np.array(rows, np.int32))
    return MeshGeometry(np.array(nodes, float), (block,))


def faults_of(geometry: MeshGeometry) -> list[Fault]:
    with pytest.raises(MeshError) as caught:
        mesh_explicit(geometry)
    return list(caught.value.faults)


# --- sound meshes ----------------------------------------------------------------------------


@pytest.mark.parametrize("kind", [*ELEMENTS, *MIXED])
def test_a_sound_mesh_is_taken_as_it_is(kind: str) -> None:
    mesh = grid(kind, 4, 3, shape=warp, shuffle=1)
    taken = mesh_explicit(given(mesh))
    np.testing.assert_array_equal(taken.nodes, mesh.nodes)
    for mine, theirs in zip(taken.blocks, mesh.blocks, strict=True):
        np.testing.assert_array_equal(mine.connectivity, theirs.connectivity)
        assert mine.element is theirs.element
    for name, facets in mesh.sides.items():
        np.testing.assert_array_equal(taken.sides[name], facets)
    assert taken.points == mesh.points
    assert taken.regions == ("plate",)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_a_ring_is_sound(kind: str) -> None:
    """Curved sides, a hole, and a boundary of two loops."""
    mesh = ring(kind, 12, 3, 1.0, 2.0)
    assert len(mesh_explicit(given(mesh)).boundary) == 24


def test_side_edges_may_be_given_in_either_direction_and_without_mid_side_node() -> None:
    mesh = grid("Q8", 3, 2)
    geometry = given(mesh)
    bare = {name: tuple((b, a) for a, b, _ in edges) for name, edges in geometry.sides.items()}
    taken = mesh_explicit(replace(geometry, sides=bare))
    for name, facets in mesh.sides.items():
        np.testing.assert_array_equal(taken.sides[name], facets)


def test_blocks_may_belong_to_regions() -> None:
    mesh = grid("T3+Q4", 4, 2)
    geometry = given(mesh)
    blocks = (geometry.blocks[0], replace(geometry.blocks[1], region="web"))
    taken = mesh_explicit(replace(geometry, blocks=blocks, regions=(Region("web", thickness=2.0),)))
    assert taken.regions == ("plate", "web")
    assert [set(block.region.tolist()) for block in taken.blocks] == [{0}, {1}]


def test_far_from_the_origin_a_sound_mesh_stays_sound() -> None:
    """Survey coordinates: a plate of 1 at 1e6; rounding there is 1e-10."""
    mesh = grid("Q8", 4, 3, shape=lambda x, y: (x + 1e6, y - 3e6))
    assert mesh_explicit(given(mesh)).element_count == 12


def test_a_slender_plate_is_sound() -> None:
    """Elements of 1 to 500, far from the limit of flat."""
    mesh = grid("Q8", 4, 2, size=(1000.0, 1.0))
    assert mesh_explicit(given(mesh)).element_count == 8


def test_plates_that_are_apart_are_sound() -> None:
    geometry = quads(
        [(0, 0), (1, 0), (1, 1), (0, 1), (3, 0), (4, 0), (4, 1), (3, 1)], (0, 1, 2, 3), (4, 5, 6, 7)
    )
    assert mesh_explicit(geometry).component_count == 2


# --- faults ----------------------------------------------------------------------------------

SQUARE = [(0, 0), (1, 0), (1, 1), (0, 1)]
MIDS = [(0.5, 0), (1, 0.5), (0.5, 1), (0, 0.5)]
Q8 = tuple(range(8))


def moved(nodes: list[tuple[float, float]], number: int, to: tuple[float, float]) -> list:
    return [to if k == number else node for k, node in enumerate(nodes)]


def with_side(*edges: tuple[int, ...]) -> MeshGeometry:
    """One Q8 with the side "left" as listed."""
    return replace(quads(SQUARE + MIDS, Q8, kind="Q8"), sides={"left": edges})


FAULTY = {
    "clockwise Q4": (
        quads(SQUARE, (0, 3, 2, 1)),
        f"{BLOCKS}/0/connectivity/0",
        ["Q4 with corners 0, 3, 2, 1", "clockwise (area -1)"],
    ),
    "clockwise T3": (
        quads(SQUARE[:3], (0, 2, 1), kind="T3"),
        f"{BLOCKS}/0/connectivity/0",
        ["T3", "clockwise (area -0.5)"],
    ),
    "clockwise Q8": (
        quads(SQUARE + MIDS, (0, 3, 2, 1, 7, 6, 5, 4), kind="Q8"),
        f"{BLOCKS}/0/connectivity/0",
        ["clockwise"],
    ),
    "flat T3": (
        quads([(0, 0), (1, 1), (2, 2)], (0, 1, 2), kind="T3"),
        f"{BLOCKS}/0/connectivity/0",
        ["is flat"],
    ),
    "bow-tie": (
        quads([(0, 0), (2, 0), (0, 1), (0.5, 1)], (0, 1, 2, 3)),
        f"{BLOCKS}/0/connectivity/0",
        ["bow-tie"],
    ),
    "re-entrant Q4": (
        quads([(0, 0), (4, 0), (1, 1), (0, 4)], (0, 1, 2, 3)),
        f"{BLOCKS}/0/connectivity/0",
        ["180 degrees or more at node 2, (1, 1)"],
    ),
    "Q4 that is a triangle": (
        quads([(0, 0), (2, 0), (1, 1), (0, 2)], (0, 1, 2, 3)),
        f"{BLOCKS}/0/connectivity/0",
        ["180 degrees or more at node 2"],
    ),
    "Q8 folded by a mid-side node past the corner": (
        quads(moved(SQUARE + MIDS, 4, (1.1, 0)), Q8, kind="Q8"),
        f"{BLOCKS}/0/connectivity/0",
        ["folded near", "mid-side node 4 at (1.1, 0)", "middle (0.5, 0) between nodes 0 and 1"],
    ),
    "Q8 folded at the quarter point": (
        quads(moved(SQUARE + MIDS, 4, (0.25, 0)), Q8, kind="Q8"),
        f"{BLOCKS}/0/connectivity/0",
        ["folded near (0, 0)"],
    ),
    "Q8 folded inside": (
        quads(moved(moved(SQUARE + MIDS, 4, (0.5, 0.6)), 6, (0.5, 0.4)), Q8, kind="Q8"),
        f"{BLOCKS}/0/connectivity/0",
        ["folded near", "det J -"],
    ),
    "Q8 with mid-sides that start at the wrong side": (
        quads(SQUARE + MIDS, (0, 1, 2, 3, 5, 6, 7, 4), kind="Q8"),
        f"{BLOCKS}/0/connectivity/0",
        ["folded"],
    ),
    "T6 folded": (
        quads([(0, 0), (1, 0), (0, 1), (0.5, 0), (0.1, 0.1), (0, 0.5)], tuple(range(6)), kind="T6"),
        f"{BLOCKS}/0/connectivity/0",
        ["T6", "folded", "mid-side node 4"],
    ),
    "node number out of range": (
        quads(SQUARE, (0, 1, 2, 4)),
        f"{BLOCKS}/0/connectivity/0/3",
        ["there is no node 4", "0 to 3"],
    ),
    "negative node number": (
        quads(SQUARE, (0, 1, 2, -1)),
        f"{BLOCKS}/0/connectivity/0/3",
        ["there is no node -1"],
    ),
    "node twice in an element": (
        quads(SQUARE, (0, 1, 2, 2)),
        f"{BLOCKS}/0/connectivity/0",
        ["node 2 stands twice in Q4 [0, 1, 2, 2]"],
    ),
    "wrong number of nodes": (
        quads(SQUARE, (0, 1, 2)),
        f"{BLOCKS}/0/connectivity",
        ["4 node numbers for Q4", "(1, 3)"],
    ),
    "unknown element type": (
        quads(SQUARE, (0, 1, 2, 3), kind="Q5"),
        f"{BLOCKS}/0/element",
        ["'Q5'", "Q4"],
    ),
    "coordinate not a number": (
        quads(moved(SQUARE, 2, (np.nan, 1)), (0, 1, 2, 3)),
        f"{NODES}/2",
        ["finite"],
    ),
    "orphan node": (
        quads([*SQUARE, (9, 9)], (0, 1, 2, 3)),
        f"{NODES}/4",
        ["node 4 at (9, 9) belongs to no element"],
    ),
    "coincident nodes": (
        quads([*SQUARE, (1, 0), (2, 0), (2, 1), (1, 1)], (0, 1, 2, 3), (4, 5, 6, 7)),
        f"{NODES}/4",
        ["nodes 1 and 4 are at the same place, (1, 0)"],
    ),
    "edge of three elements": (
        quads(
            [(0, 0), (1, 0), (1, 1), (0, 1), (2, 0), (2, 1), (3, 0), (3, 1)],
            (0, 1, 2, 3), (1, 4, 5, 2), (1, 6, 7, 2),
        ),
        f"{BLOCKS}/0/connectivity/2",
        ["between nodes 1 and 2 belongs to 3 elements (Q4 0, Q4 1, Q4 2)"],
    ),
    "two elements on the same side of an edge": (
        quads([(0, 0), (1, 0), (1, 1), (0, 1), (1, 2), (0, 2)], (0, 1, 2, 3), (0, 1, 4, 5)),
        f"{BLOCKS}/0/connectivity/1",
        ["Q4 0 and Q4 1 lie on the same side of the line from node 0 to 1"],
    ),
    "linear beside quadratic": (
        MeshGeometry(
            np.array([*SQUARE, *MIDS, (2, 0), (2, 1)], float),
            (
                MeshBlock("Q8", np.array([Q8], np.int32)),
                MeshBlock("Q4", np.array([[1, 8, 9, 2]], np.int32)),
            ),
        ),
        f"{BLOCKS}/1/connectivity/0",
        ["Q8 0 of block 0 and Q4 0 of block 1", "node 5 in one and none in the other"],
    ),
    "hanging node at a mid-side node": (
        MeshGeometry(
            np.array([*SQUARE, *MIDS, (2, 0), (2, 0.5), (2, 1)], float),
            (
                MeshBlock("Q8", np.array([Q8], np.int32)),
                MeshBlock("Q4", np.array([[1, 8, 9, 5], [5, 9, 10, 2]], np.int32)),
            ),
        ),
        f"{NODES}/5",
        ["node 5 at (1, 0.5) is a corner of one element and a mid-side node of another"],
    ),
    "hanging node": (
        quads(
            [*SQUARE, (2, 0), (2, 0.5), (1, 0.5), (2, 1)],
            (0, 1, 2, 3), (1, 4, 5, 6), (6, 5, 7, 2),
        ),
        f"{BLOCKS}/0/connectivity/0",
        ["node 6 at (1, 0.5) lies on the side 1-2 of element 0", "share whole sides"],
    ),
    "overlapping parts": (
        quads(
            [*SQUARE, (0.5, 0.2), (1.5, 0.2), (1.5, 0.8), (0.5, 0.8)], (0, 1, 2, 3), (4, 5, 6, 7)
        ),
        f"{BLOCKS}/0/connectivity/1",
        ["crosses the side", "at (1, 0.2)", "at (1, 0.8)"],
    ),
    "a part inside another": (
        quads(
            [(0, 0), (9, 0), (9, 9), (0, 9), (4, 4), (5, 4), (5, 5), (4, 5)],
            (0, 1, 2, 3), (4, 5, 6, 7),
        ),
        f"{BLOCKS}/0/connectivity/1",
        ["lies inside another element"],
    ),
    "side without edges": (with_side(), f"{SIDES}/left", ["side 'left' has no edges"]),
    "side edge that is a diagonal": (
        with_side((0, 2)),
        f"{SIDES}/left/0",
        ["no element has a side from corner node 0 (0, 0) to corner node 2 (1, 1)"],
    ),
    "side edge from a mid-side node": (
        with_side((0, 7)),
        f"{SIDES}/left/0",
        ["[corner, corner, mid-side node]"],
    ),
    "side with another mid-side node": (
        with_side((0, 1, 4), (3, 0, 6)),
        f"{SIDES}/left/1/2",
        ["the mid-side node between nodes 3 and 0 is node 7, not node 6"],
    ),
    "side edge listed twice": (
        with_side((0, 1), (1, 0)),
        f"{SIDES}/left/1",
        ["between nodes 1 and 0 is listed twice"],
    ),
    "side edge with an unknown node": (
        with_side((0, 99)),
        f"{SIDES}/left/0",
        ["there is no node 99"],
    ),
    "point with an unknown node": (
        replace(quads(SQUARE, (0, 1, 2, 3)), points={"tip": 4}),
        "/geometry/mesh/points/tip",
        ["there is no node 4"],
    ),
    "region that no block belongs to": (
        replace(
            quads(SQUARE, (0, 1, 2, 3)),
            regions=(Region("web", thickness=1.0, pointer="/geometry/regions/0"),),
        ),
        "/geometry/regions/0",
        ["nothing belongs to region 'web'"],
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", FAULTY)
def test_faulty_meshes_are_refused_in_plain_words(case: str) -> None:
    geometry, pointer, words = FAULTY[case]
    said = " ".join(fault.message for fault in faults_of(geometry) if fault.pointer == pointer)
    for word in words:
        assert word in said


def test_faults_of_every_kind_are_reported_together() -> None:
    geometry = quads([*SQUARE, (9, 9), (9, 9)], (0, 3, 2, 1))
    text = " ".join(fault.message for fault in faults_of(geometry))
    for words in ("clockwise", "belongs to no element", "at the same place"):
        assert words in text


def test_a_mesh_turned_over_gives_a_short_list() -> None:
    """Five hundred clockwise elements are one mistake, not five hundred."""
    mesh = grid("Q4", 25, 20, shape=lambda x, y: (-x, y))
    found = faults_of(given(mesh))
    assert len(found) == 21
    assert "more faults of this kind" in found[-1].message


@pytest.mark.parametrize("kind", ["T6", "Q8"])
def test_an_accepted_shape_serves_every_rule_of_the_analysis(kind: str) -> None:
    """Random elements, half of them folded: wherever the check sees no fault, the element itself
    finds det J positive at all of its integration points, and a fine lattice, bar slivers."""
    rng = np.random.default_rng(3)
    element = get(kind)
    nodes = element.natural_nodes + rng.normal(0, 0.22, (2000, *element.natural_nodes.shape))
    connectivity = np.arange(nodes[..., 0].size).reshape(len(nodes), -1)
    refused = {f.element for f in shape_faults(element, connectivity, nodes.reshape(-1, 2))}
    accepted = nodes[[k for k in range(len(nodes)) if k not in refused]]
    assert 300 < len(accepted) < 1700
    for points in (element.stiffness_rule().points, element.load_rule().points):
        element.jacobian(accepted, points)  # raises where det J <= 0
    fine = np.stack(np.meshgrid(*[np.linspace(0, 1, 41)] * 2), axis=-1).reshape(-1, 2)
    fine = fine[fine.sum(axis=1) <= 1] if element.is_triangle else 2 * fine - 1
    J = np.einsum("qin,mnj->mqij", element.gradients(fine), accepted)
    assert (np.linalg.det(J).min(axis=1) <= 0).mean() < 0.003


@pytest.mark.parametrize("kind", ELEMENTS)
def test_a_hole_touched_by_a_bore_that_is_too_wide_is_refused(kind: str) -> None:
    """A ring and, inside its bore but crossing it, a square plate."""
    mesh = ring(kind, 12, 2, 1.0, 2.0)
    square = grid(kind, 1, 1, size=(1.5, 1.5), shape=lambda x, y: (x - 0.75, y - 0.75))
    block, other = mesh.blocks[0], square.blocks[0]
    both = np.concatenate((block.connectivity, other.connectivity + mesh.node_count))
    geometry = MeshGeometry(
        np.concatenate((mesh.nodes, square.nodes)), (MeshBlock(kind, both.astype(np.int32)),)
    )
    assert any("crosses the side" in fault.message for fault in faults_of(geometry))


@pytest.mark.parametrize("kind", ["T6", "Q8"])
def test_curved_sides_that_bulge_past_each_others_chords_do_not_cross(kind: str) -> None:
    """A disc of radius 0.99 inside a bore of radius 1, eight facets each: their chords would leave
    0.05 between them, the curves leave 0.01."""
    mesh = ring(kind, 8, 2, 1.0, 2.0)
    disc = ring(kind, 16, 2, 0.4, 0.99)
    block, other = mesh.blocks[0], disc.blocks[0]
    both = np.concatenate((block.connectivity, other.connectivity + mesh.node_count))
    geometry = MeshGeometry(
        np.concatenate((mesh.nodes, disc.nodes)), (MeshBlock(kind, both.astype(np.int32)),)
    )
    assert mesh_explicit(geometry).component_count == 2

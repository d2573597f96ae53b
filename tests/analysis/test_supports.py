"""Supports: held directions, normals, prescribed values, springs, contradictions."""

import numpy as np
import pytest

from tests.plates import ELEMENTS, MIXED, annulus, grid, plate_job, ring
from workers.analysis.mesh import Mesh
from workers.analysis.support_rows import side_normals
from workers.analysis.supports import Supports, resolve_supports
from workers.errors import MeshError
from workers.geometry import Region
from workers.job import Box, Named, Nodes, PointForce, Spring, Support

LEFT, BOTTOM, CORNER = Named("left"), Named("bottom"), Named("SW")


def _resolve(mesh: Mesh, *supports: Support, cases: tuple[str, ...] = ("load",)) -> Supports:
    return resolve_supports(plate_job(supports, dict.fromkeys(cases, ())), mesh)


def _held(supports: Supports, node: int) -> list[bool]:
    return supports.held[node].tolist()


def test_ux_and_uy_hold_their_own_direction() -> None:
    mesh = grid("Q8", 2, 2)
    found = _resolve(mesh, Support("a", LEFT, ux=0.0), Support("b", BOTTOM, uy=0.0))
    assert _held(found, mesh.points["NW"]) == [True, False]
    assert _held(found, mesh.points["SE"]) == [False, True]
    assert _held(found, mesh.points["SW"]) == [True, True]
    assert _held(found, mesh.points["NE"]) == [False, False]
    assert not len(found.turned)


@pytest.mark.parametrize(("side", "axis"), [("left", 0), ("bottom", 1), ("right", 0), ("top", 1)])
def test_normal_of_an_upright_side_needs_no_turned_axes(side: str, axis: int) -> None:
    mesh = grid("T6", 3, 3)
    found = _resolve(mesh, Support("roller", Named(side), normal=0.0))
    nodes = mesh.facet_nodes(mesh.sides[side])
    assert found.held[nodes, axis].all()
    assert found.held.sum() == len(nodes)
    assert not len(found.turned)


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_normals_of_a_full_circle_are_radial(kind: str) -> None:
    """Nodes and chords are symmetric about every radius through a corner or mid-side node."""
    mesh = ring(kind, 12, 2, 1.0, 2.0)
    nodes, normals, blur = side_normals(mesh, mesh.sides["bore"])
    if "+" not in kind:
        np.testing.assert_allclose(normals, -mesh.nodes[nodes], atol=1e-12)
    assert not blur.any()


def test_skew_roller_turns_the_axes_of_its_nodes() -> None:
    mesh = grid("Q4", 1, 1)
    found = _resolve(mesh, Support("skew", CORNER, along=(3.0, 4.0)))
    assert found.turned.tolist() == [mesh.points["SW"]]
    np.testing.assert_allclose(found.axes[0], [[0.6, -0.8], [0.8, 0.6]])
    assert _held(found, mesh.points["SW"]) == [True, False]


def test_two_skew_directions_hold_a_node_and_prescribe_both_components() -> None:
    """u . (1, 0) = 1 and u . (1, 1)/sqrt 2 = sqrt 2 give u = (1, 1)."""
    mesh = grid("Q4", 1, 1)
    found = _resolve(
        mesh,
        Support("x", CORNER, ux=1.0),
        Support("skew", CORNER, along=(1.0, 1.0), displacement=np.sqrt(2.0)),
    )
    assert _held(found, mesh.points["SW"]) == [True, True]
    assert not len(found.turned)
    node = mesh.points["SW"]
    np.testing.assert_allclose(found.prescribed.toarray()[2 * node : 2 * node + 2, 0], [1, 1])


def test_reaction_at_a_doubly_held_node_is_split_along_the_two_directions() -> None:
    """R = (5, 3) = 2 (1, 0) + 3 (1, 1): each support pushes along its own direction."""
    mesh = grid("Q4", 1, 1)
    found = _resolve(mesh, Support("x", CORNER, ux=0.0), Support("skew", CORNER, along=(1.0, 1.0)))
    R = np.array([5.0, 3.0])
    parts = [share.direction[0] * (share.measure[0] @ R) for share in found.shares]
    np.testing.assert_allclose(parts, [[2, 0], [3, 3]])


def test_direction_that_is_held_twice_belongs_to_the_first_support() -> None:
    mesh = grid("Q4", 1, 1)
    found = _resolve(mesh, Support("a", CORNER, ux=0.0), Support("b", LEFT, ux=0.0))
    assert found.shares[0].nodes.tolist() == [mesh.points["SW"]]
    assert found.shares[1].nodes.tolist() == [mesh.points["NW"]]


def test_opposite_directions_are_one_and_their_values_are_compared_with_sign() -> None:
    mesh = grid("Q4", 1, 1)
    ux = Support("a", LEFT, ux=0.5)
    _resolve(mesh, ux, Support("b", LEFT, normal=-0.5))  # the outward normal is -x
    with pytest.raises(MeshError, match="contradicts 'a'"):
        _resolve(mesh, ux, Support("b", LEFT, normal=0.5, pointer="/supports/1"))


def test_contradiction_names_place_and_supports() -> None:
    mesh = grid("Q8", 2, 2, size=(4.0, 2.0))
    with pytest.raises(MeshError) as caught:
        _resolve(
            mesh,
            Support("base", BOTTOM, uy=0.0, pointer="/supports/0"),
            Support("jack", LEFT, uy=2.0, pointer="/supports/1"),
        )
    assert {fault.pointer for fault in caught.value.faults} <= {"/supports/0", "/supports/1"}
    assert "(0, 0)" in str(caught.value)
    assert "'base'" in str(caught.value)
    assert "'jack'" in str(caught.value)


def test_third_direction_must_fit_the_first_two() -> None:
    mesh = grid("Q4", 1, 1)
    both = Support("pin", CORNER, ux=1.0, uy=1.0)
    _resolve(mesh, both, Support("third", CORNER, along=(1, 1), displacement=np.sqrt(2.0)))
    with pytest.raises(MeshError, match="contradicts 'pin'"):
        _resolve(mesh, both, Support("third", CORNER, along=(1, 1), displacement=1.0))
    with pytest.raises(MeshError, match="contradicts 'pin'"):
        _resolve(mesh, both, Support("third", CORNER, along=(1, 1)))


def test_value_of_a_case_acts_in_that_case_only() -> None:
    mesh = grid("Q4", 1, 1)
    found = _resolve(mesh, Support("s", LEFT, ux=0.5, case="b"), cases=("a", "b", "c"))
    node = mesh.points["SW"]
    np.testing.assert_array_equal(found.prescribed.toarray()[2 * node], [0, 0.5, 0])
    assert found.held[node, 0]


def test_supports_may_prescribe_different_cases_in_one_direction() -> None:
    mesh = grid("Q4", 1, 1)
    found = _resolve(
        mesh,
        Support("s", LEFT, ux=0.5, case="a"),
        Support("t", LEFT, ux=0.25, case="b"),
        cases=("a", "b", "c"),
    )
    node = mesh.points["SW"]
    np.testing.assert_array_equal(found.prescribed.toarray()[2 * node], [0.5, 0.25, 0])


def test_value_for_all_cases_contradicts_another_for_one_case() -> None:
    mesh = grid("Q4", 1, 1)
    with pytest.raises(MeshError, match="contradicts"):
        _resolve(
            mesh,
            Support("s", LEFT, ux=0.0),
            Support("t", LEFT, ux=0.25, case="b"),
            cases=("a", "b"),
        )


def test_arcs_that_meet_smoothly_do_not_pin_the_node_between_them() -> None:
    """A ring held along its normal on both halves stays free to turn."""
    mesh = ring("Q4", 24, 1, 1.0, 2.0)
    middle = mesh.nodes[mesh.facet_ends(mesh.sides["bore"])].mean(axis=1)
    halves = {
        "upper": mesh.sides["bore"][middle[:, 1] > 0],
        "lower": mesh.sides["bore"][middle[:, 1] < 0],
    }
    mesh = Mesh(mesh.nodes, mesh.blocks, mesh.regions, halves)
    found = _resolve(
        mesh, Support("u", Named("upper"), normal=0.0), Support("l", Named("lower"), normal=0.0)
    )
    assert found.held.sum() == 24


def test_straight_rollers_at_an_acute_corner_do_pin_it() -> None:
    """Ten degrees between two straight sides is a corner, however acute."""
    mesh = grid("Q8", 2, 2, shape=lambda x, y: (x, y * (0.1 + 0.9 * x) + 0.176 * x))
    found = _resolve(
        mesh,
        Support("floor", BOTTOM, normal=0.0),
        Support("bed", CORNER, uy=0.0),
    )
    assert _held(found, mesh.points["SW"]) == [True, True]


def test_region_and_box_hold_every_node_in_them() -> None:
    mesh = grid("Q4", 4, 1, region_of_column=[0, 0, 1, 1], regions=("plate", "pad"))
    job = plate_job([Support("pad", Named("pad"), ux=0.0)], regions=(Region("pad"),))
    assert resolve_supports(job, mesh).held[:, 0].sum() == 6
    boxed = _resolve(mesh, Support("box", Box((-1, -1), (0.6, 2)), uy=0.0))
    assert boxed.held[:, 1].sum() == 6


# --- springs -----------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ELEMENTS)
def test_side_springs_add_up_to_stiffness_times_length(kind: str) -> None:
    """Unit motion of the whole side: force k L, by hand; here L = 3 along x."""
    mesh = grid(kind, 3, 2, size=(3.0, 1.0))
    spring = Spring(x=2.0, y=5.0)
    found = _resolve(mesh, Support("bed", BOTTOM, spring=spring)).springs[0]
    np.testing.assert_allclose(found.blocks.sum(axis=0), [[6, 0], [0, 15]], rtol=1e-14)


def test_normal_and_tangential_springs_follow_the_side() -> None:
    """On the right side the normal is x, on the bottom y."""
    mesh = grid("Q8", 2, 2)
    spring = Spring(normal=2.0, tangential=0.5)
    right = _resolve(mesh, Support("s", Named("right"), spring=spring)).springs[0]
    bottom = _resolve(mesh, Support("s", BOTTOM, spring=spring)).springs[0]
    np.testing.assert_allclose(right.blocks.sum(axis=0), [[2, 0], [0, 0.5]], atol=1e-14)
    np.testing.assert_allclose(bottom.blocks.sum(axis=0), [[0.5, 0], [0, 2]], atol=1e-14)


def test_linear_side_spring_is_the_consistent_matrix() -> None:
    """Integral of N N^T over length L: k L / 6 [[2, 1], [1, 2]]."""
    mesh = grid("Q4", 1, 1, size=(6.0, 1.0))
    found = _resolve(mesh, Support("bed", BOTTOM, spring=Spring(y=1.0))).springs[0]
    K = np.zeros((mesh.node_count, mesh.node_count))
    np.add.at(K, (found.rows, found.columns), found.blocks[:, 1, 1])
    ends = [mesh.points["SW"], mesh.points["SE"]]
    np.testing.assert_allclose(K[np.ix_(ends, ends)], [[2, 1], [1, 2]], rtol=1e-14)


def test_point_spring_pushes_back() -> None:
    mesh = grid("Q4", 1, 1)
    found = _resolve(mesh, Support("s", CORNER, spring=Spring(x=4.0, y=9.0))).springs[0]
    u = np.ones((mesh.node_count, 2, 1)) * [[0.5], [-1.0]]
    assert found.nodes.tolist() == [mesh.points["SW"]]
    np.testing.assert_allclose(found.force(u)[0, :, 0], [-2, 9])


FAULTS = {
    "normal at a point": (Support("s", CORNER, normal=0.0), "needs a side"),
    "normal spring at a point": (Support("s", CORNER, spring=Spring(normal=1.0)), "no normal"),
    "spring on a region": (Support("s", Named("plate"), spring=Spring(x=1.0)), "is a region"),
    "unknown name": (Support("s", Named("lfet"), ux=0.0), "left"),
    "unknown node": (Support("s", Nodes((99999,)), ux=0.0), "99999"),
}


@pytest.mark.parametrize("name", FAULTS)
def test_support_that_cannot_hold_is_a_fault_at_its_place(name: str) -> None:
    support, words = FAULTS[name]
    placed = Support(**{**vars(support), "pointer": "/supports/3"})
    with pytest.raises(MeshError, match=words) as caught:
        _resolve(grid("Q4", 2, 2), placed)
    assert caught.value.faults[0].pointer.startswith("/supports/3")


def test_all_faulty_supports_are_reported_together() -> None:
    with pytest.raises(MeshError) as caught:
        _resolve(grid("Q4", 2, 2), *(support for support, _ in FAULTS.values()))
    assert len(caught.value.faults) == len(FAULTS)


def test_no_supports_hold_nothing() -> None:
    job = plate_job((), [PointForce(on=CORNER, force=(1, 0))])
    assert not resolve_supports(job, grid("Q4", 1, 1)).held.any()


# --- rollers and springs on curved sides, and where they end ------------------------------------


def _ellipse(kind: str) -> Mesh:
    """Half a ring between ellipses about twice as wide as high; "bottom" is the outer one."""

    def shape(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        r, angle = 2 - y, np.pi * x
        return 2 * r * np.cos(angle), r * np.sin(angle)

    return grid(kind, 24, 2, shape=shape)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_pieces_of_a_curve_that_is_no_arc_do_not_pin_the_node_between_them(kind: str) -> None:
    """Normals of an ellipse are known up to its change of curvature over an element."""
    mesh = _ellipse(kind)
    x = mesh.nodes[mesh.facet_ends(mesh.sides["bottom"])].mean(axis=1)[:, 0]
    rim = mesh.sides["bottom"]
    pieces = {"a": rim[x < -2], "b": rim[x >= -2]}
    mesh = Mesh(mesh.nodes, mesh.blocks, mesh.regions, pieces)
    found = _resolve(
        mesh, Support("a", Named("a"), normal=0.0), Support("b", Named("b"), normal=0.0)
    )
    assert found.held.sum() == len(mesh.facet_nodes(rim))


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize("degrees", [2.0, 10.0])
def test_a_roller_that_meets_an_arc_at_an_angle_pins_the_node_there(
    kind: str, degrees: float
) -> None:
    """The end of an arc has its radius for a normal, exactly, so that two degrees are two degrees:
    six elements of 20 degrees follow the arc."""
    mesh = grid(kind, 6, 2, shape=lambda x, y: annulus(2.0, 3.0)(x / 3, y))
    end = mesh.points["SW"]  # at (3, 0), normal x
    a = np.radians(degrees)
    found = _resolve(
        mesh,
        Support("arc", BOTTOM, normal=0.0),
        Support("slide", Named("SW"), along=(np.cos(a), np.sin(a))),
    )
    assert _held(found, end) == [True, True]


@pytest.mark.parametrize("kind", ELEMENTS)
def test_normal_springs_on_a_circle_do_not_resist_its_rotation(kind: str) -> None:
    """A turn about the centre moves no point along the normal: no force, to rounding."""
    mesh = ring(kind, 12, 2, 1.0, 2.0)
    bore = Named("bore")
    turn = np.stack((-mesh.nodes[:, 1], mesh.nodes[:, 0]), axis=1)[..., None]
    normal = _resolve(mesh, Support("s", bore, spring=Spring(normal=1.0))).springs[0]
    assert np.abs(normal.force(turn)).max() < 1e-13
    tangential = _resolve(mesh, Support("s", bore, spring=Spring(tangential=1.0))).springs[0]
    force = tangential.force(turn)[..., 0]
    at = mesh.nodes[tangential.nodes]
    length = mesh.facet_lengths(mesh.sides["bore"]).sum()
    moment = (at[:, 0] * force[:, 1] - at[:, 1] * force[:, 0]).sum()
    assert moment == pytest.approx(-length, rel=1e-12)


def test_a_corner_in_one_side_is_held_both_ways() -> None:
    mesh = grid("Q8", 2, 2)
    facets = np.concatenate((mesh.sides["bottom"], mesh.sides["right"]))
    mesh = Mesh(mesh.nodes, mesh.blocks, mesh.regions, {"both": facets}, mesh.points)
    found = _resolve(mesh, Support("rails", Named("both"), normal=0.0))
    assert _held(found, mesh.points["SE"]) == [True, True]
    assert _held(found, mesh.points["SW"]) == [False, True]
    assert _held(found, mesh.points["NE"]) == [True, False]


def test_a_corner_of_a_spring_bed_pushes_along_both_legs() -> None:
    """Legs of 1 and 1 along x and y: together k L on each axis, no coupling of the two."""
    mesh = grid("Q8", 2, 2)
    facets = np.concatenate((mesh.sides["bottom"], mesh.sides["right"]))
    mesh = Mesh(mesh.nodes, mesh.blocks, mesh.regions, {"both": facets}, mesh.points)
    found = _resolve(mesh, Support("bed", Named("both"), spring=Spring(normal=3.0))).springs[0]
    np.testing.assert_allclose(found.blocks.sum(axis=0), [[3, 0], [0, 3]], atol=1e-14)

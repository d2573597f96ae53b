"""Mapped patches: positions, counts, joints, nesting, and every way to get them wrong."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from elements.registry import get
from tests.plates import ELEMENTS
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.curves import NoArcError, arc_through
from workers.analysis.meshing.patches import graded, mesh_patches
from workers.errors import Fault, MeshError
from workers.geometry import Patch, PatchGeometry, Region, Vector


def rectangle(
    name: str, low: Vector, high: Vector, divisions: tuple[int, int], **more: Any
) -> Patch:
    (a, b), (c, d) = low, high
    corners = ((a, b), (c, b), (c, d), (a, d))
    return Patch(name, corners, divisions, pointer=f"/geometry/patches/{name}", **more)


def polar(radius: float, degrees: float, centre: Vector = (0.0, 0.0)) -> Vector:
    angle = np.radians(degrees)
    return centre[0] + radius * np.cos(angle), centre[1] + radius * np.sin(angle)


def sector(
    name: str,
    first: float,
    last: float,
    divisions: tuple[int, int] = (3, 4),
    *,
    centre: Vector = (0.0, 0.0),
    **more: Any,
) -> Patch:
    """Between the radii 1 and 2 and two angles; side 2-3 is the rim, side 4-1 the bore."""
    middle = (first + 2 * last) / 3  # any point of the arc will do
    corners = [polar(r, a, centre) for r, a in ((1, first), (2, first), (2, last), (1, last))]
    through = (None, polar(2, middle, centre), None, polar(1, middle, centre))
    more = {"sides": (None, "rim", None, "bore")} | more
    place = f"/geometry/patches/{name}"
    return Patch(name, tuple(corners), divisions, through=through, pointer=place, **more)


def mesh(*patches: Patch, kind: str = "Q8", **more: Any) -> Mesh:
    return mesh_patches(PatchGeometry(tuple(patches), **more), get(kind))


def area(plate: Mesh) -> float:
    block = plate.blocks[0]
    points, weights = block.element.load_rule()
    _, det_J = block.element.jacobian(plate.coords(0), points)
    return float((det_J @ weights).sum())


# --- one patch -------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ELEMENTS)
def test_counts_follow_from_the_divisions(kind: str) -> None:
    """(m + 1)(n + 1) corners; with mid-sides (2m + 1)(2n + 1), less m n middles for Q8."""
    m, n = 5, 3
    plate = mesh(rectangle("a", (0, 0), (2, 1), (m, n)), kind=kind)
    corners, lattice = (m + 1) * (n + 1), (2 * m + 1) * (2 * n + 1)
    expected = {"T3": corners, "Q4": corners, "T6": lattice, "Q8": lattice - m * n}
    assert plate.node_count == expected[kind]
    assert plate.element_count == (2 * m * n if kind[0] == "T" else m * n)
    assert len(plate.boundary) == 2 * (m + n)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_a_straight_sided_patch_has_the_area_of_its_polygon(kind: str) -> None:
    """Shoelace: (0,0) (5,1) (4,4) (-1,3) has 16."""
    corners = ((0, 0), (5, 1), (4, 4), (-1, 3))
    plate = mesh(Patch("a", corners, (4, 3), (2.0, 0.5)), kind=kind)
    assert area(plate) == pytest.approx(16.0, rel=1e-13)


@pytest.mark.parametrize(("kind", "order"), [("T3", 2), ("Q4", 2), ("T6", 4), ("Q8", 4)])
def test_the_area_of_a_ring_sector_converges(kind: str, order: int) -> None:
    """(4 - 1) pi/4 for 90 degrees; polygons err by h^2, parabolas by h^4."""
    errors = [
        abs(area(mesh(sector("a", 10, 100, (2 * k, 3 * k)), kind=kind)) - 0.75 * np.pi)
        for k in (1, 2)
    ]
    assert np.log2(errors[0] / errors[1]) == pytest.approx(order, abs=0.1)


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize("centre", [(0.0, 0.0), (1e4, -2e4)])
def test_nodes_of_an_arc_lie_on_the_circle(kind: str, centre: Vector) -> None:
    """All of them, mid-side nodes included, to 1e-12 of the position."""
    plate = mesh(sector("a", 10, 100, (3, 7), grading=(2.0, 3.0), centre=centre), kind=kind)
    for name, radius in (("bore", 1.0), ("rim", 2.0)):
        nodes = plate.nodes[plate.facet_nodes(plate.sides[name])]
        off = np.linalg.norm(nodes - centre, axis=1) - radius
        assert np.abs(off).max() < 1e-12 * max(1.0, np.abs(centre).max())


def test_mid_side_nodes_of_an_arc_are_in_its_middle() -> None:
    """Both halves of a rim facet have the same chord, whatever the grading."""
    plate = mesh(sector("a", 0, 90, (2, 5), grading=(1.0, 4.0)))
    a, b, mid = plate.nodes[plate.facet_table(plate.sides["rim"])].transpose(1, 0, 2)
    np.testing.assert_allclose(
        np.linalg.norm(mid - a, axis=1), np.linalg.norm(b - mid, axis=1), rtol=1e-13
    )


def test_an_arc_of_more_than_half_a_circle_goes_the_way_of_its_third_point() -> None:
    """Three quarters of the circle of radius 1 about (0, 0)."""
    arc = arc_through(np.array([1.0, 0]), np.array([-1.0, 0]), np.array([0, -1.0]))
    assert arc.sweep == pytest.approx(1.5 * np.pi, rel=1e-14)
    back = arc_through(np.array([0, -1.0]), np.array([-1.0, 0]), np.array([1.0, 0]))
    assert back.sweep == pytest.approx(-1.5 * np.pi, rel=1e-14)
    t = np.linspace(0, 1, 9)
    np.testing.assert_allclose(arc.at(t), back.at(1 - t), atol=1e-15)


def test_three_points_in_line_make_no_arc() -> None:
    with pytest.raises(NoArcError):
        arc_through(np.array([0.0, 0]), np.array([1.0, 1e-7]), np.array([2.0, 0]))


def test_triangles_cut_half_the_cells_each_way() -> None:
    plate = mesh(rectangle("a", (0, 0), (4, 4), (4, 4)), kind="T3")
    one, other = (plate.nodes[plate.facet_ends(f)] for f in plate.shared_facets())
    slope = np.diff(one, axis=1)[:, 0].prod(axis=1)
    assert (slope > 0).sum() == (slope < 0).sum() == 8
    assert len(other)


# --- grading and nesting ---------------------------------------------------------------------


@pytest.mark.parametrize("ratio", [0.1, 0.999, 1.0, 3.0, 50.0])
def test_graded_sizes_form_a_geometric_progression(ratio: float) -> None:
    """n sizes, each ratio^(1/n) times the one before."""
    sizes = np.diff(graded(8, ratio))
    np.testing.assert_allclose(sizes[1:] / sizes[:-1], ratio ** (1 / 8), rtol=1e-12)
    assert sizes.sum() == pytest.approx(1, rel=1e-14)


@pytest.mark.parametrize("ratio", [0.2, 1 - 1e-9, 1 + 1e-13, 7.0])
def test_graded_backwards_is_graded_by_the_reciprocal(ratio: float) -> None:
    np.testing.assert_allclose(graded(6, 1 / ratio), 1 - graded(6, ratio)[::-1], atol=1e-15)


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize("grading", [(1.0, 1.0), (5.0, 0.3)])
def test_doubled_divisions_keep_every_corner(kind: str, grading: tuple[float, float]) -> None:
    """Exactly: the same floating-point numbers, of curved and graded patches."""
    coarse = mesh(sector("a", 0, 70, (3, 4), grading=grading), kind=kind)
    fine = mesh(sector("a", 0, 70, (6, 8), grading=grading), kind=kind)
    corners = coarse.nodes[np.unique(coarse.blocks[0].connectivity[:, : get(kind).corners])]
    distance = np.abs(corners[:, None] - fine.nodes[None]).sum(axis=2).min(axis=1)
    assert distance.max() <= 2**-51


@pytest.mark.parametrize("kind", ["T3", "Q4", "T6", "Q8"])
def test_elements_of_the_finer_mesh_lie_each_in_one_of_the_coarser(kind: str) -> None:
    """Nested spaces: on a parallelogram every coarse element is a union of fine ones, so that
    the fine centres fall four (triangles and quadrilaterals alike) to each coarse element."""
    corners = ((0, 0), (4, 1), (5, 4), (1, 3))
    coarse, fine = (
        mesh(Patch("a", corners, (2 * k, 3 * k), (3.0, 0.5)), kind=kind) for k in (1, 2)
    )
    element = get(kind)
    centres = fine.coords(0)[:, : element.corners].mean(axis=1)
    holds = []
    for coords in coarse.coords(0):
        repeated = np.broadcast_to(coords, (len(centres), *coords.shape))
        natural, converged = element.natural_coordinates(repeated, centres)
        holds.append(element.inside(natural) & converged)
    assert (np.array(holds).sum(axis=1) == 4).all()
    assert (np.array(holds).sum(axis=0) == 1).all()


@pytest.mark.parametrize("kind", ELEMENTS)
def test_a_mirrored_patch_gives_the_mirrored_mesh(kind: str) -> None:
    """Mirrored in the x axis and listed counter-clockwise again: first corner last."""
    patch = sector("a", 20, 80, (3, 4), grading=(2.0, 3.0))
    mirrored = replace(
        patch,
        corners=tuple((x, -y) for x, y in np.array(patch.corners)[[3, 2, 1, 0]]),
        through=(None, polar(2, -40), None, polar(1, -40)),
        grading=(2.0, 1 / 3.0),
    )
    one, other = mesh(patch, kind=kind), mesh(mirrored, kind=kind)
    # Sorted by angle and radius, rounded so that rounding does not decide the order.
    np.testing.assert_allclose(_sorted(one.nodes), _sorted(other.nodes * [1, -1]), atol=1e-13)


def _sorted(points: np.ndarray) -> np.ndarray:
    rounded = np.round(points, 9)
    return points[np.lexsort((rounded[:, 1], rounded[:, 0]))]


# --- several patches -------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ELEMENTS)
def test_four_sectors_close_to_a_ring(kind: str) -> None:
    """Euler: corners - edges + elements = 0; bore and rim have 4 x 4 facets."""
    plate = mesh(*(sector(str(a), a, a + 90) for a in (0, 90, 180, 270)), kind=kind)
    corners = np.unique(plate.blocks[0].connectivity[:, : get(kind).corners])
    assert len(corners) - len(plate.edges.counts) + plate.element_count == 0
    assert len(plate.sides["bore"]) == len(plate.sides["rim"]) == 16
    assert len(plate.boundary) == 32
    assert plate.component_count == 1


def test_sides_of_one_name_are_one_chain() -> None:
    """Two quarters: the length of the rim is pi times 2, in rising order of the angle."""
    plate = mesh(sector("b", 90, 180), sector("a", 0, 90))
    start, end = plate.chain(plate.sides["rim"])
    x, y = plate.nodes[plate.facet_ends(plate.sides["rim"])[:, 0]].T
    np.testing.assert_allclose(start, np.arctan2(y, x) / np.pi, atol=1e-5)
    assert end.max() == pytest.approx(1.0)


def test_patches_that_share_a_side_by_opposite_gradings_match() -> None:
    """The common side runs upwards in one and downwards in the other."""
    low = rectangle("a", (0, 0), (1, 1), (2, 4), grading=(1.0, 3.0))
    turned = Patch("b", ((2, 1), (1, 1), (1, 0), (2, 0)), (2, 4), (1.0, 1 / 3.0))
    plate = mesh(low, turned)
    assert plate.component_count == 1
    assert area(plate) == pytest.approx(2.0, rel=1e-14)


def test_a_side_named_on_both_sides_counts_once() -> None:
    left = rectangle("a", (0, 0), (1, 1), (2, 3), sides=(None, "joint", None, None))
    right = rectangle("b", (1, 0), (2, 1), (2, 3), sides=(None, None, None, "joint"))
    plate = mesh(left, right)
    assert len(plate.sides["joint"]) == 3
    assert plate.facet_lengths(plate.sides["joint"]).sum() == pytest.approx(1.0)


def test_an_inner_side_belongs_to_the_patch_that_names_it() -> None:
    left = rectangle("a", (0, 0), (1, 1), (2, 3))
    right = rectangle("b", (1, 0), (2, 1), (2, 3), sides=(None, None, None, "joint"), region="boss")
    plate = mesh(left, right, regions=(Region("boss", thickness=2.0),))
    names = [plate.regions[r] for r in plate.facet_regions(plate.sides["joint"])]
    assert names == ["boss"] * 3


def test_regions_that_occur_are_numbered_plate_first() -> None:
    parts = [
        rectangle(str(k), (k, 0), (k + 1, 1), (1, 1), region=region)
        for k, region in enumerate(("web", None, "boss", "web"))
    ]
    regions = (Region("boss", thickness=1.0), Region("web", thickness=2.0))
    plate = mesh(*parts, regions=regions)
    assert plate.regions == ("plate", "boss", "web")
    assert plate.blocks[0].region.tolist() == [2, 0, 1, 2]


def test_a_plate_of_regions_only_has_no_plate_region() -> None:
    patch = rectangle("a", (0, 0), (1, 1), (1, 1), region="web")
    assert mesh(patch, regions=(Region("web", thickness=1.0),)).regions == ("web",)


def test_named_points_are_nodes() -> None:
    plate = mesh(rectangle("a", (0, 0), (2, 1), (2, 2)), points={"A": (1.0, 1.0), "B": (0.5, 0)})
    assert plate.nodes[plate.points["A"]].tolist() == [1.0, 1.0]
    assert plate.nodes[plate.points["B"]].tolist() == [0.5, 0.0]


def test_patches_that_touch_at_a_corner_only_share_that_node() -> None:
    plate = mesh(rectangle("a", (0, 0), (1, 1), (1, 1)), rectangle("b", (1, 1), (2, 2), (1, 1)))
    assert plate.node_count == 2 * 8 - 1


def test_patches_apart_are_two_parts() -> None:
    plate = mesh(rectangle("a", (0, 0), (1, 1), (1, 1)), rectangle("b", (3, 1), (4, 2), (1, 1)))
    assert plate.component_count == 2


# --- faults ----------------------------------------------------------------------------------

UNIT = rectangle("a", (0, 0), (1, 1), (2, 2))
A, B, C = (f"/geometry/patches/{name}" for name in "abc")


def beside(**more: Any) -> Patch:
    """A unit square on the right of the first one."""
    return replace(rectangle("b", (1, 0), (2, 1), (2, 2)), **more)


def four(name: str, *corners: Vector) -> Patch:
    return replace(UNIT, name=name, pointer=f"/geometry/patches/{name}", corners=corners)


LENS = replace(
    rectangle("a", (0, 0), (1, 0.6), (4, 4)), through=((0.5, 0.35), None, (0.5, 0.25), None)
)
FAULTY = {
    "clockwise": (
        [four("a", (0, 0), (0, 1), (1, 1), (1, 0))],
        f"{A}/corners",
        ["clockwise", "area -1", "(0, 0), (0, 1), (1, 1), (1, 0)"],
    ),
    "two corners in one place": (
        [four("a", (0, 0), (1, 0), (1, 0), (0, 1))],
        f"{A}/corners",
        ["four different corners", "(1, 0), (1, 0)"],
    ),
    "re-entrant corner": (
        [four("a", (0, 0), (4, 0), (1, 1), (0, 4))],
        f"{A}/corners/2",
        ["corner 3 of patch 'a', (1, 1), has an angle of 233.13 degrees"],
    ),
    "corners crosswise": (
        [four("a", (0, 0), (2, 0), (0, 1), (0.5, 1))],
        f"{A}/corners/2",
        ["corner 3 of patch 'a', (0, 1)", "180 degrees"],
    ),
    "through on the chord": (
        [replace(UNIT, through=(None, (1.0, 0.5), None, None))],
        f"{A}/through/1",
        ["(1, 0.5) lies in line", "side 2-3", "null"],
    ),
    "arc across the patch": (
        [replace(UNIT, through=((0.5, 1.5), None, None, None))],
        f"{A}/corners",
        ["clockwise"],
    ),
    "arc that folds the patch": (
        [LENS],
        A,
        ["patch 'a' is folded"],
    ),
    "divisions differ": (
        [UNIT, beside(divisions=(2, 3))],
        f"{B}/sides/3",
        ["side 2-3 of patch 'a' and side 4-1 of patch 'b'", "2 and 3 divisions"],
    ),
    "gradings differ": (
        [UNIT, beside(grading=(1.0, 2.0))],
        f"{B}/sides/3",
        ["gradings differ: 1 and, in the same direction, 2"],
    ),
    "only one has the arc": (
        [UNIT, beside(through=(None, None, None, (1.1, 0.5)))],
        f"{B}/sides/3",
        ["different curves", "(1, 0.5) and (1.1, 0.5)", "`through`"],
    ),
    "doubled": (
        [UNIT, replace(UNIT, name="b", pointer=B)],
        f"{B}/sides/0",
        ["on top of each other"],
    ),
    "three at one side": (
        [UNIT, beside(), four("c", (1, 0), (3, 0), (3, 1), (1, 1))],
        f"{C}/sides/3",
        ["more than two patches", "patch 'a'", "patch 'c'"],
    ),
    "corner on a side": (
        [rectangle("a", (0, 0), (1, 2), (2, 2)), rectangle("b", (1, 0), (2, 1), (2, 2))],
        f"{B}/corners/3",
        ["corner 4 of patch 'b', (1, 1)", "side 2-3 of patch 'a'", "split"],
    ),
    "corner on an arc": (
        [sector("a", 0, 90), four("b", (1.6, 1.2), (4, 1), (4, 2), (3, 3))],
        f"{B}/corners/0",
        ["corner 1 of patch 'b', (1.6, 1.2)", "side 2-3 of patch 'a'"],
    ),
    "overlapping": (
        [UNIT, rectangle("b", (0.5, 0.25), (1.5, 0.75), (2, 2))],
        B,
        ["patch 'b' touches or covers another", "crosses", "at (1, 0.25)"],
    ),
    "one inside another": (
        [rectangle("a", (0, 0), (9, 9), (2, 2)), rectangle("b", (4, 4), (5, 5), (1, 1))],
        B,
        ["covers another", "lies inside another element"],
    ),
    "one inside another, with a common corner": (
        [rectangle("a", (0, 0), (9, 9), (2, 2)), four("b", (0, 0), (2, 1), (2, 2), (1, 2))],
        B,
        ["covers another"],
    ),
}  # fmt: skip


def faults_of(*patches: Patch, kind: str = "Q8", **more: Any) -> list[Fault]:
    with pytest.raises(MeshError) as caught:
        mesh(*patches, kind=kind, **more)
    return list(caught.value.faults)


@pytest.mark.parametrize("case", FAULTY)
@pytest.mark.parametrize("kind", ["T3", "Q8"])
def test_faulty_patches_are_refused_in_plain_words(case: str, kind: str) -> None:
    patches, pointer, words = FAULTY[case]
    found = {fault.pointer: fault.message for fault in faults_of(*patches, kind=kind)}
    assert pointer in found
    for word in words:
        assert word in found[pointer]


def test_a_point_off_the_nodes_is_refused_with_the_nearest() -> None:
    (fault,) = faults_of(UNIT, points={"tip": (0.3, 0.0)})
    assert fault.pointer == "/geometry/points/tip"
    assert "nearest node is at (0.25, 0), 0.05 away" in fault.message


def test_an_unused_and_an_undeclared_region_are_both_refused() -> None:
    patch = replace(UNIT, region="web")
    regions = (Region("boss", thickness=1.0, pointer="/geometry/regions/0"),)
    found = [fault.message for fault in faults_of(patch, regions=regions)]
    assert any("nothing belongs to region 'boss'" in message for message in found)
    assert any("'web' is used but not declared" in message for message in found)


def test_all_faulty_patches_are_reported_together() -> None:
    clockwise = ((0, 0), (0, 1), (1, 1), (1, 0))
    found = faults_of(replace(UNIT, corners=clockwise), beside(corners=clockwise))
    assert [fault.pointer for fault in found] == [f"{A}/corners", f"{B}/corners"]

"""The steps of free meshing one by one: split, pair, smooth, audit, gaps, cuts."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from scipy.spatial.distance import cdist

from elements.registry import get
from tests.gallery import GALLERY, drawn, hole, polar, rectangle
from workers.analysis.meshing.audit import flaws
from workers.analysis.meshing.curve_table import CurveTable
from workers.analysis.meshing.curves import Arc, Curve, Line, arc_through
from workers.analysis.meshing.cutting import LONGEST, cut_edges
from workers.analysis.meshing.drawing import OUTSIDE, Drawing, Edge
from workers.analysis.meshing.flat_mesh import (
    FlatMesh,
    split_into_quadrilaterals,
    split_into_triangles,
)
from workers.analysis.meshing.frame import Frame
from workers.analysis.meshing.gaps import gap_points
from workers.analysis.meshing.judge import judge
from workers.analysis.meshing.outline import draw
from workers.analysis.meshing.pairing import pair_triangles, split_poor, split_wide
from workers.analysis.meshing.proximity import close_pairs, closest
from workers.analysis.meshing.sizing import choose_sizes
from workers.analysis.meshing.smooth import qualities, smooth

Array = np.ndarray


def square(count: int, bulge: float = 0.0) -> tuple[FlatMesh, Drawing]:
    """The unit square as 2 count^2 right-angled triangles; its right side may be an arc."""
    x, y = np.meshgrid(np.linspace(0, 1, count + 1), np.linspace(0, 1, count + 1))
    nodes = np.column_stack((x.ravel(), y.ravel()))
    number = np.arange((count + 1) ** 2).reshape(count + 1, count + 1)
    a, b = number[:-1, :-1].ravel(), number[:-1, 1:].ravel()
    c, d = number[1:, 1:].ravel(), number[1:, :-1].ravel()
    triangles = np.concatenate((np.stack((a, b, c), 1), np.stack((a, c, d), 1)))
    corners = [np.array(p, float) for p in ((0, 0), (1, 0), (1, 1), (0, 1), (0, 0))]
    curves: list[Curve] = [Line(p, q) for p, q in pairwise(corners)]
    if bulge:
        arc = arc_through(corners[1], np.array([1 + bulge, 0.5]), corners[2])
        curves[1] = arc
        nodes[number[:, -1]] = arc.at(np.linspace(0, 1, count + 1))
    sides = (number[0], number[:, -1], number[-1, ::-1], number[::-1, 0])
    segments = np.concatenate([np.stack((s[:-1], s[1:]), 1) for s in sides])
    mesh = FlatMesh(
        nodes,
        triangles.astype(np.int32),
        np.empty((0, 4), np.int32),
        np.ones(len(triangles), np.int32),
        np.empty(0, np.int32),
        segments.astype(np.int32),
        np.repeat(np.arange(4), count).astype(np.int32),
    )
    edges = tuple(Edge(curve, None, 1, OUTSIDE) for curve in curves)
    return mesh, Drawing(edges, ("plate",))


def area(mesh: FlatMesh) -> float:
    total = 0.0
    for cells in mesh.cells:
        x, y = np.moveaxis(mesh.nodes[cells], 2, 0)
        total += (x * np.roll(y, -1, axis=1) - np.roll(x, -1, axis=1) * y).sum() / 2
    return float(total)


def shaken(mesh: FlatMesh, by: float, seed: int = 0) -> FlatMesh:
    """Inner nodes moved at random."""
    nodes = mesh.nodes + np.random.default_rng(seed).uniform(-by, by, mesh.nodes.shape)
    nodes[mesh.segments] = mesh.nodes[mesh.segments]
    return replace(mesh, nodes=nodes)


# --- split and pair -------------------------------------------------------------------------------


def test_triangles_split_into_four_similar_ones() -> None:
    mesh, drawing = square(3)
    split = split_into_triangles(mesh, drawing)
    assert len(split.triangles) == 4 * 18
    assert len(split.nodes) == 49  # the lattice of twice as many intervals
    assert area(split) == pytest.approx(1, rel=1e-14)
    np.testing.assert_allclose(qualities(split)[0], qualities(mesh)[0][0])
    assert flaws(split, drawing) == []


def test_triangles_split_into_three_quadrilaterals_and_quadrilaterals_into_four() -> None:
    mesh, drawing = square(3)
    mixed = pair_triangles(mesh)
    mixed = replace(
        mixed,  # one quadrilateral back into its triangles
        triangles=mixed.quadrilaterals[0][[[0, 1, 2], [0, 2, 3]]],
        triangle_domain=np.ones(2, np.int32),
        quadrilaterals=mixed.quadrilaterals[1:],
        quadrilateral_domain=mixed.quadrilateral_domain[1:],
    )
    split = split_into_quadrilaterals(mixed, drawing)
    assert len(split.quadrilaterals) == 2 * 3 + 8 * 4
    assert not len(split.triangles)
    assert area(split) == pytest.approx(1, rel=1e-14)
    assert flaws(split, drawing) == []


def test_new_nodes_on_an_arc_lie_on_it() -> None:
    mesh, drawing = square(4, bulge=0.2)
    split = split_into_triangles(mesh, drawing)
    on_arc = np.unique(split.segments[split.segment_edge == 1])
    assert len(on_arc) == 9
    assert drawing.table.distance(np.ones(9, int), split.nodes[on_arc]).max() < 1e-15


def test_right_angled_triangles_pair_into_squares() -> None:
    """The diagonal gives the best quadrilateral, so all triangles find their partner."""
    mesh, drawing = square(5)
    paired = pair_triangles(mesh)
    assert (len(paired.triangles), len(paired.quadrilaterals)) == (0, 25)
    np.testing.assert_allclose(qualities(paired)[1], 1)
    assert flaws(paired, drawing) == []


def test_pairing_leaves_every_triangle_in_exactly_one_cell() -> None:
    """On a random mesh: no area lost, no cell overlaps another, nothing inverted."""
    mesh, drawing = square(9)
    mesh = shaken(mesh, 0.03)
    paired = pair_triangles(mesh)
    assert 2 * len(paired.quadrilaterals) + len(paired.triangles) == 162
    assert len(paired.quadrilaterals) > 60
    assert flaws(paired, drawing) == []
    assert qualities(paired)[1].min() > 0.3


def test_pairs_do_not_cross_the_border_of_a_region() -> None:
    mesh, _ = square(4)
    left = mesh.nodes[mesh.triangles].mean(axis=1)[:, 0] < 0.5
    middle = np.flatnonzero(mesh.nodes[:, 0] == 0.5).astype(np.int32)
    parts = replace(
        mesh,
        triangle_domain=np.where(left, 1, 2).astype(np.int32),
        segments=np.concatenate((mesh.segments, np.stack((middle[:-1], middle[1:]), 1))),
        segment_edge=np.concatenate((mesh.segment_edge, np.full(4, 4, np.int32))),
    )
    paired = pair_triangles(parts)
    sides = paired.nodes[paired.quadrilaterals][:, :, 0]
    assert ((sides <= 0.5).all(axis=1) | (sides >= 0.5).all(axis=1)).all()


def test_wide_corner_on_the_border_is_split_and_one_inside_is_not() -> None:
    """A quadrilateral with two sides on a nearly straight border gains nothing by being split."""
    nodes = np.array([[0, 0], [1, -0.1], [2, 0], [1, 1]], float)
    cells = np.array([[0, 1, 2, 3]], np.int32)
    none = np.empty((0, 3), np.int32)
    one = np.ones(1, np.int32)
    segments = np.array([[0, 1], [1, 2]], np.int32)
    mesh = FlatMesh(nodes, none, cells, one[:0], one, segments, np.zeros(2, np.int32))
    split = split_wide(mesh)
    assert {frozenset(t) for t in split.triangles.tolist()} == {
        frozenset({1, 2, 3}),
        frozenset({0, 1, 3}),
    }
    inside = replace(mesh, segments=segments[:0], segment_edge=one[:0])
    assert len(split_wide(inside).triangles) == 0


def test_poor_quadrilateral_becomes_two_better_triangles() -> None:
    """A dart: its reflex corner makes the scaled Jacobian negative."""
    nodes = np.array([[0, 0], [1, 0.4], [2, 0], [1, 1.8]], float)  # corner 1 is reflex
    mesh = FlatMesh(
        nodes, np.empty((0, 3), np.int32), np.array([[0, 1, 2, 3]], np.int32),
        np.empty(0, np.int32), np.ones(1, np.int32), np.empty((0, 2), np.int32),
        np.empty(0, np.int32),
    )  # fmt: skip
    split = split_poor(mesh)
    assert (len(split.triangles), len(split.quadrilaterals)) == (2, 0)
    assert qualities(split)[0].min() > qualities(mesh)[1].min()
    assert area(split) == pytest.approx(area(mesh))


# --- smoothing ------------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize("quads", [False, True])
def test_smoothing_never_makes_the_worst_element_worse(seed: int, quads: bool) -> None:
    mesh, drawing = square(8)
    mesh = shaken(pair_triangles(mesh) if quads else mesh, 0.05, seed)
    smoothed = smooth(mesh)
    kind = 1 if quads else 0
    assert qualities(smoothed)[kind].min() >= qualities(mesh)[kind].min()
    assert qualities(smoothed)[kind].mean() > qualities(mesh)[kind].mean()
    np.testing.assert_array_equal(smoothed.nodes[mesh.segments], mesh.nodes[mesh.segments])
    assert flaws(smoothed, drawing) == []


def test_smoothing_brings_a_shaken_grid_back_to_squares() -> None:
    """Every inner node belongs in the middle of its neighbours, or near enough for a good shape."""
    mesh, _ = square(6)
    grid = pair_triangles(mesh)
    rough = shaken(grid, 0.05)
    smoothed = smooth(rough)
    assert qualities(rough)[1].min() < 0.9
    assert qualities(smoothed)[1].min() > 0.95
    away = [np.linalg.norm(m.nodes - grid.nodes, axis=1).sum() for m in (rough, smoothed)]
    assert away[1] < 0.5 * away[0]


def test_smoothing_untangles_nothing_it_cannot_see_but_mends_what_it_can() -> None:
    """A node pushed through its neighbour's element comes back."""
    mesh, drawing = square(4)
    nodes = mesh.nodes.copy()
    nodes[12] = [0.8, 0.5]  # from (0.5, 0.5), past (0.75, 0.5)
    folded = replace(mesh, nodes=nodes)
    assert flaws(folded, drawing)
    assert flaws(smooth(folded), drawing) == []


def test_good_mesh_is_left_alone() -> None:
    mesh, _ = square(4)
    grid = pair_triangles(mesh)
    np.testing.assert_array_equal(smooth(grid).nodes, grid.nodes)


# --- audit ----------------------------------------------------------------------------------------


def test_whole_mesh_has_no_flaw() -> None:
    mesh, drawing = square(3)
    assert flaws(mesh, drawing) == []


def test_every_kind_of_damage_is_found() -> None:
    mesh, drawing = square(3)
    cut = {"triangles": mesh.triangles[1:], "triangle_domain": mesh.triangle_domain[1:]}
    doubled = {
        "triangles": np.concatenate((mesh.triangles, mesh.triangles[:1])),
        "triangle_domain": np.concatenate((mesh.triangle_domain, mesh.triangle_domain[:1])),
    }
    turned = mesh.triangles.copy()
    turned[4] = turned[4, ::-1]
    lone = np.concatenate((mesh.nodes, [[0.5, 0.5]]))
    torn_nodes = np.concatenate((mesh.nodes, mesh.nodes[5:6]))
    torn = mesh.triangles.copy()
    torn[np.flatnonzero((torn == 5).any(axis=1))[0]][torn[0] == 5] = 16
    row = np.flatnonzero((torn == 5).any(axis=1))[0]
    torn[row] = np.where(torn[row] == 5, 16, torn[row])
    found = {
        "missing element": flaws(replace(mesh, **cut), drawing),
        "element twice": flaws(replace(mesh, **doubled), drawing),
        "clockwise element": flaws(replace(mesh, triangles=turned), drawing),
        "lone node": flaws(replace(mesh, nodes=lone), drawing),
        "crack": flaws(replace(mesh, nodes=torn_nodes, triangles=torn), drawing),
    }
    assert all(found.values())
    assert found["clockwise element"][0] == "1 elements are inverted"
    assert found["lone node"] == ["1 nodes belong to no element"]
    assert found["element twice"][0] == "elements overlap"
    assert "there is a gap between elements" in found["crack"]


def test_element_in_the_wrong_region_is_found() -> None:
    mesh, drawing = square(2)
    domain = mesh.triangle_domain.copy()
    domain[0] = 2
    two = replace(drawing, regions=("plate", "other"))
    assert flaws(replace(mesh, triangle_domain=domain), two)


# --- judge ----------------------------------------------------------------------------------------


def test_curved_side_is_judged_as_it_will_be() -> None:
    """An arc that turns by more than the corner beside it has folds the element over."""
    mesh, drawing = square(1, bulge=0.05)
    assert judge(mesh, drawing, get("T6")).is_sound
    mesh, drawing = square(1, bulge=-0.45)  # inwards by 84 degrees at its ends, against 45
    assert judge(mesh, drawing, get("T3")).is_sound
    assert not judge(mesh, drawing, get("T6")).is_sound


def test_poor_elements_are_told_with_place_and_size() -> None:
    mesh, drawing = square(4)
    nodes = mesh.nodes.copy()
    nodes[12] += [0.22, 0.0]  # almost onto its neighbour
    verdict = judge(replace(mesh, nodes=nodes), drawing, get("T3"))
    assert 0 < verdict.worst < 1
    assert len(verdict.poor)
    assert (np.abs(verdict.poor[:, :2] - 0.6) < 0.3).all()
    assert (verdict.poor[:, 2] < 0.5).all()


def test_slender_quadrilaterals_are_poor_and_told_with_their_place() -> None:
    """The lowest of four rows of squares is squeezed to a fifth of its height."""
    mesh, drawing = square(4)
    squares = pair_triangles(mesh)
    assert not len(judge(squares, drawing, get("Q4")).poor)
    nodes = squares.nodes.copy()
    nodes[5:10, 1] = 0.05  # the first row of nodes above the bottom, from 0.25
    verdict = judge(replace(squares, nodes=nodes), drawing, get("Q4"))
    assert 0 < verdict.worst < 1  # elements of 0.25 x 0.05: five to one
    assert len(verdict.poor) == 4
    np.testing.assert_allclose(verdict.poor[:, 1], 0.025)


# --- gaps and cuts --------------------------------------------------------------------------------


def local(geometry: dict) -> Drawing:
    drawing = draw(drawn(geometry))
    return Frame.around(drawing).inward(drawing)


def test_gap_asks_for_its_width_over_the_number_of_elements() -> None:
    """200 x 100 with a hole at 1 from the edge: 1 / 2 over the diagonal of 223.6."""
    drawing = local({"outline": rectangle(0, 0, 200, 100), "holes": [hole("pin", 100, 21, 20)]})
    points = gap_points(drawing, 0.03, per_gap=2)
    assert points[:, 2].min() == pytest.approx(0.5 / 223.607, rel=0.02)
    finest = points[np.argmin(points[:, 2]), :2] * 223.607
    assert finest[0] == pytest.approx(0, abs=1)  # under the hole, from the plate's middle
    # Away from the gap the size grows; nothing asks for less than the general size in vain.
    assert (points[:, 2] < 0.03).all()


def test_gap_through_nothing_asks_for_no_elements() -> None:
    """Between the sides of a straight slot there is nothing to mesh."""
    slot = [{"name": "slot", "outline": rectangle(50, 49.9, 100, 0.2)}]
    drawing = local({"outline": rectangle(0, 0, 200, 100), "holes": slot})
    assert not len(gap_points(drawing, 0.03, per_gap=2))


def test_bent_void_is_meshed_finely_enough_that_its_chords_do_not_cross() -> None:
    """A curved slot of width w between two arcs: twice the size has a rise below w / 4."""
    width, radius = 0.5, 160.0
    low, high = (
        {"at": polar(0, 0, r, 20), "through": polar(0, 0, r, 45)} for r in (radius, radius + width)
    )
    slot = [low, {"at": polar(0, 0, radius, 70)},
            {"at": polar(0, 0, radius + width, 70), "through": high["through"]},
            {"at": high["at"]}]  # fmt: skip
    drawing = local({"outline": rectangle(0, 0, 200, 200), "holes": [
        {"name": "slot", "outline": slot}]})  # fmt: skip
    scale = 200 * 2**0.5
    points = gap_points(drawing, 0.2, per_gap=2) * scale
    at_slot = np.array([drawing.table.distance(np.full(len(points), k), points[:, :2] / scale)
                        for k, edge in enumerate(drawing.edges)
                        if isinstance(edge.curve, Arc)]).min(axis=0) < 1e-6  # fmt: skip
    assert at_slot.sum() > 20
    rise = (2 * points[at_slot, 2]) ** 2 / (8 * radius)
    assert rise.max() < width / 4 * 1.01


def test_long_edge_is_cut_where_something_fine_is_near() -> None:
    """No piece is longer than so many of the sizes in it, and the pieces make up the edge."""
    geometry = {"outline": rectangle(0, 0, 200, 100), "holes": [hole("pin", 77, 20.01, 20)]}
    drawing = draw(drawn(geometry))
    frame = Frame.around(drawing)
    inner = frame.inward(drawing)
    sizes = choose_sizes(inner, 2, None, {})
    points = gap_points(inner, sizes.general, 2)
    one, other, cut = cut_edges(inner, drawing, sizes._replace(points=points))
    assert len(one.edges) == len(other.edges) == len(cut.edges) > len(drawing.edges)
    for a, b in zip(one.edges, other.edges, strict=True):  # the same in both coordinates
        for p, q in ((a.start, b.start), (a.end, b.end)):
            np.testing.assert_allclose(frame.outward(np.array([p]))[0], q, atol=1e-6)
    bottom = [e for e in other.edges if e.start[1] == e.end[1] == 0]
    assert sorted(x for e in bottom for x in (e.start[0], e.end[0]))[::2][0] == 0
    assert sum(e.curve.length for e in bottom) == pytest.approx(200, rel=1e-12)
    for edge in one.edges:
        near = np.linalg.norm(points[:, :2] - edge.curve.at(np.array([0.5]))[0], axis=1)
        inside = points[near < edge.curve.length / 2, 2]
        if len(inside):
            assert edge.curve.length < 2 * LONGEST * inside.min()


def test_edges_stay_whole_where_nothing_is_fine() -> None:
    drawing = draw(drawn(GALLERY["ring"]))
    inner = Frame.around(drawing).inward(drawing)
    one, other, _ = cut_edges(inner, drawing, choose_sizes(inner, 2, None, {}))
    assert one is inner
    assert other is drawing


# --- distances ------------------------------------------------------------------------------------


def test_closest_places_of_random_curves_are_those_of_a_fine_sampling() -> None:
    """Lines and arcs in all combinations, against 400 places on each."""
    random = np.random.default_rng(5)
    curves: list[Curve] = [Line(*random.uniform(0, 1, (2, 2))) for _ in range(8)]
    while len(curves) < 20:
        a, b, c = random.uniform(0, 1, (3, 2))
        if abs((b - a)[0] * (c - a)[1] - (b - a)[1] * (c - a)[0]) > 0.05:
            curves.append(arc_through(a, b, c))
    table = CurveTable.of(curves)
    i, j = np.triu_indices(len(curves), 1)
    found = closest(table, i, j, np.full((len(i), 2, 2), np.nan), 0.0)
    t = np.linspace(0, 1, 401)
    samples = np.stack([curve.at(t) for curve in curves])
    step = np.linalg.norm(np.diff(samples, axis=1), axis=2).max(axis=1)
    for pair, (one, other) in enumerate(zip(i, j, strict=True)):
        nearest = float(cdist(samples[one], samples[other]).min())
        assert found.distance[pair] <= nearest + 1e-12
        assert found.distance[pair] >= nearest - (step[one] + step[other]) / 2
        for place, curve in ((found.first[pair], one), (found.second[pair], other)):
            assert table.distance(np.array([curve]), place[None])[0] < 1e-12
    near = set(zip(*close_pairs(table, 0.05), strict=True))
    assert near >= {(a, b) for a, b, d in zip(i, j, found.distance, strict=True) if d < 0.05}

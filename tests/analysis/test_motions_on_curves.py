"""True normals of curved sides, and the rotations that rollers on them leave free."""

import numpy as np
import pytest

from tests.plates import ELEMENTS, annulus, grid, plate_job, ring
from workers.analysis.held import held_by
from workers.analysis.mesh import Mesh
from workers.analysis.motions import free_motions
from workers.analysis.selection import Finder
from workers.analysis.solution import solve
from workers.analysis.true_normals import node_normals
from workers.job import Named, Pressure, Spring, Support


def arch(kind: str, *, graded: bool = False) -> Mesh:
    """A third of a ring about (5, 1), radii 2 and 3; "bottom" is its outer rim."""

    def shape(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        if graded:
            x = (np.exp(2 * x) - 1) / (np.exp(2) - 1)
        return tuple(c + d for c, d in zip(annulus(2.0, 3.0)(x / 3, y), (5.0, 1.0), strict=True))

    return grid(kind, 6, 2, shape=shape)


def _held(support: Support, mesh: Mesh) -> tuple[np.ndarray, np.ndarray]:
    return held_by(plate_job([support]), Finder(mesh)).directions()


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize("graded", [False, True])
@pytest.mark.parametrize(("side", "sign"), [("bottom", 1), ("top", -1)])
def test_normals_of_an_arc_are_its_radii(kind: str, graded: bool, side: str, sign: int) -> None:
    """Outwards on the rim, towards the centre in the bore; at the ends of the arc as well."""
    mesh = arch(kind, graded=graded)
    nodes, normals = node_normals(mesh, mesh.sides[side])
    radial = mesh.nodes[nodes] - [5.0, 1.0]
    radial /= np.linalg.norm(radial, axis=1, keepdims=True)
    np.testing.assert_allclose(normals, sign * radial, atol=1e-12)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_normals_of_a_straight_side_are_square_to_it(kind: str) -> None:
    mesh = grid(kind, 3, 2, shape=lambda x, y: (x - y, x + y))
    _, normals = node_normals(mesh, mesh.sides["right"])
    np.testing.assert_allclose(normals, np.sqrt([[0.5, 0.5]] * len(normals)), atol=1e-12)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_a_corner_has_the_normals_of_both_legs_and_its_neighbours_keep_theirs(kind: str) -> None:
    mesh = grid(kind, 3, 3)
    facets = np.concatenate((mesh.sides["bottom"], mesh.sides["right"]))
    nodes, normals = node_normals(mesh, facets)
    x, y = mesh.nodes[nodes].T
    corner = nodes == mesh.points["SE"]
    np.testing.assert_allclose(np.sort(normals[corner], axis=0), [[0, -1], [1, 0]], atol=1e-12)
    expected = np.column_stack(((x == 1).astype(float), -(y == 0).astype(float)))
    np.testing.assert_allclose(normals[~corner], expected[~corner], atol=1e-12)
    assert len(nodes) == len(mesh.facet_nodes(facets)) + 1


@pytest.mark.parametrize("kind", ELEMENTS)
def test_a_wide_bend_has_one_normal(kind: str) -> None:
    """A polygon of angles beyond 138 degrees stands for a curve: here 150, halved but for the
    lengths of the legs, which differ by a seventh."""
    mesh = grid(kind, 4, 2, shape=lambda x, y: (x, y + np.maximum(x - 0.5, 0) / np.sqrt(3)))
    nodes, normals = node_normals(mesh, mesh.sides["bottom"])
    assert len(set(nodes.tolist())) == len(nodes)
    (bend,) = normals[mesh.nodes[nodes, 0] == 0.5]
    assert np.degrees(np.arctan2(bend[0], -bend[1])) == pytest.approx(15, abs=2)


@pytest.mark.parametrize("turned", [0.0, 0.1, 1.0, 2.0])
@pytest.mark.parametrize(("chords", "rows"), [(6, 12), (8, 16), (9, 9), (12, 12), (48, 48)])
def test_an_octagon_has_corners_and_a_circle_of_nine_chords_has_none(
    chords: int, rows: int, turned: float
) -> None:
    mesh = ring("Q4", chords, 1, 1.0, 2.0)
    c, s = np.cos(turned), np.sin(turned)
    mesh = Mesh(mesh.nodes @ [[c, s], [-s, c]], mesh.blocks, mesh.regions, mesh.sides)
    assert len(node_normals(mesh, mesh.sides["bore"])[0]) == rows


def test_one_chord_alone_has_its_own_normal() -> None:
    mesh = grid("Q4", 1, 1)
    _, normals = node_normals(mesh, mesh.sides["bottom"])
    np.testing.assert_allclose(normals, [[0, -1], [0, -1]])


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize("graded", [False, True])
@pytest.mark.parametrize(
    "support",
    [
        Support("s", Named("bottom"), normal=0.0),
        Support("s", Named("bottom"), spring=Spring(normal=7.0)),
        Support("s", Named("top"), normal=0.0),
    ],
)
def test_a_roller_on_an_arc_lets_it_turn_about_its_centre(
    kind: str, graded: bool, support: Support
) -> None:
    mesh = arch(kind, graded=graded)
    assert free_motions(mesh, *_held(support, mesh)) == ["the plate can rotate about (5, 1)"]


@pytest.mark.parametrize(
    ("kind", "tolerance"), [("T3", 0.08), ("Q4", 0.08), ("T6", 2e-3), ("Q8", 2e-3)]
)
@pytest.mark.parametrize("graded", [False, True])
def test_a_roller_on_an_arc_does_not_lock_the_rotation(
    kind: str, tolerance: float, graded: bool
) -> None:
    """Statics: a moment M about the centre turns the arch by M / (k R^2 s R), where tangential
    springs k of little stiffness hold its bore R over the angle s.

    The pressure 1 on one end, 1 by 2 thick, has M = 2 x 2.5. Chords of T3 and Q4 make the bore
    shorter, at the coarse end of the graded arch by 3 % in length and 4 % in R^2.
    """
    mesh = arch(kind, graded=graded)
    job = plate_job(
        [
            Support("rim", Named("bottom"), normal=0.0),
            Support("springs", Named("top"), spring=Spring(tangential=1.0)),
        ],
        [Pressure(on=Named("right"), start=1.0, end=1.0)],
    )
    u = solve(job, mesh).displacement[:, :, 0]
    x, y = (mesh.nodes - [5.0, 1.0]).T
    rotation = (x * u[:, 1] - y * u[:, 0]).sum() / (x**2 + y**2).sum()
    assert rotation == pytest.approx(-5.0 / (2.0**3 * 2 * np.pi / 3), rel=tolerance)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_a_tangential_spring_on_the_bore_stops_the_rotation(kind: str) -> None:
    mesh = ring(kind, 12, 2, 1.0, 2.0)
    support = Support("s", Named("bore"), normal=0.0, spring=Spring(tangential=1.0))
    assert free_motions(mesh, *_held(support, mesh)) == []


@pytest.mark.parametrize(
    ("support", "count"),
    [
        (Support("s", Named("SW"), ux=0.0), 1),
        (Support("s", Named("SW"), ux=0.0, uy=1.0), 2),
        (Support("s", Named("SW"), along=(3.0, 4.0)), 1),
        (Support("s", Named("SW"), spring=Spring(x=1.0, y=2.0)), 2),
        (Support("s", Named("left"), ux=0.0, spring=Spring(tangential=1.0)), 2 * 3),
    ],
)
def test_every_node_is_held_once_for_each_direction(support: Support, count: int) -> None:
    mesh = grid("Q4", 2, 2)
    nodes, directions = _held(support, mesh)
    assert len(nodes) == len(directions) == count

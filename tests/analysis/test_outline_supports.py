"""Every kind of support on outlines, from the document to the reactions, against statics and Hooke.

Where statics alone gives the answer the springs are so weak (some N/mm against E t of a million)
that the plate moves as a rigid body, to SOFT.
"""

import numpy as np
import pytest

from tests.gallery import disc
from tests.outlines import ELEMENTS, STEEL, Json, Solved, document, solved
from workers.errors import FaultyError

E, NU = STEEL["youngs_modulus"], STEEL["poissons_ratio"]
SOFT = 1e-4
LENGTH, HEIGHT, T = 120.0, 60.0, 4.0
PUSH: list[Json] = [{"on": "right", "pressure": 1}]
every_element = pytest.mark.parametrize("element", ELEMENTS)


def _rectangle(turned: float = 0.0) -> Json:
    """120 by 60 from (0, 0), with sides base, right, top, left; turned about (0, 0) [degrees]."""
    a = np.radians(turned)
    turn = np.array([[np.cos(a), -np.sin(a)], [np.sin(a), np.cos(a)]])
    corners = np.array([[0, 0], [LENGTH, 0], [LENGTH, HEIGHT], [0, HEIGHT]]) @ turn.T
    names = ("base", "right", "top", "left")
    return {
        "outline": [{"at": c, "side": n} for c, n in zip(corners.tolist(), names, strict=True)],
        "points": dict(zip(("A", "B", "C", "D"), corners.tolist(), strict=True)),
    }


def _with_hole(radius: float = 12.0) -> Json:
    circle = {"centre": [50, 30], "radius": radius}
    return {**_rectangle(), "holes": [{"name": "eye", "circle": circle}]}


def _solved(geometry: Json, supports: list[Json], loads: object, **more: object) -> Solved:
    settings = {"size": 20.0, "thickness": T} | more
    return solved(document(geometry, supports, loads, **settings))  # type: ignore[arg-type]


def _balances(plate: Solved, case: int = 0) -> None:
    left = plate.applied(case=case) + plate.reactions(case=case)
    size = np.abs(plate.solution.applied[..., case]).sum()
    np.testing.assert_allclose(left / [1, 1, LENGTH], 0, atol=1e-9 * size)


# --- rollers -------------------------------------------------------------------------------------


@every_element
@pytest.mark.parametrize("turned", [0.0, 207.0])
def test_rollers_on_skew_sides_leave_a_bar_in_plain_tension(element: str, turned: float) -> None:
    """sigma = 10 along the bar: it grows by sigma L / E and narrows by nu sigma H / E, exactly."""
    sigma = 10.0
    supports: list[Json] = [{"on": "left", "normal": 0}, {"on": "base", "normal": 0}]
    loads = [{"on": "right", "pressure": -sigma}]
    plate = _solved(_rectangle(turned), supports, loads, element=element)
    a = np.radians(turned)
    along, across = np.array([np.cos(a), np.sin(a)]), np.array([-np.sin(a), np.cos(a)])
    far = plate.displacement[plate.mesh.points["C"]]
    expected = sigma / E * (LENGTH * along - NU * HEIGHT * across)
    np.testing.assert_allclose(far, expected, rtol=1e-9, atol=1e-9 * np.abs(expected).max())
    np.testing.assert_allclose(
        plate.reaction("left")[:2], -sigma * HEIGHT * T * along, atol=1e-8 * sigma * HEIGHT * T
    )
    _balances(plate)


@pytest.mark.parametrize(
    ("element", "tolerance"), [("T3", 0.03), ("Q4", 0.02), ("T6", 1e-3), ("Q8", 1e-3)]
)
def test_ring_in_a_rigid_socket_presses_on_it_as_lame_says(element: str, tolerance: float) -> None:
    """Rollers on the whole rim: u(b) = 0 with u = A r + B / r and sigma_r(a) = -p.

    Lame (Timoshenko & Goodier, art. 28): sigma_r = E/(1 - nu^2) ((1 + nu) A - (1 - nu) B / r^2).
    """
    a, b, p = 30.0, 50.0, 20.0
    geometry = {
        "outline": [{**piece, "side": "rim"} for piece in disc(0, 0, b)],
        "holes": [{"name": "bore", "circle": {"centre": [0, 0], "radius": a}}],
        "points": {"key": [b, 0]},
    }
    supports: list[Json] = [{"on": "rim", "normal": 0}, {"on": "key", "uy": 0}]
    loads = [{"on": "bore", "pressure": p}]
    plate = _solved(geometry, supports, loads, element=element, size=6.0)
    law = E / (1 - NU**2)
    conditions = [[law * (1 + NU), -law * (1 - NU) / a**2], [b, 1 / b]]
    A, B = np.linalg.solve(conditions, [-p, 0])
    bore = plate.nodes_of("bore")
    outward = plate.mesh.nodes[bore] / a
    moved = (plate.displacement[bore] * outward).sum(axis=1)
    assert moved.mean() == pytest.approx(A * a + B / a, rel=tolerance)
    np.testing.assert_allclose(moved, A * a + B / a, rtol=4 * tolerance)
    around = plate.displacement[bore] - moved[:, None] * outward
    assert np.abs(around).max() < 4 * tolerance * moved.max()
    pressed = next(s for s in plate.solution.support_forces if s.label == "rim")
    at = plate.mesh.nodes[pressed.nodes] / b
    total = -(pressed.force[..., 0] * at).sum()
    sigma = law * ((1 + NU) * A - (1 - NU) * B / b**2)
    assert total == pytest.approx(-sigma * 2 * np.pi * b * T, rel=tolerance)
    assert abs(plate.reaction("key")[1]) < 1e-9 * total


@every_element
def test_roller_on_a_whole_hole_lets_the_plate_turn_and_this_is_said(element: str) -> None:
    with pytest.raises(FaultyError, match=r"can rotate about \(50, 30\)") as caught:
        _solved(_with_hole(), [{"on": "eye", "normal": 0}], [{"on": "right", "shear": 1}],
                element=element)  # fmt: skip
    assert [fault.pointer for fault in caught.value.faults] == ["/supports"]


@every_element
def test_roller_on_a_hole_carries_no_moment_about_its_centre(element: str) -> None:
    """Statics about the centre (50, 30): the strut along x at B alone balances the moment."""
    F = 900.0
    plate = _solved(
        _with_hole(),
        [{"on": "eye", "normal": 0}, {"on": "B", "ux": 0}],
        [{"on": "C", "force": [0, F]}],
        element=element,
    )
    about = (50.0, 30.0)
    assert abs(plate.reaction("eye", about)[2]) < 1e-9 * F * LENGTH
    assert plate.reaction("B")[0] == pytest.approx(-F * (LENGTH - 50) / 30, rel=1e-9)
    _balances(plate)


@every_element
def test_corners_of_a_window_on_rollers_stay_where_they_are(element: str) -> None:
    """A block without friction in a square window stops its corners both ways."""
    window = [{"at": [x, y]} for x, y in ((40, 20), (80, 20), (80, 40), (40, 40))]
    geometry = {**_rectangle(), "holes": [{"name": "window", "outline": window}]}
    plate = _solved(
        geometry, [{"on": "window", "normal": 0}], [{"on": "right", "pressure": -5}],
        element=element,
    )  # fmt: skip
    nodes = plate.nodes_of("window")
    u, at = plate.displacement[nodes], plate.mesh.nodes[nodes]
    upright, level = np.isin(at[:, 0], (40, 80)), np.isin(at[:, 1], (20, 40))
    assert (upright & level).sum() == 4
    np.testing.assert_array_equal(u[upright, 0], 0)
    np.testing.assert_array_equal(u[level, 1], 0)
    assert np.abs(u[upright, 1]).max() > 1e-6
    _balances(plate)


# --- springs -------------------------------------------------------------------------------------


@every_element
@pytest.mark.parametrize("stiffness", [{"y": 0.03}, {"normal": 0.03}])
def test_stiff_plate_on_a_spring_bed_settles_and_tilts_by_statics(
    element: str, stiffness: Json
) -> None:
    """Settlement F / (k L), tilt F e / (k L^3 / 12), for a force F at x = L, e = L / 2."""
    k, F = 0.03, 6.0
    plate = _solved(
        _rectangle(),
        [{"on": "base", "spring": stiffness}, {"on": "A", "ux": 0}],
        [{"on": "B", "force": [0, -F]}],
        element=element,
    )  # fmt: skip
    for point, x in (("A", 0.0), ("B", LENGTH)):
        expected = -F / (k * LENGTH) - F * LENGTH / 2 / (k * LENGTH**3 / 12) * (x - LENGTH / 2)
        moved = plate.displacement[plate.mesh.points[point], 1]
        assert moved == pytest.approx(expected, rel=SOFT)
    np.testing.assert_allclose(plate.reaction("base"), [0, F, F * LENGTH], atol=1e-6 * F * LENGTH)


@every_element
def test_tangential_springs_along_a_side_hold_it_lengthwise(element: str) -> None:
    """u = F / (k L) along the base; the rollers on it take no part of F."""
    k, F = 2.0, 500.0
    along = np.array([np.cos(np.pi / 6), np.sin(np.pi / 6)])
    plate = _solved(
        _rectangle(30.0),
        [{"on": "base", "normal": 0, "spring": {"tangential": k}}],
        [{"on": "base", "total_force": (F * along).tolist()}],
        element=element,
    )  # fmt: skip
    moved = plate.displacement @ along
    np.testing.assert_allclose(moved, F / (k * LENGTH), rtol=SOFT)


@pytest.mark.parametrize(
    ("element", "tolerance"), [("T3", 0.02), ("Q4", 0.02), ("T6", 1e-4), ("Q8", 1e-4)]
)
def test_springs_on_a_round_hole_have_the_stiffness_of_a_circle(
    element: str, tolerance: float
) -> None:
    """Rigid plate on the wall of a hole: k pi R each way from normal or tangential springs, and
    2 pi R^3 k against rotation from the tangential ones alone."""
    kn, kt, R = 5.0, 2.0, 12.0
    F, M = 400.0, 9000.0
    plate = _solved(
        {**_with_hole(R), "points": {"C": [LENGTH, HEIGHT]}},
        [{"on": "eye", "spring": {"normal": kn, "tangential": kt}}],
        {
            "push": [{"on": "eye", "total_force": [0, F]}],
            "turn": [{"on": "top", "total_moment": M}],
        },
        element=element,
    )  # fmt: skip
    moved = plate.solution.displacement
    np.testing.assert_allclose(moved[:, 1, 0].mean(), F / ((kn + kt) * np.pi * R), rtol=tolerance)
    corner = moved[plate.mesh.points["C"], :, 1]
    angle = M / (kt * 2 * np.pi * R**3)
    np.testing.assert_allclose(corner, angle * np.array([-30, LENGTH - 50]), rtol=2.1 * tolerance)
    _balances(plate)


@every_element
def test_normal_springs_on_a_hole_alone_leave_the_rotation_free(element: str) -> None:
    with pytest.raises(FaultyError, match=r"can rotate about \(50, 30\)"):
        _solved(_with_hole(), [{"on": "eye", "spring": {"normal": 1e6}}],
                [{"on": "right", "shear": 1}], element=element)  # fmt: skip


@every_element
def test_three_point_springs_share_a_load_by_statics(element: str) -> None:
    """Beam on two springs of 4 and 6 at its ends, F at a third of the span: 2F/3 and F/3."""
    F = 300.0
    geometry = _rectangle()
    geometry["points"]["third"] = [LENGTH / 3, HEIGHT]
    plate = _solved(
        geometry,
        [{"on": "A", "spring": {"x": 1.0, "y": 4.0}}, {"on": "B", "spring": {"y": 6.0}}],
        [{"on": "third", "force": [0, -F]}],
        element=element,
    )  # fmt: skip
    settled = [plate.displacement[plate.mesh.points[name], 1] for name in "AB"]
    np.testing.assert_allclose(settled, [-2 * F / 3 / 4, -F / 3 / 6], rtol=SOFT)
    np.testing.assert_allclose(plate.reaction("A")[:2], [0, 2 * F / 3], atol=1e-8 * F)


def test_a_point_has_springs_in_x_and_y_only() -> None:
    with pytest.raises(FaultyError, match="is a point; use x and y") as caught:
        _solved(_rectangle(), [{"on": "A", "spring": {"normal": 1.0}}], PUSH)
    assert [fault.pointer for fault in caught.value.faults] == ["/supports/0/spring/normal"]


# --- skew supports and prescribed displacements --------------------------------------------------


@every_element
def test_settlements_of_a_determinate_plate_move_it_without_stress(element: str) -> None:
    """Three struts with given elongations: the rigid motion from three equations by hand."""
    struts = {"A": ([1, 0], 0.3), "B": ([1, 2], -0.2), "D": ([-3, 1], 0.1)}
    places = {"A": (0, 0), "B": (LENGTH, 0), "D": (0, HEIGHT)}
    supports = [
        {"on": name, "along": along, "displacement": value, "case": "settle"}
        for name, (along, value) in struts.items()
    ]
    plate = _solved(
        _rectangle(), supports, {"settle": [], "load": [{"on": "top", "pressure": 2}]},
        element=element,
    )  # fmt: skip
    rows, right = [], []
    for name, (along, value) in struts.items():
        d = np.array(along) / np.hypot(*along)
        x, y = places[name]
        rows.append([d[0], d[1], x * d[1] - y * d[0]])
        right.append(value)
    a, b, turn = np.linalg.solve(rows, right)
    x, y = plate.mesh.nodes.T
    expected = np.stack((a - turn * y, b + turn * x), axis=1)
    np.testing.assert_allclose(plate.displacement, expected, atol=1e-9)
    assert np.abs(plate.stress[..., 0]).max() < 1e-9 * E
    for name, (along, _) in struts.items():
        held = plate.solution.displacement[plate.mesh.points[name], :, 1] @ along
        assert abs(held) < 1e-12
    _balances(plate, case=1)


@every_element
def test_a_side_is_drawn_out_in_one_case_and_held_in_the_others(element: str) -> None:
    """Uniform stress E d / L in "pull", since the plate may narrow; in "press" the side holds."""
    d = 0.06
    plate = _solved(
        _rectangle(),
        [{"on": "left", "normal": 0}, {"on": "base", "normal": 0},
         {"on": "right", "normal": d, "case": "pull"}],
        {"press": [{"on": "top", "pressure": 1}], "pull": []},
        element=element,
    )  # fmt: skip
    sigma = E * d / LENGTH
    np.testing.assert_array_equal(plate.displacement[plate.nodes_of("right"), 0], 0)
    np.testing.assert_allclose(plate.stress[:, 0, 0], -NU, rtol=1e-8)
    np.testing.assert_allclose(plate.stress[:, 0, 1], sigma, rtol=1e-9)
    np.testing.assert_allclose(plate.stress[:, 1:, 1], 0, atol=1e-9 * sigma)
    force = plate.reaction("right", case=1)[:2]
    np.testing.assert_allclose(force, [sigma * HEIGHT * T, 0], atol=1e-9 * sigma * HEIGHT * T)


@every_element
def test_a_hole_is_opened_radially_by_a_given_amount(element: str) -> None:
    """normal = -d on the whole wall of a hole moves each node by d along its radius, outwards."""
    d = 0.02
    plate = _solved(
        _with_hole(),
        [{"on": "eye", "normal": -d}, {"on": "A", "ux": 0}],
        {"open": []},
        element=element,
    )  # fmt: skip
    nodes = plate.nodes_of("eye")
    outward = (plate.mesh.nodes[nodes] - [50, 30]) / 12.0
    radial = (plate.displacement[nodes] * outward).sum(axis=1)
    np.testing.assert_allclose(radial, d, rtol=1e-9)


# --- whole holes and regions, selectors ----------------------------------------------------------


@every_element
def test_a_held_hole_takes_the_whole_load(element: str) -> None:
    F = np.array([300.0, -200.0])
    plate = _solved(
        _with_hole(), [{"on": "eye", "ux": 0, "uy": 0}],
        [{"on": "C", "force": F.tolist()}], element=element,
    )  # fmt: skip
    np.testing.assert_array_equal(plate.displacement[plate.nodes_of("eye")], 0)
    moment = LENGTH * F[1] - HEIGHT * F[0]
    np.testing.assert_allclose(
        plate.reaction("eye"), [*-F, -moment], rtol=1e-9, atol=1e-9 * np.abs(F).max()
    )


def _with_region(shape: Json) -> Json:
    return {**_rectangle(), "regions": [{"name": "pad", "thickness": 9, **shape}]}


@every_element
@pytest.mark.parametrize(
    "shape",
    [
        {"circle": {"centre": [50, 30], "radius": 14}},
        {"outline": [{"at": [x, y]} for x, y in ((0, 0), (40, 0), (40, 60), (0, 60))]},
    ],
    ids=["disc", "end"],
)
def test_a_held_region_stays_and_takes_the_whole_load(element: str, shape: Json) -> None:
    F = np.array([300.0, -200.0])
    plate = _solved(
        _with_region(shape), [{"on": "pad", "ux": 0, "uy": 0}],
        [{"on": "C", "force": F.tolist()}], element=element,
    )  # fmt: skip
    number = plate.mesh.regions.index("pad")
    inside = np.unique(
        np.concatenate([b.connectivity[b.region == number].ravel() for b in plate.mesh.blocks])
    )
    np.testing.assert_array_equal(plate.displacement[inside], 0)
    assert np.abs(plate.displacement).max() > 0
    moment = LENGTH * F[1] - HEIGHT * F[0]
    np.testing.assert_allclose(
        plate.reaction("pad"), [*-F, -moment], rtol=1e-9, atol=1e-9 * np.abs(F).max()
    )


@every_element
def test_a_region_that_is_shifted_takes_the_free_plate_with_it(element: str) -> None:
    shift = [0.25, -0.5]
    plate = _solved(
        _with_region({"circle": {"centre": [50, 30], "radius": 14}}),
        [{"on": "pad", "ux": shift[0], "uy": shift[1]}], {"shift": []}, element=element,
    )  # fmt: skip
    np.testing.assert_allclose(plate.displacement, np.tile(shift, (len(plate.mesh.nodes), 1)),
                               atol=1e-9)  # fmt: skip


SELECTED = {
    "segment": ("left", {"segment": [[0, HEIGHT], [0, 0]]}),
    "circle": ("eye", {"circle": {"centre": [50, 30], "radius": 12}}),
    "box": ("left", {"box": [[-1, -1], [0, HEIGHT + 1]]}),
}


@pytest.mark.parametrize("element", ["T3", "Q8"])
@pytest.mark.parametrize("name", SELECTED)
@pytest.mark.parametrize("holds", [{"ux": 0, "uy": 0}, {"normal": 0, "spring": {"tangential": 50}}])
def test_a_selector_holds_as_the_name_does(element: str, name: str, holds: Json) -> None:
    side, selector = SELECTED[name]
    loads = [{"on": "right", "traction": [3, 1]}]
    by_name, by_place = (
        _solved(_with_hole(), [{"on": on, **holds}], loads, element=element).displacement
        for on in (side, selector)
    )
    scale = np.abs(by_name).max()
    np.testing.assert_allclose(by_place, by_name, atol=1e-9 * scale)


def test_node_numbers_have_no_meaning_on_an_outline() -> None:
    with pytest.raises(FaultyError, match="nodes") as caught:
        _solved(_rectangle(), [{"on": {"nodes": [0, 1]}, "ux": 0}], PUSH)
    assert caught.value.faults[0].pointer.startswith("/supports/0/on")


def test_a_selector_that_catches_nothing_is_a_fault_that_says_what_is_near() -> None:
    with pytest.raises(FaultyError, match="nearest boundary node") as caught:
        _solved(
            _rectangle(),
            [{"on": {"segment": [[0, -5], [LENGTH, -5]]}, "ux": 0}, {"on": "left", "ux": 0}],
            PUSH,
        )
    assert caught.value.faults[0].pointer == "/supports/0/on"

"""Cuts against statics: the forces on one side of a cut, integrated by hand."""

import numpy as np
import pytest

from tests.plates import ELEMENTS, MIXED, grid, plate_job, ring
from workers.analysis.cuts import CutForces, cut_forces
from workers.analysis.section import find_section
from workers.analysis.solution import Solution, solve
from workers.errors import MeshError
from workers.geometry import Region
from workers.job import (
    Acceleration,
    Bearing,
    BodyForce,
    Cut,
    LineLoad,
    Load,
    Named,
    PointForce,
    Pressure,
    Shear,
    Spin,
    Spring,
    Support,
    TemperatureChange,
    TotalForce,
    TotalMoment,
    Traction,
)

L, H, T, RHO = 10.0, 2.0, 2.0, 7.85e-9
CLAMP = Support("clamp", Named("left"), ux=0.0, uy=0.0)
TOP, RIGHT = Named("top"), Named("right")

# Each load, and by hand its force and moment about (0, 0) on the part beyond x (to the tip).
# The top is traversed from the tip (start) to the root (end): value(x) = start + (end - start)
# (1 - x / L); moments of a linear load q(x) by its integrals I0 = int q, I1 = int q x.


def _linear(start: float, end: float, x: float) -> tuple[float, float]:
    """Integrals of q and of q x from x to L."""
    a, b = end, (start - end) / L  # q = a + b x
    return (
        a * (L - x) + b * (L**2 - x**2) / 2,
        a * (L**2 - x**2) / 2 + b * (L**3 - x**3) / 3,
    )


def _pressure(x: float) -> tuple[float, float, float]:
    force, moment = _linear(1.0, 3.0, x)
    return 0.0, -T * force, -T * moment


def _shear(x: float) -> tuple[float, float, float]:
    force, _ = _linear(4.0, -1.0, x)  # along the top from right to left: in -x, at y = H
    return -T * force, 0.0, T * force * H


def _line_load(x: float) -> tuple[float, float, float]:
    in_x, _ = _linear(2.0, 0.0, x)
    in_y, moment = _linear(-1.0, 5.0, x)
    return in_x, in_y, moment - in_x * H


def _weight(x: float) -> tuple[float, float, float]:
    force = -9.81e6 * RHO * T * H * (L - x)
    return 0.0, force, force * (L + x) / 2


def _spin(x: float) -> tuple[float, float, float]:
    """About (1, -2) with 1000 rad/s: rho w^2 (r - c), linear, so by mid-points and I2."""
    m = RHO * T * H * 1e6
    in_x = m * ((L**2 - x**2) / 2 - (L - x))
    in_y = m * 3 * (L - x)  # mean of y - (-2) over 0..2
    # int (x' fy - y' fx) = m int (x' 3 - 1 (x' - 1)) dx' with y' and its mean 1; the y'^2 and
    # x' y' parts of x' (y' + 2) - y' (x' - 1) leave 2 x' + y'.
    moment = m * ((L**2 - x**2) + (L - x))
    return in_x, in_y, moment


CASES: dict[str, tuple[list[Load], object]] = {
    "tip force": (
        [TotalForce(on=RIGHT, force=(3.0, -5.0))],
        lambda x: (3.0, -5.0, -5.0 * L - 3.0 * H / 2),
    ),
    "tip moment": ([TotalMoment(on=RIGHT, moment=11.0)], lambda x: (0.0, 0.0, 11.0)),
    "point force": (
        [PointForce(on=Named("NE"), force=(1.0, 2.0))],
        lambda x: (1.0, 2.0, 2 * L - 1.0 * H),
    ),
    "traction": (
        [Traction(on=RIGHT, start=(2.0, 1.0), end=(2.0, 1.0))],
        lambda x: (2 * H * T, H * T, H * T * L - 2 * H * T * H / 2),
    ),
    "pressure": ([Pressure(on=TOP, start=1.0, end=3.0)], _pressure),
    "shear": ([Shear(on=TOP, start=4.0, end=-1.0)], _shear),
    "line load": ([LineLoad(on=TOP, start=(2.0, -1.0), end=(0.0, 5.0))], _line_load),
    "self weight": ([Acceleration(acceleration=(0.0, -9.81e6))], _weight),
    "body force": (
        [BodyForce(force=(0.5, 0.0))],
        lambda x: (0.5 * T * H * (L - x), 0.0, -0.5 * T * H * (L - x) * H / 2),
    ),
    "spin": ([Spin(about=(1.0, -2.0), speed=1000.0)], _spin),
    "heating": ([TemperatureChange(change=70.0)], lambda x: (0.0, 0.0, 0.0)),
}


def _beam(kind: str):
    """10 x 2, straight sides, inner nodes moved so that no element line is upright."""

    def shape(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        bubble = np.sin(np.pi * y / H)
        return x + 0.2 * np.sin(0.6 * np.pi * x) * bubble, y + 0.1 * np.sin(np.pi * x / L) * bubble

    return grid(kind, 7, 3, size=(L, H), shape=shape, straight=True, shuffle=3)


@pytest.fixture(scope="module", params=ELEMENTS + MIXED)
def beam(request: pytest.FixtureRequest) -> Solution:
    job = plate_job([CLAMP], {name: loads for name, (loads, _) in CASES.items()}, thickness=T)
    return solve(job, _beam(request.param))


def _figures(carried: CutForces, case: int) -> np.ndarray:
    return np.array([part[case] for part in (carried.normal, carried.shear, carried.moment)])


@pytest.mark.parametrize("x", [1.0, 3.3, 5.0, 40 / 7, 8.77])
def test_upright_cut_balances_what_lies_beyond(beam: Solution, x: float) -> None:
    """Every load type, on cuts that no line of elements follows and on one that passes nodes.

    1e-9 of the largest figure: the accuracy of the solution.
    """
    carried = cut_forces(beam, Cut((x, H + 0.5), (x, -0.5)))
    assert carried.about.tolist() == [x, H / 2]
    for number, (name, (_, beyond)) in enumerate(CASES.items()):
        fx, fy, moment = beyond(x)
        moment -= x * fy - H / 2 * fx
        # Walking down, the tip is on the left; the normal is -x, along is -y. The cut puts on
        # the tip the opposite of its loads.
        size = max(abs(fx), abs(fy), abs(moment))
        if name == "heating":  # none of the stress of a held plate may come through
            size = 210e3 * 1.2e-5 * 70 * T
        np.testing.assert_allclose(
            _figures(carried, number), [fx, fy, -moment], atol=1e-9 * size, err_msg=name
        )


@pytest.mark.parametrize(("top", "bottom"), [(3.0, 4.1), (6.6, 5.0), (2.0, 7.5)])
def test_skew_cut_balances_what_lies_beyond(beam: Solution, top: float, bottom: float) -> None:
    """Tip load as it is, pressure on the top beyond the cut, weight of the trapezium beyond it."""
    cut = Cut((top, H), (bottom, 0.0))
    carried = cut_forces(beam, cut)
    direction = np.array([bottom - top, -H]) / np.hypot(bottom - top, H)
    normal = np.array([direction[1], -direction[0]])
    middle = np.array([(top + bottom) / 2, H / 2])
    # The trapezium from the upright at L back to the cut: a rectangle and a triangle.
    low, high = min(top, bottom), max(top, bottom)
    rectangle, triangle = H * (L - high), H * (high - low) / 2
    weight = -9.81e6 * RHO * T
    arm = rectangle * (L + high) / 2 + triangle * (high - (high - low) / 3)
    loads = {
        "tip force": CASES["tip force"][1](top),
        "pressure": _pressure(top),
        "self weight": (0.0, weight * (rectangle + triangle), weight * arm),
    }
    for name, (fx, fy, about_origin) in loads.items():
        force = np.array([fx, fy])
        moment = about_origin - (middle[0] * fy - middle[1] * fx)
        expected = np.array([-force @ normal, -force @ direction, -moment])
        np.testing.assert_allclose(
            _figures(carried, beam.cases.index(name)),
            expected,
            atol=1e-9 * np.abs(expected).max(),
            err_msg=name,
        )


def test_turning_the_cut_round_keeps_tension_and_changes_the_moment(beam: Solution) -> None:
    """Action and reaction: N stays; V, taken along the other direction of the other part, too."""
    down = cut_forces(beam, Cut((4.4, H), (4.4, 0.0)))
    up = cut_forces(beam, Cut((4.4, 0.0), (4.4, H)))
    for one, other, sign in ((down.normal, up.normal, 1), (down.shear, up.shear, 1),
                             (down.moment, up.moment, -1)):  # fmt: skip
        np.testing.assert_allclose(one, sign * other, atol=1e-9 * np.abs(one).max())


def test_moment_is_positive_when_it_pulls_at_the_start(beam: Solution) -> None:
    """The tip is pressed down, so the top fibre, where the cut starts, is in tension."""
    carried = cut_forces(beam, Cut((2.0, H), (2.0, 0.0)))
    assert carried.moment[beam.cases.index("pressure")] > 0


@pytest.mark.parametrize("kind", ELEMENTS)
def test_cut_through_a_ring_takes_half_the_load_on_each_side(kind: str) -> None:
    """A bearing pulls a ring that is held by springs at its rim; the two cuts of the upright
    diameter together carry what acts on the right half."""
    mesh = ring(kind, 20, 3, 10.0, 25.0)
    springs = Support("rim", Named("rim"), spring=Spring(normal=100.0, tangential=20.0))
    solution = solve(plate_job([springs], [Bearing(on=Named("bore"), force=(80.0, 0.0))]), mesh)
    upper = cut_forces(solution, Cut((0, 26.0), (0, 9.0)))
    lower = cut_forces(solution, Cut((0, -9.0), (0, -26.0)))
    (held,) = solution.support_forces
    x = mesh.nodes[held.nodes, 0]
    # The pin presses on the right half only. Springs on the line itself count to the left part
    # of the cut, which walking down is the right half.
    acting = 80.0 + held.force[x > -1e-6, 0, 0].sum()
    total = upper.normal[0] + lower.normal[0]
    assert total == pytest.approx(acting, rel=1e-9)
    shear = upper.shear[0] + lower.shear[0]
    assert shear == pytest.approx(held.force[x > -1e-6, 1, 0].sum(), abs=1e-9 * acting)


@pytest.mark.parametrize("kind", ["T3", "Q8"])
def test_cut_across_regions_of_other_thickness_still_balances(kind: str) -> None:
    """Body force 2 per volume on 5 x 2 of thickness 2 and 1 beyond the cut at x = 3.5."""
    mesh = grid(
        kind, 10, 2, size=(L, H), region_of_column=[0] * 5 + [1] * 5, regions=("plate", "thin")
    )
    job = plate_job(
        [CLAMP],
        [BodyForce(force=(2.0, 0.0))],
        thickness=2.0,
        regions=(Region("thin", thickness=1.0),),
    )
    carried = cut_forces(solve(job, mesh), Cut((3.5, 3.0), (3.5, -1.0)))
    assert carried.normal[0] == pytest.approx(2 * (1.5 * H * 2 + 5 * H * 1), rel=1e-9)


# --- places that are no section ------------------------------------------------------------------


@pytest.mark.parametrize(
    ("start", "end", "message"),
    [
        ((5.0, 1.0), (5.0, 1.0), "no length"),
        ((5.0, 2.0), (5.0, 0.8), r"ends inside the plate.*\(5, 2\) to \(5, .*0\)"),
        ((12.0, 2.0), (12.0, 0.0), "does not cross"),
        ((5.0, 5.0), (5.0, 3.0), "does not cross"),
        ((0.0, 0.0), (0.0, 2.0), "does not cross|no element"),
    ],
    ids=["no length", "half way", "beside", "above", "along the border"],
)
def test_what_is_no_cut_is_a_fault(start: tuple, end: tuple, message: str) -> None:
    with pytest.raises(MeshError, match=message) as error:
        find_section(grid("Q4", 8, 4, size=(L, H)), Cut(start, end, pointer="/requests/cuts/a"))
    assert error.value.faults[0].pointer == "/requests/cuts/a"


@pytest.mark.parametrize("kind", ELEMENTS)
def test_cut_may_miss_the_border_by_a_chord_s_rise(kind: str) -> None:
    """From the drawn circle to the rim: with chords the plate begins a little inside the circle."""
    mesh = ring(kind, 16, 3, 10.0, 25.0)
    angle = np.pi / 16
    ray = np.array([np.cos(angle), np.sin(angle)])
    section = find_section(mesh, Cut(tuple(10.0 * ray), tuple(24.9 * ray)))
    assert len(section.nodes) >= 4


def test_cut_from_the_middle_of_a_hole_takes_one_side_only() -> None:
    mesh = ring("Q8", 16, 3, 10.0, 25.0)
    section = find_section(mesh, Cut((0.0, 0.0), (0.0, 40.0)))
    assert (mesh.nodes[section.nodes, 1] > 0).all()

"""Every kind of load on an outline with curved sides, from the document to the nodal forces.

Resultants are hand sums, or integrals along the true curves by Gauss-Legendre, which know nothing
of elements. One job of many cases is solved for each element type, so that the reactions balance
what was asked as well.
"""

from collections.abc import Callable
from functools import cache

import numpy as np
import pytest
from numpy.polynomial.legendre import leggauss

from tests.outlines import ELEMENTS, STEEL, Json, Solved, document, laid, solved
from workers.errors import FaultyError

RHO = STEEL["density"]
T, PAD = 4.0, 10.0  # thickness of the plate and of the pad around the eye
W, H = 160.0, 100.0  # the straight part; the nose bulges by 40 beyond it
NOSE_R, NOSE_X, NOSE_Y = 51.25, 148.75, 50.0  # (50^2 + 40^2) / (2 x 40); 200 - 51.25
HALF = np.arctan2(50.0, W - NOSE_X)  # half the angle of the nose
EYE, EYE_R, PAD_R = (60.0, 50.0), 20.0, 32.0

PLATE: Json = {
    "outline": [
        {"at": [0, 0], "side": "base"},
        {"at": [W, 0], "side": "nose", "through": [200, 50]},
        {"at": [W, H], "side": "top"},
        {"at": [0, H], "side": "left"},
    ],
    "holes": [{"name": "eye", "circle": {"centre": EYE, "radius": EYE_R}}],
    "regions": [{"name": "pad", "circle": {"centre": EYE, "radius": PAD_R}, "thickness": PAD}],
    "points": {"tip": [200, 50], "corner": [0, H]},
}

# Material on the left: the nose runs upwards, the eye clockwise from its point of greatest x.
Curve = Callable[[np.ndarray], tuple[np.ndarray, np.ndarray]]  # fraction -> place, tangent


def _line(start: tuple[float, float], end: tuple[float, float]) -> tuple[float, Curve]:
    a, b = np.array(start), np.array(end)
    length = float(np.linalg.norm(b - a))
    return length, lambda f: (a + f[:, None] * (b - a), np.tile((b - a) / length, (len(f), 1)))


def _arc(
    centre: tuple[float, float], radius: float, first: float, sweep: float
) -> tuple[float, Curve]:
    def at(f: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        radial = np.stack((np.cos(first + f * sweep), np.sin(first + f * sweep)), axis=1)
        along = np.sign(sweep) * np.stack((-radial[:, 1], radial[:, 0]), axis=1)
        return np.array(centre) + radius * radial, along

    return abs(sweep) * radius, at


SIDES = {
    "base": (*_line((0, 0), (W, 0)), T),
    "top": (*_line((W, H), (0, H)), T),
    "left": (*_line((0, H), (0, 0)), T),
    "nose": (*_arc((NOSE_X, NOSE_Y), NOSE_R, -HALF, 2 * HALF), T),
    "eye": (*_arc(EYE, EYE_R, 0.0, -2 * np.pi), PAD),
}


def _integral(side: str, load: Json) -> np.ndarray:
    """Force and moment about the origin of a traction, pressure, shear or line load, (3,)."""
    length, curve, thickness = SIDES[side]
    s, w = leggauss(60)
    fraction, weight = (1 + s) / 2, w / 2 * length
    at, tangent = curve(fraction)
    normal = np.stack((tangent[:, 1], -tangent[:, 0]), axis=1)
    ((kind, value),) = load.items()
    first, last = (value["from"], value["to"]) if isinstance(value, dict) else (value, value)
    first, last = np.atleast_1d(first), np.atleast_1d(last)
    size = (1 - fraction)[:, None] * first + fraction[:, None] * last
    direction = {"pressure": -normal, "shear": tangent}.get(kind, np.ones((1, 2)))
    force = size * direction * (1.0 if kind == "line_load" else thickness) * weight[:, None]
    moment = at[:, 0] * force[:, 1] - at[:, 1] * force[:, 0]
    return np.array([*force.sum(axis=0), moment.sum()])


SIDE_LOADS: dict[str, tuple[str, Json]] = {
    f"{side}, {next(iter(load))}{' that varies' if isinstance(*load.values(), dict) else ''}": (
        side, load,
    )
    for side in ("base", "top", "nose", "eye")
    for load in (
        {"pressure": 3.0},
        {"pressure": {"from": -1.0, "to": 4.0}},
        {"shear": 2.0},
        {"shear": {"from": 3.0, "to": 0.0}},
        {"traction": [2.0, -5.0]},
        {"traction": {"from": [0, 0], "to": [6.0, 1.0]}},
        {"line_load": [-7.0, 2.0]},
        {"line_load": {"from": [1.0, 0], "to": [0, 1.0]}},
    )
}  # fmt: skip

SEGMENT = NOSE_R**2 * (2 * HALF - np.sin(2 * HALF)) / 2  # area of the nose beyond x = 160
SEGMENT_X = NOSE_X + 4 * NOSE_R * np.sin(HALF) ** 3 / (3 * (2 * HALF - np.sin(2 * HALF)))
RING = np.pi * (PAD_R**2 - EYE_R**2)
VOLUME = T * (W * H + SEGMENT - np.pi * PAD_R**2) + PAD * RING
FIRST_X = (
    T * (W * H * W / 2 + SEGMENT * SEGMENT_X - np.pi * PAD_R**2 * EYE[0]) + PAD * RING * EYE[0]
)
CENTROID = np.array([FIRST_X / VOLUME, H / 2])


def _at(place: np.ndarray | tuple[float, float], force: tuple[float, float]) -> list[float]:
    return [*force, place[0] * force[1] - place[1] * force[0]]


def _spun(about: tuple[float, float], speed: float) -> list[float]:
    """rho omega^2 V (centroid - about), and its moment: the pull is along arms from `about`."""
    pull = RHO * speed**2 * VOLUME * (CENTROID - about)
    return _at(about, tuple(pull))


NOSE_MIDDLE = (NOSE_X + NOSE_R * np.sin(HALF) / HALF, NOSE_Y)  # centroid of the arc
OTHERS: dict[str, tuple[Json, list[float]]] = {
    "force at a point on the nose": ({"on": "tip", "force": [3, -8]}, _at((200, 50), (3, -8))),
    "force at a corner": ({"on": "corner", "force": [1, 2]}, _at((0, H), (1, 2))),
    "total force on the left": ({"on": "left", "total_force": [9, 4]}, _at((0, 50), (9, 4))),
    "total force on the nose": (
        {"on": "nose", "total_force": [-6, 5]}, _at(NOSE_MIDDLE, (-6, 5)),
    ),
    "total force on the eye": ({"on": "eye", "total_force": [70, 30]}, _at(EYE, (70, 30))),
    "total moment": ({"on": "left", "total_moment": 800.0}, [0, 0, 800.0]),
    "bearing up": ({"on": "eye", "bearing": [0, 900]}, _at(EYE, (0, 900))),
    "bearing aslant": ({"on": "eye", "bearing": [-300, 77]}, _at(EYE, (-300, 77))),
    "acceleration": (
        {"acceleration": [0, -9810]}, _at(CENTROID, (0.0, -9810 * RHO * VOLUME)),
    ),
    "acceleration of the pad": (
        {"on": "pad", "acceleration": [500, 0]}, _at(EYE, (500 * RHO * PAD * RING, 0)),
    ),
    "body force": ({"body_force": [1e-3, 2e-3]}, _at(CENTROID, (1e-3 * VOLUME, 2e-3 * VOLUME))),
    "body force on the pad": (
        {"on": "pad", "body_force": [0, 1e-2]}, _at(EYE, (0, 1e-2 * PAD * RING)),
    ),
    "spin": ({"spin": {"about": [10, 20], "speed": 200}}, _spun((10.0, 20.0), 200.0)),
    "heat": ({"temperature_change": 40}, [0, 0, 0]),
    "heat of the pad": ({"on": "pad", "temperature_change": 40}, [0, 0, 0]),
}  # fmt: skip
# What does not depend on how well elements follow a curve: to rounding for every element.
EXACT = {
    *(name for name, (side, _) in SIDE_LOADS.items() if side in ("base", "top")),
    *(name for name in OTHERS if name.startswith(("force", "total force on the left", "total m"))),
    *("bearing up", "bearing aslant", "heat", "heat of the pad", "total force on the eye"),
    "nose, pressure",  # through the ends of the arc, and each element's through its centre
}
CURVED = {"T3": 4e-3, "Q4": 4e-3, "T6": 1e-5, "Q8": 1e-5}  # of the sizes that are summed
EXPECTED = {name: _integral(*place) for name, place in SIDE_LOADS.items()} | {
    name: np.array(wanted, float) for name, (_, wanted) in OTHERS.items()
}


@cache
def _plate(element: str) -> Solved:
    cases = {name: [{"on": side, **load}] for name, (side, load) in SIDE_LOADS.items()}
    cases |= {name: [load] for name, (load, _) in OTHERS.items()}
    return solved(
        document(PLATE, [{"on": "base", "ux": 0, "uy": 0}], cases, element=element, size=12.0,
                 thickness=T)
    )  # fmt: skip


@pytest.mark.parametrize("element", ELEMENTS)
@pytest.mark.parametrize("name", EXPECTED)
def test_resultant_is_that_of_the_true_curve(name: str, element: str) -> None:
    plate = _plate(element)
    case = plate.solution.cases.index(name)
    nodal = plate.solution.applied[..., case]
    size = np.abs(nodal).sum()
    found = plate.applied(case=case)
    tolerance = 1e-11 if name in EXACT else CURVED[element]
    off = np.abs(found - EXPECTED[name]) / [1, 1, W]
    assert off.max() <= tolerance * size


@pytest.mark.parametrize("element", ELEMENTS)
def test_what_is_asked_as_a_total_comes_to_a_billionth(element: str) -> None:
    plate = _plate(element)
    for name in ("total force on the nose", "total force on the eye", "bearing up",
                 "bearing aslant"):  # fmt: skip
        found = plate.applied(case=plate.solution.cases.index(name))[:2]
        wanted = EXPECTED[name][:2]
        np.testing.assert_allclose(found, wanted, atol=1e-9 * np.abs(wanted).max())
    moment = plate.applied(case=plate.solution.cases.index("total moment"))
    np.testing.assert_allclose(moment, [0, 0, 800], atol=1e-9 * 800)


@pytest.mark.parametrize("element", ELEMENTS)
def test_the_base_takes_every_load(element: str) -> None:
    plate = _plate(element)
    for case, name in enumerate(plate.solution.cases):
        size = np.abs(plate.solution.applied[..., case]).sum()
        if name.startswith("heat"):
            size = 210e3 * T * 1.2e-5 * 40 * W
        left = plate.applied(case=case) + plate.reactions(case=case)
        assert np.abs(left / [1, 1, W]).max() < 1e-9 * size, name


# --- nodal forces on curved quadratic sides ------------------------------------------------------


def _consistent(plate: Solved, load: Json) -> np.ndarray:
    """Integral of N_i t q ds along the parabolas of the nose, 20 points on each, (N, 2).

    A load that varies does so with the length along the parabolas.
    """
    table = plate.mesh.facet_table(plate.mesh.sides["nose"])
    start = plate.mesh.nodes[table[:, 0]] - [NOSE_X, NOSE_Y]
    table = table[np.argsort(np.arctan2(start[:, 1], start[:, 0]))]
    at = plate.mesh.nodes[table]  # start, end, middle
    s, w = leggauss(20)
    tangent = _tangent(s, at)
    ds = np.linalg.norm(tangent, axis=2)
    length = ds @ w
    # From the start of a parabola to s: half of 1 + s times the mean over 20 points in between.
    inner = (1 + s)[:, None] * (1 + s) / 2 - 1
    speed = np.linalg.norm(_tangent(inner.ravel(), at), axis=2).reshape(len(at), 20, 20)
    reached = (np.cumsum(length) - length)[:, None] + speed @ w * (1 + s) / 2
    fraction = (reached / length.sum())[..., None]
    ((kind, value),) = load.items()
    first, last = (value["from"], value["to"]) if isinstance(value, dict) else (value, value)
    size = (1 - fraction) * np.atleast_1d(first) + fraction * np.atleast_1d(last)
    normal = np.stack((tangent[..., 1], -tangent[..., 0]), axis=2)
    direction = {"pressure": -normal, "shear": tangent}.get(kind, ds[..., None])
    thickness = 1.0 if kind == "line_load" else T
    shape = np.stack((s * (s - 1) / 2, s * (s + 1) / 2, 1 - s**2), axis=1)
    total = np.zeros((plate.mesh.node_count, 2))
    np.add.at(total, table, np.einsum("qi,q,fqc->fic", shape, w, size * direction * thickness))
    return total


def _tangent(s: np.ndarray, at: np.ndarray) -> np.ndarray:
    """dx/ds of parabolas through start, end, middle (f, 3, 2) at s (q,), (f, q, 2)."""
    return np.einsum("qi,fic->fqc", np.stack((s - 0.5, s + 0.5, -2 * s), axis=1), at)


@pytest.mark.parametrize("element", ["T6", "Q8"])
@pytest.mark.parametrize("name", [n for n, (side, _) in SIDE_LOADS.items() if side == "nose"])
def test_nodal_forces_on_an_arc_are_consistent(name: str, element: str) -> None:
    """What is a polynomial along the parabola comes out exactly; what has its length in it, a
    square root, to the few digits that three points leave."""
    plate = _plate(element)
    nodal = plate.solution.applied[..., plate.solution.cases.index(name)]
    expected = _consistent(plate, SIDE_LOADS[name][1])
    polynomial = name in ("nose, pressure", "nose, shear")
    tolerance = 1e-12 if polynomial else 1e-5
    np.testing.assert_allclose(nodal, expected, atol=tolerance * np.abs(expected).max())


# --- loads that cannot act where they are put ----------------------------------------------------

TWICE: Json = {  # one name for two sides that do not touch
    **PLATE,
    "outline": [{**vertex, "side": "edge" if vertex["side"] in ("base", "top") else vertex["side"]}
                for vertex in PLATE["outline"]],
    "holes": [*PLATE["holes"], {"name": "slot", "outline": [
        {"at": [115, 40]}, {"at": [135, 40]}, {"at": [135, 60]}, {"at": [115, 60]}]}],
}  # fmt: skip
FAULTY: dict[str, tuple[Json, str]] = {
    "varying load on two pieces": (
        {"on": "edge", "pressure": {"from": 0, "to": 1}}, "one connected side",
    ),
    "bearing in a square hole": ({"on": "slot", "bearing": [1, 0]}, "a round hole"),
    "bearing on a nose": ({"on": "nose", "bearing": [1, 0]}, "bulges outwards"),
    "bearing on a region": ({"on": "pad", "bearing": [1, 0]}, "pad"),
    "moment on a curved side": ({"on": "nose", "total_moment": 1}, "straight side"),
    "force on a side": ({"on": "left", "force": [1, 0]}, "total_force"),
    "total force at a point": ({"on": "tip", "total_force": [1, 0]}, "force"),
    "pressure on a region": ({"on": "pad", "pressure": 1}, "pad"),
    "body force on a side": ({"on": "left", "body_force": [1, 0]}, "region"),
    "pressure where no side is": (
        {"on": {"segment": [[0, 0], [0, 70]]}, "pressure": 1}, "ends inside",
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", FAULTY)
def test_a_load_that_cannot_act_is_a_fault_at_its_place(name: str) -> None:
    load, words = FAULTY[name]
    fine: Json = {"on": "left", "pressure": 1}
    with pytest.raises(FaultyError, match=words) as caught:
        laid(document(TWICE, [{"on": "left", "ux": 0, "uy": 0}], [fine, load], size=20))
    assert {fault.pointer[:21] for fault in caught.value.faults} == {"/load_cases/load/1/on"}

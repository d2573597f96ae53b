"""Heated plates given by their outline: free, restrained, of two materials, hot in one part.

Restrained and free: Hooke's law with thermal strain. The other two have a source of their own.
"""

import numpy as np
import pytest

from tests.gallery import disc, hole, loop, rectangle
from tests.outlines import ELEMENTS, STEEL, Json, document, solved

E, NU, ALPHA = STEEL["youngs_modulus"], STEEL["poissons_ratio"], STEEL["thermal_expansion"]
DT = 80.0


def _bracket() -> Json:
    """Arcs, fillets, holes and a thicker region of the same material."""
    outline = loop((0, 0), (200, 0), (200, 50), (60, 50), (60, 220), (0, 220))
    for vertex, side in zip(outline, ("a", "b", "c", "d", "e", "f"), strict=True):
        vertex["side"] = side
    outline[3] |= {"fillet": 25, "fillet_side": "throat"}
    outline[1] |= {"through": [215, 25]}
    return {
        "outline": outline,
        "holes": [hole("low", 170, 25, 9), hole("high", 30, 190, 9)],
        "regions": [{"name": "pad", "outline": rectangle(10, 160, 40, 50, 8), "thickness": 9}],
        "points": {"corner": [0, 0], "toe": [200, 0]},
    }


@pytest.mark.parametrize("element", ELEMENTS)
def test_a_free_plate_grows_without_stress(element: str) -> None:
    """u = alpha dT x, stress zero to rounding of E alpha dT, thickness and holes do not matter."""
    supports: list[Json] = [{"on": "corner", "ux": 0, "uy": 0}, {"on": "toe", "uy": 0}]
    plate = solved(
        document(_bracket(), supports, [{"temperature_change": DT}], element=element, size=20,
                 thickness=4)
    )  # fmt: skip
    grown = ALPHA * DT * plate.mesh.nodes
    np.testing.assert_allclose(plate.displacement, grown, atol=1e-10 * np.abs(grown).max())
    largest = np.abs(plate.stress).max()
    print(f"{element}: largest stress {largest:.1e} of E alpha dT = {E * ALPHA * DT:.1f}")
    assert largest < 1e-9 * E * ALPHA * DT


@pytest.mark.parametrize("element", ELEMENTS)
def test_a_plate_that_is_held_all_around_is_pressed_both_ways(element: str) -> None:
    """-E alpha dT / (1 - nu) everywhere; the border is held by name, holes and fillet included."""
    sides = ("a", "b", "c", "d", "e", "f", "throat", "low", "high")
    supports: list[Json] = [{"on": side, "ux": 0, "uy": 0} for side in sides]
    plate = solved(
        document(_bracket(), supports, [{"temperature_change": DT}], element=element, size=20)
        | {"plate": {"material": "steel", "thickness": 9}}
    )
    pressure = -E * ALPHA * DT / (1 - NU)
    largest = np.abs(plate.stress[..., 0] - [pressure, pressure, 0]).max()
    print(f"{element}: off by {largest:.1e} of {pressure:.1f}")
    assert largest < 1e-9 * -pressure


@pytest.mark.parametrize("element", ELEMENTS)
def test_a_rectangle_between_rollers_is_pressed_both_ways(element: str) -> None:
    """As above; each side takes pressure times its length times the thickness."""
    outline = rectangle(0, 0, 120, 60)
    for vertex, side in zip(outline, ("low", "right", "high", "left"), strict=True):
        vertex["side"] = side
    supports: list[Json] = [{"on": vertex["side"], "normal": 0} for vertex in outline]
    plate = solved(
        document({"outline": outline}, supports, [{"temperature_change": DT}], element=element,
                 size=20, thickness=3)
    )  # fmt: skip
    pressure = E * ALPHA * DT / (1 - NU)
    np.testing.assert_allclose(
        plate.stress[..., 0], np.tile([-pressure, -pressure, 0], (len(plate.stress), 1)),
        atol=1e-9 * pressure,
    )  # fmt: skip
    inwards = {"low": (0, 1, 120), "right": (-1, 0, 60), "high": (0, -1, 120), "left": (1, 0, 60)}
    for side, (x, y, length) in inwards.items():
        force = plate.reaction(side)[:2]
        np.testing.assert_allclose(
            force, pressure * length * 3 * np.array([x, y]), atol=1e-8 * pressure * length
        )


# --- bimetal strip -------------------------------------------------------------------------------

BRASS = {"youngs_modulus": 100e3, "poissons_ratio": 0.3, "thermal_expansion": 1.9e-5}
LENGTH, LOWER, UPPER = 200.0, 3.0, 5.0  # steel below, brass above


@pytest.mark.parametrize(
    ("element", "size", "tolerance"),
    [("T3", 0.5, 0.02), ("Q4", 0.5, 0.005), ("T6", 2.0, 5e-4), ("Q8", 2.0, 5e-4)],
)
def test_bimetal_strip_curls_as_timoshenko_says(
    element: str, size: float, tolerance: float
) -> None:
    """Curvature 6 (alpha_2 - alpha_1) dT (1 + m)^2 / (h (3 (1 + m)^2 + (1 + m n)(m^2 + 1/(m n)))),
    m = t_1/t_2, n = E_1/E_2: Timoshenko, "Analysis of bi-metal thermostats", J. Opt. Soc. Am. 11
    (1925). Measured over the middle half, where the ends are not felt.

    T3 and Q4 are stiff in bending, by the square of the size over the layer.
    """
    half = {"name": "brass", "outline": rectangle(0, LOWER, LENGTH, UPPER), "material": "brass"}
    xs = LENGTH * np.array([0.25, 0.5, 0.75])
    geometry = {
        "outline": rectangle(0, 0, LENGTH, LOWER + UPPER),
        "regions": [half],
        "points": {"left": [0, 0], "right": [LENGTH, 0]}
        | {f"p{i}": [x, 0.0] for i, x in enumerate(xs)},
    }
    plate = solved(
        document(
            geometry,
            [{"on": "left", "ux": 0, "uy": 0}, {"on": "right", "uy": 0}],
            [{"temperature_change": DT}],
            element=element, size=size, materials={"steel": STEEL, "brass": BRASS},
        )
    )  # fmt: skip
    v = [plate.displacement[plate.mesh.points[f"p{i}"], 1] for i in range(3)]
    curvature = -(v[0] - 2 * v[1] + v[2]) / (xs[1] - xs[0]) ** 2
    m, n, h = LOWER / UPPER, E / BRASS["youngs_modulus"], LOWER + UPPER
    expansion = (BRASS["thermal_expansion"] - ALPHA) * DT
    expected = 6 * expansion * (1 + m) ** 2
    expected /= h * (3 * (1 + m) ** 2 + (1 + m * n) * (m**2 + 1 / (m * n)))
    print(
        f"{element}: curvature {curvature:.6e} (Timoshenko {expected:.6e}, "
        f"{100 * (curvature / expected - 1):+.3f} %)"
    )
    assert curvature == pytest.approx(expected, rel=tolerance)


# --- a hot core ----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("element", "size", "worst", "mean"),
    [
        ("T3", 0.6, 0.05, 5e-3),
        ("Q4", 0.6, 0.03, 2e-3),
        ("T6", 2, 0.03, 2e-3),
        ("Q8", 2, 0.03, 2e-3),
    ],
)
def test_a_hot_core_in_a_cold_disc(element: str, size: float, worst: float, mean: float) -> None:
    """sigma = alpha E (A(b)/b^2 - A(r)/r^2) radially, with A(r) the integral of T r dr, and
    alpha E (A(b)/b^2 + A(r)/r^2 - T) along the hoop: Timoshenko & Goodier, Theory of Elasticity,
    art. "Thin circular disk: temperature symmetrical about center".

    With T in the core r < a only, the core is pressed evenly by alpha E T (1 - a^2/b^2) / 2, and
    the hoop stress jumps by alpha E T at its border: nothing may be smeared over it. In parts of
    alpha E T; of a few thousand points the worst is a corner of an element at that border.
    """
    a, b = 8.0, 20.0
    geometry = {
        "outline": disc(0, 0, b),
        "regions": [{"name": "core", "circle": {"centre": [0, 0], "radius": a}, "thickness": 1}],
        "points": {"east": [b, 0], "north": [0, b], "west": [-b, 0]},
    }
    plate = solved(
        document(
            geometry,
            [{"on": "east", "uy": 0}, {"on": "west", "uy": 0}, {"on": "north", "ux": 0}],
            [{"on": "core", "temperature_change": DT}],
            element=element, size=size,
        )
    )  # fmt: skip
    points = plate.recovery.field_mesh.points
    r = np.linalg.norm(points, axis=1)
    core = plate.recovery.field_mesh.region == plate.mesh.regions.index("core")
    heat = ALPHA * E * DT
    inner = np.where(core, 0.5, a**2 / (2 * np.maximum(r, a) ** 2))  # A(r) / r^2 over T
    radial = heat * (a**2 / (2 * b**2) - inner)
    hoop = heat * (a**2 / (2 * b**2) + inner - core)
    n = points / np.where(r > 0, r, 1)[:, None]
    xx, yy, xy = plate.stress[..., 0].T
    found = xx * n[:, 0] ** 2 + yy * n[:, 1] ** 2 + 2 * xy * n[:, 0] * n[:, 1]
    away = r > 0.1 * a  # in the middle radial and hoop are any two directions
    off = np.stack((found - radial, xx + yy - found - hoop))[:, away] / heat
    print(
        f"{element}: off by at most {100 * np.abs(off).max():.2f} %, on the mean "
        f"{100 * np.sqrt((off**2).mean()):.3f} % of E alpha T"
    )
    assert np.abs(off).max() < worst
    assert np.sqrt((off**2).mean()) < mean

"""Peaks of plates given by their outline, freely meshed: handbook values, closed forms, agreement.

Every figure is printed. Sizes are those at the hole; quadratic elements need far fewer.
"""

from collections.abc import Mapping

import numpy as np
import pytest

from tests.exact_solutions import lame
from tests.gallery import disc
from tests.outlines import ELEMENTS, STEEL, Json, Solved, document, solved

E, NU = STEEL["youngs_modulus"], STEEL["poissons_ratio"]
FINE: Mapping[str, float] = {"T3": 1 / 80, "Q4": 1 / 80, "T6": 1 / 20, "Q8": 1 / 20}  # of a radius
GENERAL: Mapping[str, float] = {"T3": 5.0, "Q4": 5.0, "T6": 12.0, "Q8": 12.0}
ACROSS: Mapping[str, int] = {"T3": 12, "Q4": 12, "T6": 4, "Q8": 4}  # elements, beside the hole


# --- strip with a hole ---------------------------------------------------------------------------

WIDTH, LENGTH = 100.0, 400.0


def _pulled_strip(ratio: float, element: str) -> Solved:
    """A strip under unit tension with a hole of ratio x WIDTH across in its middle."""
    radius = ratio * WIDTH / 2
    centre = {"centre": [LENGTH / 2, WIDTH / 2], "radius": radius}
    geometry = {
        "outline": [
            {"at": [0, 0]},
            {"at": [LENGTH, 0], "side": "right"},
            {"at": [LENGTH, WIDTH]},
            {"at": [0, WIDTH], "side": "left"},
        ],
        "holes": [{"name": "hole", "circle": centre}],
        "points": {"middle": [0, WIDTH / 2]},
    }
    supports: list[Json] = [{"on": "left", "normal": 0}, {"on": "middle", "uy": 0}]
    loads = [{"on": "right", "pressure": -1}]
    sizes = {"hole": FINE[element] * radius}
    size = min(GENERAL[element], (WIDTH / 2 - radius) / ACROSS[element])
    return solved(document(geometry, supports, loads, element=element, size=size, sizes=sizes))


RATIOS = {1: (0.1, 0.3, 0.6), 2: (0.1, 0.2, 0.3, 0.4, 0.5, 0.6)}  # by order; linear ones are slow
STRIPS = [
    pytest.param(element, ratio, marks=pytest.mark.slow) if order == 1 else (element, ratio)
    for element, order in (("T3", 1), ("Q4", 1), ("T6", 2), ("Q8", 2))
    for ratio in RATIOS[order]
]


@pytest.mark.parametrize(("element", "ratio"), STRIPS)
def test_strip_with_a_hole(element: str, ratio: float) -> None:
    """K_tn = 3.000 - 3.140 r + 3.667 r^2 - 1.527 r^3 on the net stress, r = d/W, within 1.5 %.

    Howland 1930 as fitted in Peterson's Stress Concentration Factors (from memory). The fit itself
    is given to about 1 %.
    """
    plate = _pulled_strip(ratio, element)
    along = plate.stress[:, 0, 0]
    factor = along.max() * (1 - ratio)
    published = 3.0 - 3.14 * ratio + 3.667 * ratio**2 - 1.527 * ratio**3
    print(
        f"{element} d/W = {ratio}: {factor:.3f} (handbook {published:.3f}, "
        f"{100 * (factor / published - 1):+.2f} %), {plate.mesh.node_count} nodes"
    )
    assert factor == pytest.approx(published, rel=0.015)
    x, y = plate.recovery.field_mesh.points[along.argmax()] - [LENGTH / 2, WIDTH / 2]
    assert abs(x) < 0.1 * ratio * WIDTH
    assert abs(y) == pytest.approx(ratio * WIDTH / 2, rel=0.02)


# --- one outline, four elements ------------------------------------------------------------------


def _hung_bracket(element: str) -> Solved:
    """A bracket with a rounded throat, bolted by its upright arm and pressed on its foot."""
    corners = [(0, 0), (200, 0), (200, 50), (60, 50), (60, 220), (0, 220)]
    outline: list[Json] = [{"at": list(corner)} for corner in corners]
    outline[2]["side"] = "foot"
    outline[3] |= {"fillet": 25, "fillet_side": "throat"}
    outline[5]["side"] = "wall"
    size = {"T3": 0.25, "Q4": 0.25, "T6": 1.0, "Q8": 1.0}[element]
    return solved(
        document(
            {"outline": outline},
            [{"on": "wall", "ux": 0, "uy": 0}],
            [{"on": "foot", "pressure": {"from": 6, "to": 0}}],
            element=element, size=GENERAL[element], sizes={"throat": size},
        )
    )  # fmt: skip


def test_all_elements_find_the_same_peak() -> None:
    """Four discretisations of one outline within 1 % of their mean; none knows of the others.

    The bracket's peak is at its throat: the clamped wall, a singularity, is left out.
    """
    peaks = {}
    for element in ELEMENTS:
        found = _hung_bracket(element)
        throat = np.isin(found.recovery.field_mesh.origin, found.nodes_of("throat"))
        xx, yy, xy = found.stress[throat, :, 0].T
        principal = (xx + yy) / 2 + np.hypot((xx - yy) / 2, xy)
        peaks[element] = float(principal.max())
    mean = np.mean(list(peaks.values()))
    print({name: f"{peak:.3f} ({100 * (peak / mean - 1):+.2f} %)" for name, peak in peaks.items()})
    for peak in peaks.values():
        assert peak == pytest.approx(mean, rel=0.01)


# --- rings ---------------------------------------------------------------------------------------


def _ring(inner: float, outer: float, loads: list[Json], element: str, size: float) -> Solved:
    """A full ring, held so that it may grow."""
    geometry = {
        "outline": [{**piece, "side": "rim"} for piece in disc(0, 0, outer)],
        "holes": [{"name": "bore", "circle": {"centre": [0, 0], "radius": inner}}],
        "points": {"east": [outer, 0], "north": [0, outer], "west": [-outer, 0]},
    }
    supports: list[Json] = [
        {"on": "east", "uy": 0}, {"on": "west", "uy": 0}, {"on": "north", "ux": 0},
    ]  # fmt: skip
    return solved(document(geometry, supports, loads, element=element, size=size))


def _polar(plate: Solved, side: str) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Radial and hoop stress (k,) at the nodes of a side, and their radial displacement."""
    nodes = plate.nodes_of(side)
    points = np.isin(plate.recovery.field_mesh.origin, nodes)
    n = plate.recovery.field_mesh.points[points]
    n = n / np.linalg.norm(n, axis=1, keepdims=True)
    xx, yy, xy = plate.stress[points, :, 0].T
    radial = xx * n[:, 0] ** 2 + yy * n[:, 1] ** 2 + 2 * xy * n[:, 0] * n[:, 1]
    at = plate.mesh.nodes[nodes]
    moved = (plate.displacement[nodes] * at).sum(axis=1) / np.linalg.norm(at, axis=1)
    return radial, xx + yy - radial, moved


RING_SIZES = [("T3", 0.25, 0.03), ("Q4", 0.25, 0.03), ("T6", 0.8, 0.01), ("Q8", 0.8, 0.01)]


@pytest.mark.parametrize(("element", "size", "tolerance"), RING_SIZES)
def test_thick_ring_under_internal_pressure(element: str, size: float, tolerance: float) -> None:
    """Pressure 60 between radii 10 and 20: Lame, Timoshenko & Goodier art. 28.

    All around the bore hoop stress 100 and radial stress -60, to the tolerance of the worst node on
    a free mesh; on the mean, and for the displacement, a fifth of it.
    """
    a, b, p = 10.0, 20.0, 60.0
    plate = _ring(a, b, [{"on": "bore", "pressure": p}], element, size)
    radial, hoop, moved = _polar(plate, "bore")
    exact = float(lame(E, NU, a, b, p).displacement(np.array(a), np.array(0.0))[0])
    print(
        f"{element}: hoop {hoop.min():.2f} to {hoop.max():.2f} (100), radial {radial.min():.2f} to "
        f"{radial.max():.2f} (-60), moved {moved.mean():.6f} ({exact:.6f})"
    )
    np.testing.assert_allclose(hoop, 100, rtol=tolerance)
    np.testing.assert_allclose(radial, -60, atol=100 * tolerance)
    assert hoop.mean() == pytest.approx(100, rel=tolerance / 5)
    np.testing.assert_allclose(moved, exact, rtol=tolerance / 5)


@pytest.mark.parametrize(("element", "size", "tolerance"), RING_SIZES)
def test_spinning_ring(element: str, size: float, tolerance: float) -> None:
    """Hoop stress at the bore (3 + nu)/4 rho w^2 (b^2 + (1 - nu)/(3 + nu) a^2), at the rim
    (3 + nu)/4 rho w^2 (a^2 + (1 - nu)/(3 + nu) b^2): Timoshenko & Goodier, art. 32, rotating discs.

    A free edge has no radial stress: u = r (sigma_hoop / E) there.
    """
    a, b, speed = 10.0, 20.0, 3000.0
    plate = _ring(a, b, [{"spin": {"about": [0, 0], "speed": speed}}], element, size)
    c = (3 + NU) / 4 * STEEL["density"] * speed**2
    for side, r, other in (("bore", a, b), ("rim", b, a)):
        expected = c * (other**2 + (1 - NU) / (3 + NU) * r**2)
        radial, hoop, moved = _polar(plate, side)
        print(
            f"{element} {side}: hoop {hoop.min():.3f} to {hoop.max():.3f} ({expected:.3f}), "
            f"moved {moved.mean():.6f} ({r * expected / E:.6f})"
        )
        np.testing.assert_allclose(hoop, expected, rtol=tolerance)
        np.testing.assert_allclose(radial, 0, atol=tolerance * expected)
        np.testing.assert_allclose(moved, r * expected / E, rtol=tolerance / 5)

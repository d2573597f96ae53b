"""Strips that compression could buckle: size and edges by hand, coefficients by Ritz."""

from typing import Any

import numpy as np
import pytest
from scipy.linalg import eigh

from tests.caution_documents import changed, enclosed
from tests.plates import grid, plate_job, ring
from tests.reviewed import cautions
from workers.job import Named, OnCircle, Spring, Support
from workers.review.strips import Strip, coefficient, find_edges, strips_through

X, Y = np.array([1.0, 0.0]), np.array([0.0, 1.0])
PLACE = np.array([3.0, 2.5])  # in a plate 10 x 4: 3 and 7 to its ends, 2.5 and 1.5 to its edges


def strip(supports: list[Support], place: np.ndarray = PLACE, along: np.ndarray = X) -> Strip:
    mesh = grid("Q8", 10, 4, size=(10.0, 4.0))
    found = strips_through(find_edges(plate_job(supports), mesh), place[None], along[None])[0]
    assert found is not None
    return found


def fixed(side: str) -> Support:
    return Support(side, Named(side), ux=0.0, uy=0.0)


def roller(side: str, value: float = 0.0) -> Support:
    return Support(side, Named(side), normal=value)


def test_edges_without_support_are_free() -> None:
    found = strip([fixed("left")])
    assert found == Strip((1.5, 2.5), 4.0, 10.0, 0, False)


@pytest.mark.parametrize(
    ("supports", "held"),
    [
        ([fixed("top")], 1),
        ([fixed("top"), fixed("bottom")], 2),
        # pushed in, or held along itself: more than a plane of symmetry
        ([roller("top", 0.1)], 1),
        ([Support("top", Named("top"), ux=0.0)], 1),
        ([Support("top", Named("top"), spring=Spring(y=5.0))], 0),
        ([Support("corner", Named("NW"), ux=0.0, uy=0.0)], 0),
    ],
)
def test_edges_with_more_than_a_roller_are_held(supports: list[Support], held: int) -> None:
    found = strip(supports)
    assert (found.held, found.width, found.mirrored) == (held, 4.0, False)


@pytest.mark.parametrize(
    ("supports", "expected"),
    [
        ([roller("bottom")], (8.0, 10.0, 0)),
        ([roller("bottom"), fixed("top")], (8.0, 10.0, 2)),
        ([roller("left")], (4.0, 20.0, 0)),
        ([roller("bottom"), roller("top")], (np.inf, 10.0, 0)),
    ],
)
def test_behind_a_roller_the_strip_goes_on(supports: Any, expected: Any) -> None:
    found = strip(supports)
    assert (found.width, found.length, found.held) == expected
    assert found.mirrored


def test_a_strip_across_the_plate_swaps_width_and_length() -> None:
    found = strip([fixed("left")], along=Y)
    assert (found.width, found.length, found.held) == (10.0, 4.0, 1)
    assert sorted(found.sides) == [3.0, 7.0]


def test_a_skew_strip_reaches_to_the_border_on_its_own_line() -> None:
    """Along (1, 1) from (3, 2.5): up to y = 4 and down to y = 0, 4 sqrt(2) in all."""
    found = strip([], along=np.array([1.0, 1.0]) / np.sqrt(2))
    assert found.length == pytest.approx(4 * np.sqrt(2))
    assert found.width == pytest.approx(4 * np.sqrt(2))


def test_a_hole_ends_a_strip() -> None:
    """In a ring of radii 1 and 3 a strip along the hoop is as wide as the ring."""
    mesh = ring("Q8", 32, 4, 1.0, 3.0)
    bore = Support("bore", OnCircle((0.0, 0.0), 1.0), ux=0.0, uy=0.0)
    found = strips_through(find_edges(plate_job([bore]), mesh), np.array([[0.0, 2.0]]), X[None])[0]
    assert found is not None
    assert found.width == pytest.approx(2.0)
    assert found.held == 1
    assert found.length == pytest.approx(2 * np.sqrt(3**2 - 2**2), rel=0.01)  # chord of the rim


# --- coefficients ------------------------------------------------------------------------------


def ritz(ratio: float, free: bool, nu: float = 0.3) -> float:
    """k of a plate, width 1, length `ratio`, one half wave, its ends and edge y = 0 supported.

    Energy of a plate (Timoshenko & Gere, ch. 8) with w = f(y) sin(pi x / L), f a polynomial:
    an upper bound that is good to four digits with eight terms.
    """
    p = np.pi / ratio
    y, weight = np.polynomial.legendre.leggauss(24)
    y, weight = (y + 1) / 2, weight / 2
    terms = []
    for j in range(1, 9):
        shape = np.polynomial.Polynomial.basis(j)
        terms.append(shape if free else shape * np.polynomial.Polynomial([1, -1]))
    f, d, dd = (np.array([t.deriv(n)(y) if n else t(y) for t in terms]) for n in (0, 1, 2))

    def integral(a: np.ndarray, b: np.ndarray) -> np.ndarray:
        return (a * weight) @ b.T

    coupling = integral(f, dd) + integral(dd, f)
    bending = integral(dd, dd) - p**2 * coupling + p**4 * integral(f, f)
    bending += 2 * (1 - nu) * p**2 * (coupling / 2 + integral(d, d))
    work = p**2 * integral(f, f)
    return float(eigh(bending, work, eigvals_only=True)[0] / np.pi**2)


@pytest.mark.parametrize("ratio", [1.0, 2.0, 5.0, 20.0])
def test_one_free_edge_has_the_coefficient_that_ritz_finds(ratio: float) -> None:
    """k = 0.43 + (b/L)^2 within 2.5 %: an approximation for steel."""
    k, b = coefficient(Strip((0.5, 0.5), 1.0, ratio, 1, False))
    assert b == 1.0
    assert k == pytest.approx(ritz(ratio, free=True), rel=0.025)


@pytest.mark.parametrize("ratio", [0.3, 0.7, 1.0])
def test_supported_edges_have_the_coefficient_that_ritz_finds(ratio: float) -> None:
    k, _ = coefficient(Strip((0.5, 0.5), 1.0, ratio, 2, False))
    assert k == pytest.approx(ritz(ratio, free=False), rel=1e-6)


def test_a_long_plate_on_supported_edges_buckles_in_squares() -> None:
    """The smallest of all numbers of half waves is that of squares, k = 4."""
    k, _ = coefficient(Strip((0.5, 0.5), 1.0, 3.0, 2, False))
    assert k == pytest.approx(min(ritz(3.0 / waves, free=False) for waves in range(1, 6)), rel=1e-6)


def test_a_strip_with_free_edges_is_a_strut() -> None:
    assert coefficient(Strip((0.5, 0.5), 1.0, 6.0, 0, False)) == (1.0, 6.0)


@pytest.mark.parametrize("degrees", [0, 30])
def test_where_all_directions_are_compressed_alike_the_border_gives_the_strip(degrees: int) -> None:
    """A plate 300 x 100 that is held all around and warm, turned: across the short way."""
    turn = complex(np.exp(1j * np.radians(degrees)))
    corners = [turn * z for z in (0, 300, 300 + 100j, 100j)]
    document = changed(
        enclosed(2.45), {"geometry/patches/0/corners": [[z.real, z.imag] for z in corners]}
    )
    (caution,) = [c for c in cautions(document) if c.code == "compression-buckling"]
    assert caution.evidence["b"] == pytest.approx(300)
    assert caution.evidence["k"] == pytest.approx((3 + 1 / 3) ** 2)

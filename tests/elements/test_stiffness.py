"""Element stiffness against symbolic integration, and its zero eigenvalues."""

import numpy as np
import pytest
import sympy as sp

from elements import registry
from elements.contract import ElementType
from elements.errors import DegenerateElementError
from elements.trials import isotropic

NAMES = ["T3", "T6", "Q4", "Q8"]
r, s = sp.symbols("r s")

# The polynomials that an element spans, from any textbook; its shape functions then follow from
# the Kronecker property, without a formula of ours.
SPAN = {
    "T3": [1, r, s],
    "T6": [1, r, s, r * s, r**2, s**2],
    "Q4": [1, r, s, r * s],
    "Q8": [1, r, s, r * s, r**2, s**2, r**2 * s, r * s**2],
}
AFFINE = sp.Matrix(
    [[sp.Rational(3, 2), sp.Rational(1, 4)], [-sp.Rational(1, 3), sp.Rational(5, 4)]]
)
LAW = sp.Matrix([[3, sp.Rational(4, 5), 0], [sp.Rational(4, 5), 2, 0], [0, 0, 1]])
COUPLING = sp.Matrix([[0, 0, 1], [0, 0, sp.Rational(1, 2)], [1, sp.Rational(1, 2), 0]]) / 3


def integrate(expression: sp.Expr, triangular: bool) -> sp.Expr:
    """Over the reference triangle or square, term by term."""
    total = sp.Integer(0)
    for (a, b), factor in sp.Poly(expression, r, s).terms():
        if triangular:
            total += factor * sp.factorial(a) * sp.factorial(b) / sp.factorial(a + b + 2)
        elif a % 2 == 0 and b % 2 == 0:
            total += factor * sp.Rational(4, (a + 1) * (b + 1))
    return total


def symbolic_stiffness(element: ElementType, law: sp.Matrix) -> np.ndarray:
    """Integral of B^T D B over the affine image of the reference shape, thickness 1."""
    nodes = [tuple(map(sp.nsimplify, node)) for node in element.natural_nodes]
    span = sp.Matrix([SPAN[element.name]])
    collocation = sp.Matrix([[sp.sympify(p).subs({r: a, s: b}) for p in span] for a, b in nodes])
    N = span * collocation.inv()
    gradient = AFFINE.inv() * sp.Matrix([N.diff(r), N.diff(s)])
    columns = [[[dx, 0], [0, dy], [dy, dx]] for dx, dy in gradient.T.tolist()]
    B = sp.Matrix.hstack(*map(sp.Matrix, columns))
    integrand = (B.T * law * B) * AFFINE.det()
    return np.array(
        integrand.applyfunc(lambda e: integrate(sp.expand(e), element.is_triangle)), dtype=float
    )


@pytest.mark.parametrize("law", [LAW, LAW + COUPLING], ids=["orthogonal", "coupled"])
@pytest.mark.parametrize("name", NAMES)
def test_stiffness_equals_the_symbolic_integral(name: str, law: sp.Matrix) -> None:
    """On a triangle or parallelogram every integrand is a polynomial that the rule holds."""
    element = registry.get(name)
    coords = element.natural_nodes @ np.array(AFFINE, dtype=float)
    found = element.stiffness(coords[None], np.array(law, dtype=float)[None], np.array([2.0]))[0]
    expected = 2 * symbolic_stiffness(element, law)
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-13 * np.abs(expected).max())


def arched(name: str) -> np.ndarray:
    """An element whose sides are circular arcs of 90 degrees: corners on the unit circle."""
    element = registry.get(name)
    angles = 2 * np.pi * np.arange(element.corners) / element.corners
    if element.order == 2:
        angles = np.concatenate((angles, angles + np.pi / element.corners))
    return np.column_stack((np.cos(angles), np.sin(angles)))


SHAPES = {
    "straight": lambda name: registry.get(name).natural_nodes @ np.diag([2.0, 1.0]),
    "sheared": lambda name: registry.get(name).natural_nodes @ np.array([[1.0, 0.0], [0.7, 0.5]]),
    "disc": arched,
}


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("name", NAMES)
def test_stiffness_has_exactly_the_three_rigid_motions_as_null_space(name: str, shape: str) -> None:
    """Statics of a free plate: two translations and a rotation, and no other motion, is free."""
    coords = SHAPES[shape](name)[None]
    K = registry.get(name).stiffness(coords, isotropic(1.0, 0.3)[None], np.ones(1))[0]
    values, vectors = np.linalg.eigh(K)
    assert np.abs(values[:3]).max() < 1e-13 * values[-1]
    assert values[3] > 1e-4 * values[-1]
    x, y = coords[0].T
    rigid = np.zeros((x.size, 2, 3))
    rigid[:, 0, 0] = rigid[:, 1, 1] = 1
    rigid[:, :, 2] = np.column_stack((-y, x))
    rigid = rigid.reshape(-1, 3)
    projected = vectors[:, :3] @ (vectors[:, :3].T @ rigid)
    np.testing.assert_allclose(projected, rigid, atol=1e-10)


@pytest.mark.parametrize("name", NAMES)
def test_stiffness_does_not_depend_on_size(name: str) -> None:
    """In the plane B scales with 1/L and the area with L^2, so K depends on shape alone."""
    element, law = registry.get(name), isotropic(1.0, 0.3)[None]
    coords = SHAPES["sheared"](name)[None]
    tiny, huge = (element.stiffness(coords * f, law, np.ones(1)) for f in (1e-4, 1e6))
    np.testing.assert_allclose(tiny, huge, rtol=0, atol=1e-13 * np.abs(huge).max())


@pytest.mark.parametrize("name", NAMES)
def test_clockwise_nodes_raise_degenerate_element_error_naming_the_elements(name: str) -> None:
    element = registry.get(name)
    good, bad = element.natural_nodes, element.natural_nodes * [1, -1]
    laws = np.tile(isotropic(1.0, 0.3), (4, 1, 1))
    with pytest.raises(DegenerateElementError, match="counter-clockwise") as caught:
        element.stiffness(np.array([good, bad, good, bad]), laws, np.ones(4))
    assert caught.value.elements == (1, 3)
    assert caught.value.element_type == name
    assert max(caught.value.det_J) < 0


@pytest.mark.parametrize("name", NAMES)
def test_a_node_that_is_not_a_number_raises_degenerate_element_error(name: str) -> None:
    element = registry.get(name)
    coords = np.array(element.natural_nodes)[None].copy()
    coords[0, 1, 0] = np.nan
    with pytest.raises(DegenerateElementError):
        element.stiffness(coords, isotropic(1.0, 0.3)[None], np.ones(1))


def test_a_folded_mid_side_node_is_found_though_the_corners_are_sound() -> None:
    """A mid-side node beyond the quarter point turns det J negative near the corner."""
    element = registry.get("Q8")
    coords = np.array(element.natural_nodes)[None].copy()
    coords[0, 4] = [0.99, -1.0]
    with pytest.raises(DegenerateElementError):
        element.stiffness(coords, isotropic(1.0, 0.3)[None], np.ones(1))

"""Quadrature rules against the closed forms of monomial integrals."""

from math import factorial

import numpy as np
import pytest

from elements.quadrature import Rule, line, quadrilateral, triangle


@pytest.mark.parametrize("degree", range(6))
def test_triangle_rule_integrates_every_monomial_up_to_its_degree(degree: int) -> None:
    """Integral of r^a s^b over the unit triangle is a! b! / (a + b + 2)!, by Euler's beta."""
    points, weights = triangle(degree)
    for a in range(degree + 1):
        for b in range(degree + 1 - a):
            exact = factorial(a) * factorial(b) / factorial(a + b + 2)
            found = weights @ (points[:, 0] ** a * points[:, 1] ** b)
            assert found == pytest.approx(exact, rel=1e-13)


@pytest.mark.parametrize(("degree", "monomial"), [(1, 2), (2, 3), (4, 5), (5, 6)])
def test_triangle_rule_is_the_smallest_that_is_needed(degree: int, monomial: int) -> None:
    """One degree higher is not exact: the next rule up is not used where a smaller one does."""
    points, weights = triangle(degree)
    exact = factorial(monomial) / factorial(monomial + 2)
    assert weights @ points[:, 0] ** monomial != pytest.approx(exact, rel=1e-6)


@pytest.mark.parametrize("count", [1, 2, 3, 5])
def test_line_rule_is_exact_to_degree_2n_minus_1_and_no_further(count: int) -> None:
    """Integral of x^k over [-1, 1] is 2/(k + 1) for even k, else 0."""
    points, weights = line(count)
    for k in range(2 * count):
        assert weights @ points**k == pytest.approx(2 / (k + 1) * (k % 2 == 0), abs=1e-14)
    assert weights @ points ** (2 * count) != pytest.approx(2 / (2 * count + 1), rel=1e-6)


@pytest.mark.parametrize("count", [1, 2, 3])
def test_quadrilateral_rule_is_the_product_of_two_line_rules(count: int) -> None:
    """Integral of x^k y^l over the square is the product of the two line integrals."""
    points, weights = quadrilateral(count)
    for k in range(2 * count):
        for l_ in range(2 * count):
            exact = 4 / ((k + 1) * (l_ + 1)) * (k % 2 == 0) * (l_ % 2 == 0)
            found = weights @ (points[:, 0] ** k * points[:, 1] ** l_)
            assert found == pytest.approx(exact, abs=1e-14)


@pytest.mark.parametrize("rule", [triangle(d) for d in range(6)] + [quadrilateral(3), line(4)])
def test_weights_are_positive_and_points_inside(rule: Rule) -> None:
    assert (rule.weights > 0).all()
    assert (np.abs(rule.points) <= 1).all()


@pytest.mark.parametrize("degree", [-1, 6])
def test_degree_without_a_rule_is_refused(degree: int) -> None:
    with pytest.raises(ValueError, match="degrees 0 to 5"):
        triangle(degree)


def test_a_shared_rule_cannot_be_changed_by_a_caller() -> None:
    with pytest.raises(ValueError, match="read-only"):
        triangle(2).weights[0] = 0.0

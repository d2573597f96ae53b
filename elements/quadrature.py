"""Quadrature on the reference triangle, square and line.

The triangle has corners (0, 0), (1, 0), (0, 1) and area 1/2; the square is [-1, 1] x [-1, 1]; the
line is [-1, 1]. All weights are positive and all points inside.
"""

from functools import lru_cache
from math import sqrt
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

HIGHEST_TRIANGLE_DEGREE = 5


class Rule(NamedTuple):
    """Points and weights; read-only, shared between callers.

    points : (q, 2) array, or (q,) on the line      natural coordinates
    weights : (q,) array      they sum to the measure of the reference shape
    """

    points: Array
    weights: Array


def _frozen(points: Array, weights: Array) -> Rule:
    points.setflags(write=False)
    weights.setflags(write=False)
    return Rule(points, weights)


def _orbit(a: float) -> list[list[float]]:
    """The three points whose barycentric coordinates are (1 - 2a, a, a) in any order."""
    return [[a, a], [1 - 2 * a, a], [a, 1 - 2 * a]]


@lru_cache
def triangle(degree: int) -> Rule:
    """Smallest rule of this module that integrates polynomials up to `degree` exactly.

    Raises
    ------
    ValueError   no rule of that degree here.

    References
    ----------
    Dunavant, "High degree efficient symmetrical Gaussian quadrature rules for the triangle",
    Int. J. Numer. Meth. Engng 21 (1985), rules of degree 1, 2, 4 and 5, here in closed form (the
    7-point rule is Radon's, 1948).
    """
    if not 0 <= degree <= HIGHEST_TRIANGLE_DEGREE:
        raise ValueError(f"triangle rules exist for degrees 0 to 5, not {degree}")
    if degree <= 1:
        return _frozen(np.array([[1 / 3, 1 / 3]]), np.array([1 / 2]))
    if degree == 2:
        return _frozen(np.array(_orbit(1 / 6)), np.full(3, 1 / 6))
    if degree <= 4:
        root = sqrt(38 - 44 * sqrt(2 / 5))
        inner, outer = (8 - sqrt(10) + root) / 18, (8 - sqrt(10) - root) / 18
        spread = sqrt(213125 - 53320 * sqrt(10))
        weights = np.repeat([(620 + spread) / 3720, (620 - spread) / 3720], 3) / 2
        return _frozen(np.array(_orbit(inner) + _orbit(outer)), weights)
    near, far = (6 - sqrt(15)) / 21, (6 + sqrt(15)) / 21
    weights = np.r_[9 / 40, np.repeat([(155 - sqrt(15)) / 1200, (155 + sqrt(15)) / 1200], 3)] / 2
    return _frozen(np.array([[1 / 3, 1 / 3], *_orbit(near), *_orbit(far)]), weights)


@lru_cache
def line(count: int) -> Rule:
    """Gauss-Legendre rule on [-1, 1], exact for polynomials up to degree 2 count - 1."""
    points, weights = np.polynomial.legendre.leggauss(count)
    return _frozen(points, weights)


@lru_cache
def quadrilateral(points_per_direction: int) -> Rule:
    """Product Gauss-Legendre rule on the square, the first coordinate running fastest."""
    points, weights = line(points_per_direction)
    eta, xi = np.meshgrid(points, points, indexing="ij")
    return _frozen(np.column_stack((xi.ravel(), eta.ravel())), np.outer(weights, weights).ravel())

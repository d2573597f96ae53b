"""Exact plane-stress solutions: what the program must converge to.

That each of them satisfies equilibrium and Hooke's law is checked by numerical derivatives in
tests/reference/, so that no closed form is trusted because a book or this file says so.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Field = Callable[[Array, Array], Array]


@dataclass(frozen=True)
class Exact:
    """displacement, stress and body force (per volume) as functions of x and y, (..., 2 or 3)."""

    displacement: Field
    stress: Field
    body_force: Field | None = None


def kirsch(youngs_modulus: float, poissons_ratio: float) -> Exact:
    """Round hole of radius 1 in an infinite plate, unit tension along x.

    Timoshenko & Goodier, Theory of Elasticity, art. 35 (Kirsch 1898); displacements by
    integrating the strains, as in Sukumar et al., Int. J. Numer. Meth. Engng 48 (2000), from
    memory.
    """
    G = youngs_modulus / (2 * (1 + poissons_ratio))
    kappa = (3 - poissons_ratio) / (1 + poissons_ratio)

    def displacement(x: Array, y: Array) -> Array:
        r, t = np.hypot(x, y), np.arctan2(y, x)
        u = r * (kappa + 1) * np.cos(t) - 2 / r**3 * np.cos(3 * t)
        u += 2 / r * ((1 + kappa) * np.cos(t) + np.cos(3 * t))
        v = r * (kappa - 3) * np.sin(t) - 2 / r**3 * np.sin(3 * t)
        v += 2 / r * ((1 - kappa) * np.sin(t) + np.sin(3 * t))
        return np.stack([u, v], axis=-1) / (8 * G)

    def stress(x: Array, y: Array) -> Array:
        r, t = np.hypot(x, y), np.arctan2(y, x)
        q = 1 / r**2
        radial = (1 - q) / 2 + (1 - 4 * q + 3 * q**2) / 2 * np.cos(2 * t)
        hoop = (1 + q) / 2 - (1 + 3 * q**2) / 2 * np.cos(2 * t)
        shear = -(1 + 2 * q - 3 * q**2) / 2 * np.sin(2 * t)
        return _to_cartesian(radial, hoop, shear, t)

    return Exact(displacement, stress)


def lame(
    youngs_modulus: float, poissons_ratio: float, inner: float, outer: float, pressure: float
) -> Exact:
    """Thick ring under internal pressure, Timoshenko & Goodier, art. 28 (Lame)."""
    E, nu = youngs_modulus, poissons_ratio
    c = pressure * inner**2 / (outer**2 - inner**2)

    def displacement(x: Array, y: Array) -> Array:
        r = np.hypot(x, y)
        radial = c / E * ((1 - nu) * r + (1 + nu) * outer**2 / r)
        return np.stack([radial * x / r, radial * y / r], axis=-1)

    def stress(x: Array, y: Array) -> Array:
        r, t = np.hypot(x, y), np.arctan2(y, x)
        q = outer**2 / r**2
        return _to_cartesian(c * (1 - q), c * (1 + q), 0 * r, t)

    return Exact(displacement, stress)


def cantilever(
    youngs_modulus: float, poissons_ratio: float, length: float, half_height: float, force: float
) -> Exact:
    """End-loaded strip of unit thickness, Timoshenko & Goodier, art. 21.

    x from the loaded end, y from the middle line downwards (both turned here: x from the fixed
    end, y upwards, so that `force` pulls the free end up by parabolic shear).
    """
    E, nu, L, c, P = youngs_modulus, poissons_ratio, length, half_height, force
    inertia = 2 * c**3 / 3

    def displacement(x: Array, y: Array) -> Array:
        u = -P * y / (6 * E * inertia) * ((6 * L - 3 * x) * x + (2 + nu) * (y**2 - c**2))
        v = (
            P
            / (6 * E * inertia)
            * (3 * nu * y**2 * (L - x) + (4 + 5 * nu) * c**2 * x + (3 * L - x) * x**2)
        )
        return np.stack([u, v], axis=-1)

    def stress(x: Array, y: Array) -> Array:
        bending = -P * (L - x) * y / inertia
        shear = P / (2 * inertia) * (c**2 - y**2)
        return np.stack([bending, 0 * x, shear], axis=-1)

    return Exact(displacement, stress)


def waves(youngs_modulus: float, poissons_ratio: float) -> Exact:
    """Manufactured: u = sin(a x) cos(b y), v = cos(c x) sin(d y); the body force balances it."""
    E, nu = youngs_modulus, poissons_ratio
    a, b, c, d = 2.0, 1.5, 1.0, 2.5
    law, G = E / (1 - nu**2), E / (2 * (1 + nu))

    def displacement(x: Array, y: Array) -> Array:
        return np.stack([np.sin(a * x) * np.cos(b * y), np.cos(c * x) * np.sin(d * y)], axis=-1)

    def stress(x: Array, y: Array) -> Array:
        u_x = a * np.cos(a * x) * np.cos(b * y)
        v_y = d * np.cos(c * x) * np.cos(d * y)
        gamma = -b * np.sin(a * x) * np.sin(b * y) - c * np.sin(c * x) * np.sin(d * y)
        return np.stack([law * (u_x + nu * v_y), law * (v_y + nu * u_x), G * gamma], axis=-1)

    def body_force(x: Array, y: Array) -> Array:
        u, v = np.sin(a * x) * np.cos(b * y), np.cos(c * x) * np.sin(d * y)
        v_xy = -c * d * np.sin(c * x) * np.cos(d * y)
        u_xy = -a * b * np.cos(a * x) * np.sin(b * y)
        in_x = law * (-(a**2) * u + nu * v_xy) + G * (-(b**2) * u + v_xy)
        in_y = law * (-(d**2) * v + nu * u_xy) + G * (-(c**2) * v + u_xy)
        return -np.stack([in_x, in_y], axis=-1)

    return Exact(displacement, stress, body_force)


def _to_cartesian(radial: Array, hoop: Array, shear: Array, t: Array) -> Array:
    cos, sin = np.cos(t), np.sin(t)
    xx = radial * cos**2 + hoop * sin**2 - 2 * shear * sin * cos
    yy = radial * sin**2 + hoop * cos**2 + 2 * shear * sin * cos
    xy = (radial - hoop) * sin * cos + shear * (cos**2 - sin**2)
    return np.stack([xx, yy, xy], axis=-1)

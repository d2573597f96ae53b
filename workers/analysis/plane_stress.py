"""The plane-stress law: strain to stress and back, and the measures of a stress state.

A thin plate loaded in its own plane carries no stress on its faces: sigma_z = tau_xz = tau_yz = 0.
Stress and strain are ordered (xx, yy, xy), shear strain is the engineering one, tension positive.
Everything works on arrays of any shape whose last axis holds the three components.
"""

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.floating[Any]]


def constitutive(youngs_modulus: ArrayLike, poissons_ratio: ArrayLike) -> NDArray[np.float64]:
    """Plane-stress matrix D of an isotropic material, sigma = D epsilon.

    Parameters
    ----------
    youngs_modulus : (...) array      E > 0 [F/L^2]
    poissons_ratio : (...) array      -1 < nu < 1; an isotropic solid has nu <= 0.5

    Returns
    -------
    (..., 3, 3) array   [F/L^2]

    References
    ----------
    Timoshenko & Goodier, *Theory of Elasticity*, 3rd edition, art. 16 (Hooke's law with
    sigma_z = 0), solved for the stresses.
    """
    E, nu = np.broadcast_arrays(
        np.asarray(youngs_modulus, float), np.asarray(poissons_ratio, float)
    )
    D = np.zeros((*E.shape, 3, 3))
    D[..., 0, 0] = D[..., 1, 1] = E / (1.0 - nu**2)
    D[..., 0, 1] = D[..., 1, 0] = nu * E / (1.0 - nu**2)
    D[..., 2, 2] = E / (2.0 * (1.0 + nu))  # the shear modulus
    return D


def von_mises(stress: Array) -> Array:
    """Equivalent stress of the distortion energy, (..., 3) -> (...) [F/L^2].

    Written as a sum of squares, so that rounding cannot make the radicand negative:
    sx^2 + sy^2 - sx sy + 3 txy^2 = (sx + sy)^2 / 4 + 3 (sx - sy)^2 / 4 + 3 txy^2.
    """
    sx, sy, txy = stress[..., 0], stress[..., 1], stress[..., 2]
    mean, half_difference = 0.5 * (sx + sy), 0.5 * (sx - sy)
    return np.sqrt(mean**2 + 3.0 * (half_difference**2 + txy**2))


def principal(stress: Array) -> tuple[Array, Array]:
    """In-plane principal stresses, algebraically larger and smaller, (..., 3) -> two (...)."""
    mean = 0.5 * (stress[..., 0] + stress[..., 1])
    radius = _mohr_radius(stress)
    return mean + radius, mean - radius


def shear_max(stress: Array) -> Array:
    """Largest shear stress on any plane, out-of-plane ones included, (..., 3) -> (...) [F/L^2].

    Half the range of the three principal stresses, the third of which is sigma_z = 0.
    """
    largest, smallest = principal(stress)
    return 0.5 * (np.maximum(largest, 0.0) - np.minimum(smallest, 0.0))


def thickness_strain(
    stress: Array,
    youngs_modulus: ArrayLike,
    poissons_ratio: ArrayLike,
    thermal_expansion: ArrayLike = 0.0,
    temperature_change: ArrayLike = 0.0,
) -> Array:
    """Strain through the thickness, -nu (sx + sy) / E + alpha dT, (..., 3) -> (...)."""
    sum_of_normals = stress[..., 0] + stress[..., 1]
    elastic = -np.asarray(poissons_ratio) * sum_of_normals / np.asarray(youngs_modulus)
    return elastic + np.asarray(thermal_expansion) * np.asarray(temperature_change)


def thermal_strain(thermal_expansion: ArrayLike, temperature_change: ArrayLike) -> Array:
    """Free strain of a temperature change, (...) -> (..., 3): alpha dT (1, 1, 0)."""
    free = np.asarray(thermal_expansion) * np.asarray(temperature_change)
    return np.stack([free, free, np.zeros_like(free)], axis=-1)


def _mohr_radius(stress: Array) -> Array:
    return np.hypot(0.5 * (stress[..., 0] - stress[..., 1]), stress[..., 2])

"""Structural hot-spot stress at a weld toe: surface stress extrapolated from two points before it.

The stress at the toe itself is singular and tells nothing but the mesh; what the structure does
there is read off further away, where the notch of the weld is no longer felt.

References
----------
Hobbacher, *Recommendations for Fatigue Design of Welded Joints and Components* (International
Institute of Welding): linear extrapolation from 0.4 t and 1.0 t, sigma_hs = 1.67 sigma(0.4 t) -
0.67 sigma(1.0 t), for toes on the surface of a plate ("type a"), elements not longer than 0.4 t
(from memory). The factors are 5/3 and 2/3 in print.
"""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.job import HotSpot

Array = NDArray[np.floating[Any]]

DISTANCES = (0.4, 1.0)  # of the reference points from the toe, in thicknesses
FACTORS = (1.67, -0.67)


def thickness_at(spot: HotSpot, plate_thickness: float) -> float:
    """The thickness t that the distances of a hot spot are counted in [L]."""
    return plate_thickness if spot.thickness is None else spot.thickness


def unit_direction(spot: HotSpot) -> NDArray[np.float64]:
    """From the toe into the plate, of length one, (2,)."""
    direction = np.array(spot.direction, float)
    direction /= np.abs(direction).max()  # no square overflows
    return np.asarray(direction / np.linalg.norm(direction))


def reference_points(spot: HotSpot, plate_thickness: float) -> NDArray[np.float64]:
    """Where the stress is read, the nearer point first, (2, 2) [L]."""
    distance = thickness_at(spot, plate_thickness) * np.array(DISTANCES)
    return np.array(spot.at, float) + distance[:, None] * unit_direction(spot)


def stress_along(stress: Array, direction: Array) -> Array:
    """Normal stress in a direction, (..., 3), (2,) -> (...) [F/L^2]."""
    x, y = direction
    return stress @ np.array([x * x, y * y, 2 * x * y])


def extrapolate(along: Array) -> Array:
    """Stress at the toe from the stress at the reference points, (2, ...) -> (...) [F/L^2]."""
    return FACTORS[0] * along[0] + FACTORS[1] * along[1]

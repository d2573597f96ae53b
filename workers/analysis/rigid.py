"""Rigid motions of one part of the plate: rows of constraints on them, and their names.

A motion is (a, b, c): the displacement of the part's centre, and its rotation times the part's
reach, so that all three are lengths.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# Rows weaker than this part of the strongest hold nothing: two pins a millionth of the part's
# size apart do not stop it from turning.
WEAK = 1e-6


class Part(NamedTuple):
    """A connected part: how many nodes it has, their mean position, and its half size [L]."""

    nodes: int
    centre: Array
    reach: float


def rigid_rows(points: Array, directions: Array, part: Part) -> Array:
    """Displacement of points (r, 2) along unit directions (r, 2), by motion of the part, (r, 3)."""
    arm = (points - part.centre) / part.reach
    turning = arm[:, 0] * directions[:, 1] - arm[:, 1] * directions[:, 0]
    return np.column_stack((directions, turning))


def null_space(rows: Array) -> Array:
    """Motions that no row (r, k) resists, (k, free), orthonormal columns."""
    values, vectors = np.linalg.eigh(rows.T @ rows)
    # The eigenvalues are squares of what a row resists.
    return vectors[:, values <= WEAK**2 * max(values[-1], WEAK)]


def name_motions(free: Array, part: Part) -> list[str]:
    """Words for a null space (3, k): translations first, then what rotation there is."""
    if free.shape[1] == 3:
        return ["has no support at all"]
    shifts = _translations(free)
    names = [f"can move {_direction(shift)}" for shift in shifts.T]
    if free.shape[1] > shifts.shape[1]:
        # The free motion with the most rotation; of many centres the nearest to the part's own.
        a, b, c = free @ free[2]
        x, y = part.centre + part.reach * np.array([-b, a]) / c
        tiny = 1e-9 * part.reach
        names.append(f"can rotate about ({_tidy(x, tiny)}, {_tidy(y, tiny)})")
    return names


def _translations(free: Array) -> Array:
    """Those motions of a null space (3, k) that have no rotation, (2, t)."""
    if not free.shape[1]:
        return np.empty((2, 0))
    _, sizes, combined = np.linalg.svd(free[2:])
    turning = int(sizes[0] > WEAK)
    return (free @ combined[turning:].T)[:2]


def _direction(shift: Array) -> str:
    x, y = shift / np.linalg.norm(shift)
    if abs(y) < WEAK:
        return "in x"
    if abs(x) < WEAK:
        return "in y"
    x, y = (x, y) if x > 0 else (-x, -y)
    return f"along ({_tidy(x, WEAK)}, {_tidy(y, WEAK)})"


def at(point: Array) -> str:
    return f"({point[0]:.6g}, {point[1]:.6g})"


def _tidy(value: float, tiny: float) -> str:
    return f"{0.0 if abs(value) < tiny else value:.4g}"

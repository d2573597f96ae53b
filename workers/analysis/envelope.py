"""The envelope: at every field point the worst of all states, and which state that is."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# +1: the largest value is the worst; -1: the smallest.
WORST: Mapping[str, int] = {
    "von_mises": 1,
    "principal_max": 1,
    "principal_min": -1,
    "shear_max": 1,
    "displacement": 1,
}
STATE = ".state"  # behind the name of a measure, where arrays have names
POINTS_AT_ONCE = 1024  # what is formed on the way stays in the cache


def measures(displacement: Array, stress: Array) -> dict[str, Array]:
    """What is compared between states, at the field points, (P, k) each.

    Parameters
    ----------
    displacement : (P, 2, k) [L]; stress : (P, 3, k) [F/L^2]

    Returns
    -------
    The keys of `WORST`; `displacement` is the size of the vector.
    """
    found = {name: np.empty((len(stress), stress.shape[2])) for name in WORST}
    for start in range(0, len(stress), POINTS_AT_ONCE):
        part = slice(start, start + POINTS_AT_ONCE)
        for name, values in _measures(displacement[part], stress[part]).items():
            found[name][part] = values
    return found


def _measures(displacement: Array, stress: Array) -> dict[str, Array]:
    """Mohr's circle once for all measures; `plane_stress` has them one by one."""
    sx, sy, txy = (stress[:, i] for i in range(3))
    centre, half = (sx + sy) / 2, (sx - sy) / 2
    radius_squared = half**2 + txy**2
    radius = np.sqrt(radius_squared)
    largest, smallest = centre + radius, centre - radius
    u, v = displacement[:, 0], displacement[:, 1]
    return {
        "von_mises": np.sqrt(centre**2 + 3 * radius_squared),
        "principal_max": largest,
        "principal_min": smallest,
        "shear_max": (np.maximum(largest, 0) - np.minimum(smallest, 0)) / 2,
        "displacement": np.sqrt(u**2 + v**2),
    }


@dataclass(frozen=True, eq=False)
class Envelope:
    """Worst values so far at P points; grows as states stream by.

    value : measure -> (P,)   [F/L^2] or [L]
    state : measure -> (P,)   column of the governing state, -1 before any
    """

    value: dict[str, Array] = field(default_factory=dict)
    state: dict[str, NDArray[np.int32]] = field(default_factory=dict)

    def arrays(self) -> dict[str, Any]:
        """All of it by name, for whoever keeps it."""
        return {**self.value, **{name + STATE: state for name, state in self.state.items()}}

    @classmethod
    def from_arrays(cls, arrays: Mapping[str, NDArray]) -> "Envelope":
        return cls({n: arrays[n] for n in WORST}, {n: arrays[n + STATE] for n in WORST})

    def merge(self, other: "Envelope", first: int) -> None:
        """Take in another envelope, whose states are counted from `first`."""
        for name, sign in WORST.items():
            state = (other.state[name] + first).astype(np.int32)
            if name not in self.value:
                self.value[name], self.state[name] = other.value[name].copy(), state
                continue
            worse = sign * other.value[name] > sign * self.value[name]
            self.value[name][worse] = other.value[name][worse]
            self.state[name][worse] = state[worse]

    def include(self, columns: range, values: Mapping[str, NDArray]) -> None:
        """Take in the measures (P, k) of some states."""
        for name, sign in WORST.items():
            worst = values[name].argmax(axis=1) if sign > 0 else values[name].argmin(axis=1)
            value = np.take_along_axis(values[name], worst[:, None], axis=1)[:, 0]
            state = (worst + columns.start).astype(np.int32)
            if name not in self.value:
                self.value[name], self.state[name] = value.copy(), state
                continue
            worse = sign * value > sign * self.value[name]
            self.value[name][worse] = value[worse]
            self.state[name][worse] = state[worse]

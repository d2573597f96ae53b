"""The envelope: at every field point the worst of all states, and which state that is."""

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from workers.analysis.plane_stress import principal, shear_max, von_mises

Array = NDArray[np.float64]

# +1: the largest value is the worst; -1: the smallest.
WORST: Mapping[str, int] = {
    "von_mises": 1,
    "principal_max": 1,
    "principal_min": -1,
    "shear_max": 1,
    "displacement": 1,
}


def measures(displacement: Array, stress: Array) -> dict[str, NDArray]:
    """What is compared between states, at the field points, (P, k) each.

    Parameters
    ----------
    displacement : (P, 2, k) [L]; stress : (P, 3, k) [F/L^2]

    Returns
    -------
    The keys of `WORST`; `displacement` is the size of the vector.
    """
    components = stress.transpose(0, 2, 1)
    largest, smallest = principal(components)
    return {
        "von_mises": von_mises(components),
        "principal_max": largest,
        "principal_min": smallest,
        "shear_max": shear_max(components),
        "displacement": np.hypot(displacement[:, 0], displacement[:, 1]),
    }


@dataclass(frozen=True, eq=False)
class Envelope:
    """Worst values so far at P points; grows as states stream by.

    value : measure -> (P,)   [F/L^2] or [L]
    state : measure -> (P,)   column of the governing state, -1 before any
    """

    value: dict[str, Array] = field(default_factory=dict)
    state: dict[str, NDArray[np.int32]] = field(default_factory=dict)

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

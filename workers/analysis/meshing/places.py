"""How a place is written in a message."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray


def at(place: Sequence[float] | NDArray[np.float64]) -> str:
    return f"({place[0]:.6g}, {place[1]:.6g})"

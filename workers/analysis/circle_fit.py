"""The circle through points that lie on one, or nearly."""

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def fit_circle(points: Array) -> tuple[Array, float]:
    """Centre and radius of the circle through points (k, 2), by linear least squares [L].

    References
    ----------
    Kasa, "A circle fitting procedure and its error analysis", IEEE Trans. Instrum. Meas. 25
    (1976).
    """
    middle = points.mean(axis=0)
    p = points - middle
    size = np.abs(p).max()
    p = p / size
    A = np.column_stack([p, np.ones(len(p))])
    solution, _, rank, _ = np.linalg.lstsq(A, (p**2).sum(axis=1), rcond=1e-9)
    if rank < 3:
        return middle, np.inf
    centre = solution[:2] / 2
    radius = np.sqrt(solution[2] + centre @ centre)
    return middle + size * centre, float(size * radius)

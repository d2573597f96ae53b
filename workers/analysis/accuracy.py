"""How good a solution is: residual, backward error, and how near the plate is to a mechanism."""

from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import sparray

from workers.analysis.solver import Factor

Array = NDArray[np.float64]


def relative_residual(residual: Array, load: Array) -> Array:
    """Norm of what is out of balance over the norm of the load, by column; 0 without a load."""
    out, norm = (np.sqrt(np.einsum("ij,ij->j", a, a)) for a in (residual, load))
    return np.divide(out, norm, out=np.zeros_like(out), where=norm > 0)


def backward_error(matrix: sparray, solution: Array, load: Array, residual: Array) -> Array:
    """Largest relative change of matrix and load entries that explains the residual, by column.

    About 1e-16 whatever the condition of the matrix, if the factor is a good one: it tells a
    failed solution from a slender plate whose displacements lose digits by their nature.

    References
    ----------
    Arioli, Demmel & Duff, "Solving sparse linear systems with sparse backward error", SIAM J.
    Matrix Anal. Appl. 10 (1989), with their rule for rows whose terms are all tiny.
    """
    size = _size(matrix)
    terms = size @ np.abs(solution) + np.abs(load)
    row_norms = (size @ np.ones(matrix.shape[0]))[:, None]
    largest = np.abs(solution).max(axis=0)
    tiny = 1000 * matrix.shape[0] * np.finfo(float).eps * (row_norms * largest + np.abs(load))
    scale = np.where(terms > tiny, terms, terms + row_norms * largest)
    ratio = np.divide(np.abs(residual), scale, out=np.zeros_like(terms), where=scale > 0)
    return ratio.max(axis=0)


def softness(matrix: sparray, motion: Array) -> float:
    """Energy of a motion (n,) in the matrix scaled to a unit diagonal, over the largest there is.

    At least the reciprocal condition.
    """
    scale = 1.0 / np.sqrt(matrix.diagonal())
    energy = float(motion @ (matrix @ motion))
    return energy / float(((motion / scale) ** 2).sum()) / _largest(matrix, scale)


def _largest(matrix: sparray, scale: Array) -> float:
    """Bound of the largest eigenvalue of the scaled matrix, by row sums."""
    return float((scale * (_size(matrix) @ scale)).max())


def _size(matrix: Any) -> Any:
    """All entries positive; `abs(matrix)` would first sort them, which takes longer by far."""
    return type(matrix)((np.abs(matrix.data), matrix.indices, matrix.indptr), shape=matrix.shape)


def weakest_motion(matrix: sparray, factor: Factor, steps: int = 2) -> tuple[float, Array]:
    """Reciprocal condition of the matrix scaled to a unit diagonal, and the motion behind it.

    A few steps of inverse iteration; the Rayleigh quotient comes down to the smallest eigenvalue
    from above, a bound by row sums stands for the largest.

    Returns
    -------
    reciprocal condition : order of magnitude; below about 1e-15, negative or nan the matrix is
        singular in all but name
    motion : (n,) array   displacements of least energy, largest entry one

    References
    ----------
    Wilkinson, *The Algebraic Eigenvalue Problem*, ch. 9 (inverse iteration).
    """
    scale = 1.0 / np.sqrt(matrix.diagonal())
    largest = _largest(matrix, scale)
    v = np.random.default_rng(0).standard_normal(matrix.shape[0])  # no motion is orthogonal to it
    smallest = largest
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):  # a pivot of zero
        for _ in range(steps):
            v /= np.linalg.norm(v)
            w = factor.solve((v / scale)[:, None])[:, 0] / scale
            smallest = float((v @ v) / (v @ w))
            v = w
        motion = v * scale
        return smallest / largest, motion / np.abs(motion).max()

"""Direct solution of the symmetric system: factorise once, solve for many right-hand sides.

One interface for every solver, so that the rest of the analysis does not know which one runs. The
matrix comes in elimination order (`ordering.py`), held dofs decoupled (`constraints.py`).
"""

import importlib
from collections.abc import Callable, Mapping
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import bsr_array, csc_array, csr_array
from scipy.sparse.linalg import splu

from workers.errors import AnalysisError, Fault

Array = NDArray[np.float64]


class SingularMatrixError(AnalysisError):
    """The matrix has no Cholesky factor: something is free to move, or a stiffness is negative."""

    def __init__(self, message: str) -> None:
        super().__init__([Fault("/supports", message)])


class Factor(Protocol):
    """A factorised matrix.

    name : of the solver, as reported in the results.
    entries : stored numbers of the factor.
    """

    name: str
    entries: int

    def solve(self, block: Array) -> Array:
        """Solution (n, k) for the right-hand sides (n, k)."""


class SuperLUFactor:
    """SciPy's SuperLU in symmetric mode: no pivoting off the diagonal, order kept as it comes.

    References
    ----------
    Li, "An overview of SuperLU", ACM Trans. Math. Softw. 31 (2005).
    """

    name = "SuperLU"

    def __init__(self, matrix: bsr_array) -> None:
        rows = matrix.tocsr()
        columns = csc_array((rows.data, rows.indices, rows.indptr), shape=rows.shape)  # symmetric
        # panel_size and relax stay at their defaults: other values have crashed at solve time.
        try:
            self._lu = splu(
                columns,
                permc_spec="NATURAL",
                diag_pivot_thresh=0.0,
                options={"SymmetricMode": True},
            )
        except RuntimeError as error:
            raise SingularMatrixError(f"the stiffness matrix is singular ({error})") from error
        self.entries = int(self._lu.nnz)

    def solve(self, block: Array) -> Array:
        return np.ascontiguousarray(self._lu.solve(np.asfortranarray(block)))


class PardisoFactor:
    """MKL PARDISO for positive definite matrices, through the optional package `pypardiso`.

    Raises
    ------
    ModuleNotFoundError   `fishplate[mkl]` is not installed.
    """

    name = "PARDISO"

    def __init__(self, matrix: bsr_array) -> None:
        pypardiso = importlib.import_module("pypardiso")
        rows = matrix.tocsr()
        upper = rows.indices >= np.repeat(np.arange(rows.shape[0]), np.diff(rows.indptr))
        counts = np.add.reduceat(upper, rows.indptr[:-1])
        indptr = np.concatenate(([0], np.cumsum(counts))).astype(np.int32)
        self._matrix = csr_array((rows.data[upper], rows.indices[upper], indptr), shape=rows.shape)
        self._solver = pypardiso.PyPardisoSolver(mtype=2)
        try:
            self._solver.factorize(self._matrix)
        except pypardiso.pardiso_wrapper.PyPardisoError as error:
            raise SingularMatrixError(f"the stiffness matrix is singular ({error})") from error
        self.entries = int(self._solver.get_iparm(18))

    def solve(self, block: Array) -> Array:
        return np.ascontiguousarray(self._solver.solve(self._matrix, np.asfortranarray(block)))


METHODS: Mapping[str, Callable[[bsr_array], Factor]] = {
    "superlu": SuperLUFactor,
    "pardiso": PardisoFactor,
}


def factorise(matrix: bsr_array, method: str = "superlu") -> Factor:
    """Factorise a symmetric positive definite matrix of 2x2 node blocks.

    Raises
    ------
    SingularMatrixError   there is no factor: a mechanism.
    LookupError           there is no such method.
    """
    diagonal = matrix.diagonal()
    if not (diagonal > 0).all():
        row = int(np.argmin(diagonal > 0))
        raise SingularMatrixError(f"row {row} of the stiffness matrix has no stiffness")
    if method not in METHODS:
        raise LookupError(f"no solver {method!r}; there are {', '.join(sorted(METHODS))}")
    return METHODS[method](matrix)


# --- how good a solution is --------------------------------------------------------------------


def relative_residual(residual: Array, load: Array) -> Array:
    """Norm of what is out of balance over the norm of the load, by column; 0 without a load."""
    out, norm = np.linalg.norm(residual, axis=0), np.linalg.norm(load, axis=0)
    return np.divide(out, norm, out=np.zeros_like(out), where=norm > 0)


def backward_error(matrix: bsr_array, solution: Array, load: Array, residual: Array) -> Array:
    """Largest relative change of matrix and load entries that explains the residual, by column.

    About 1e-16 whatever the condition of the matrix, if the factor is a good one: it tells a
    failed solution from a slender plate whose displacements lose digits by their nature.

    References
    ----------
    Arioli, Demmel & Duff, "Solving sparse linear systems with sparse backward error", SIAM J.
    Matrix Anal. Appl. 10 (1989), with their rule for rows whose terms are all tiny.
    """
    size = bsr_array((np.abs(matrix.data), matrix.indices, matrix.indptr), shape=matrix.shape)
    terms = size @ np.abs(solution) + np.abs(load)
    row_norms = (size @ np.ones(matrix.shape[0]))[:, None]
    largest = np.abs(solution).max(axis=0)
    tiny = 1000 * matrix.shape[0] * np.finfo(float).eps * (row_norms * largest + np.abs(load))
    scale = np.where(terms > tiny, terms, terms + row_norms * largest)
    ratio = np.divide(np.abs(residual), scale, out=np.zeros_like(terms), where=scale > 0)
    return ratio.max(axis=0)


def weakest_motion(matrix: bsr_array, factor: Factor, steps: int = 3) -> tuple[float, Array]:
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
    row_sums = (
        bsr_array((np.abs(matrix.data), matrix.indices, matrix.indptr), shape=matrix.shape) @ scale
    )
    largest = float((scale * row_sums).max())
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

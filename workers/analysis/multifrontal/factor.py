"""A factorised matrix, ready for right-hand sides."""

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.linalg.blas import dtrsm, dtrsv

from workers.analysis.multifrontal.layout import lay_out
from workers.analysis.multifrontal.numeric import eliminate
from workers.analysis.multifrontal.symbolic import Fronts

Array = NDArray[np.float64]


class MultifrontalFactor:
    """Cholesky factor L L^T of a symmetric positive definite matrix of 2x2 blocks.

    Raises
    ------
    NotPositiveDefiniteError   names the dof at which the factorisation ends.
    """

    name = "multifrontal Cholesky"

    def __init__(self, fronts: Fronts, indptr: NDArray, indices: NDArray, blocks: Array) -> None:
        layout = lay_out(fronts, indptr, indices)
        factor = eliminate(layout, blocks)
        first = (2 * fronts.first).tolist()
        borders = np.split(layout.border_dofs, layout.border_first[1:-1])
        own = [slice(start, end) for start, end in pairwise(first)]
        self._fronts = list(zip(own, factor.diagonal, factor.below, borders, strict=True))
        self.entries = fronts.entries

    def solve(self, block: Array) -> Array:
        """Solution (n, k) for the right-hand sides (n, k)."""
        x = np.array(block, dtype=np.float64, order="C")
        if x.shape[1] == 1:
            self._solve_one(x[:, 0])
        elif x.shape[1]:
            self._solve_many(x)
        return x

    def _solve_one(self, x: Array) -> None:
        for own, L, below, border in self._fronts:
            dtrsv(L, x[own], lower=1, overwrite_x=1)
            if below is not None:
                x[border] -= below @ x[own]
        for own, L, below, border in reversed(self._fronts):
            if below is not None:
                x[own] -= x[border] @ below
            dtrsv(L, x[own], lower=1, trans=1, overwrite_x=1)

    def _solve_many(self, x: Array) -> None:
        """Rows of x are contiguous, so its transpose is column-major and is solved in place."""
        for own, L, below, border in self._fronts:
            dtrsm(1.0, L, x[own].T, side=1, lower=1, trans_a=1, overwrite_b=1)
            if below is not None:
                x[border] -= below @ x[own]
        for own, L, below, border in reversed(self._fronts):
            if below is not None:
                x[own] -= below.T @ x[border]
            dtrsm(1.0, L, x[own].T, side=1, lower=1, overwrite_b=1)

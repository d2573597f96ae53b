"""Solution by iteration, for plates whose factor does not fit the memory: conjugate gradients with
algebraic multigrid.

Smoothed aggregation with the rigid motions as what the coarse levels must keep, on 2x2 node blocks.
Takes half the memory of the factor or less, and a hundred times the time for each load case.

References
----------
Vanek, Mandel & Brezina, "Algebraic multigrid by smoothed aggregation for second and fourth order
elliptic problems", Computing 56 (1996).
"""

import importlib

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import bsr_array, bsr_matrix
from scipy.sparse.linalg import LinearOperator, cg, norm

from elements.errors import FishplateError
from workers.analysis.effort import ENERGY_ERROR, TOLERANCE, Effort

Array = NDArray[np.float64]

# A slender plate moves so far that rounding its displacements leaves a larger residual than that:
# part of the norms of matrix and solution together.
ROUNDING = 1e-14
MOST_ITERATIONS = 500  # of one run; all four elements need 12 to 30 on compact plates
RUNS = 4  # each goes on with what the one before has left over
# Couplings weaker than this part of the diagonals do not join nodes. Measured on all four elements:
# 0.08 needs a fifth to a half fewer iterations than 0 and hardly more memory.
STRENGTH = 0.08
MOST_COARSE = 300  # unknowns of the coarsest level, which is solved exactly


class NotConvergedError(FishplateError, ArithmeticError):
    """The iteration did not reach its tolerance.

    solution : (n,) what it had at the end; near a mechanism mostly that motion.
    """

    def __init__(self, residual: float, energy_error: float, solution: Array) -> None:
        self.solution = solution
        super().__init__(
            f"after {RUNS} runs of at most {MOST_ITERATIONS} conjugate-gradient iterations the "
            f"residual is {residual:.1e} of the load (at most {TOLERANCE:g} is allowed) and the "
            f"error in the energy norm about {energy_error:.1e} (at most {ENERGY_ERROR:g})"
        )


class ConjugateGradients:
    """Conjugate gradients, preconditioned by one V-cycle.

    Parameters
    ----------
    matrix : of 2x2 node blocks
    motions : (n, 3)   rigid motions of the plate, zero at held dofs; None for the shifts alone
    """

    name = "conjugate gradients with algebraic multigrid"

    def __init__(self, matrix: bsr_array, motions: Array | None = None) -> None:
        pyamg = importlib.import_module("pyamg")  # half a second that other jobs need not spend
        blocks = (matrix.data, matrix.indices, matrix.indptr)
        smoother = ("block_gauss_seidel", {"sweep": "symmetric"})
        levels = pyamg.smoothed_aggregation_solver(
            bsr_matrix(blocks, shape=matrix.shape, blocksize=(2, 2)),
            B=motions,
            symmetry="symmetric",
            strength=("symmetric", {"theta": STRENGTH}),
            improve_candidates=None,
            presmoother=smoother,
            postsmoother=smoother,
            max_coarse=MOST_COARSE,
        )
        self.entries = sum(level.A.nnz for level in levels.levels)
        self.effort = Effort()
        self._matrix = matrix.tocsr()
        self._norm = float(norm(self._matrix, np.inf))
        self._cycle: LinearOperator = levels.aspreconditioner(cycle="V")

    def solve(self, block: Array) -> Array:
        """Solution (n, k) for the right-hand sides (n, k).

        Raises
        ------
        NotConvergedError   for one of them the iteration ends above its tolerances.
        """
        solution = np.zeros_like(block)
        for j in np.flatnonzero(block.any(axis=0)):
            solution[:, j] = self._solve_one(np.ascontiguousarray(block[:, j]))
        return solution

    def _solve_one(self, load: Array) -> Array:
        solution, left = np.zeros_like(load), load
        iterations = 0

        def count(_iterate: Array) -> None:
            nonlocal iterations
            iterations += 1

        size = float(np.linalg.norm(load))
        for _ in range(RUNS):
            # Later runs are short ones: they end relative to what they begin with.
            goal = TOLERANCE if left is load else np.sqrt(TOLERANCE)
            step, _ = cg(
                self._matrix, left, rtol=goal, maxiter=MOST_ITERATIONS, M=self._cycle,
                callback=count,
            )  # fmt: skip
            solution += step
            left = load - self._matrix @ solution
            residual = float(np.linalg.norm(left)) / size
            error = self._energy_error(solution, load, left)
            rounding = ROUNDING * self._norm * float(np.linalg.norm(solution)) / size
            if residual <= max(TOLERANCE, rounding) and error <= ENERGY_ERROR:
                self.effort = self.effort.worse(Effort(iterations, error))
                return solution
        raise NotConvergedError(residual, error, solution)

    def _energy_error(self, solution: Array, load: Array, left: Array) -> float:
        """Error over solution in the energy norm; the V-cycle stands for the inverse in it."""
        energy = float(solution @ load)
        error = float(left @ (self._cycle @ left))
        return float(np.sqrt(max(error, 0.0) / energy)) if energy > 0 else np.inf


def rigid_motions(points: Array) -> Array:
    """The three rigid motions of nodes (N, 2), as (N, 2, 3)."""
    arm = points - points.mean(axis=0)
    arm /= np.abs(arm).max()
    motions = np.zeros((len(points), 2, 3))
    motions[:, 0, 0] = motions[:, 1, 1] = 1.0
    motions[:, 0, 2], motions[:, 1, 2] = -arm[:, 1], arm[:, 0]
    return motions

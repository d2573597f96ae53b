"""Solution of the symmetric system: factorise once, solve for many right-hand sides.

One interface for every solver, so that the rest of the analysis does not know which one runs: a
plan from the mesh alone, then a factor of the matrix, which comes in the plan's order with its held
dofs decoupled (`constraints.py`).
"""

import importlib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import bsr_array, csc_array, csr_array
from scipy.sparse.linalg import splu

from workers.analysis.iterative import ConjugateGradients
from workers.analysis.memory_need import direct_memory
from workers.analysis.mesh import Mesh
from workers.analysis.multifrontal.factor import MultifrontalFactor
from workers.analysis.multifrontal.numeric import NotPositiveDefiniteError
from workers.analysis.multifrontal.symbolic import Fronts, analyse
from workers.analysis.ordering import NodeOrder, order_nodes
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
        """Solution (n, k) for the right-hand sides (n, k).

        Raises
        ------
        NotConvergedError   by iteration only.
        """


class SuperLUFactor:
    """SciPy's SuperLU in symmetric mode: no pivoting off the diagonal, order kept as it comes.

    References
    ----------
    Li, "An overview of SuperLU", ACM Trans. Math. Softw. 31 (2005).
    """

    name = "SuperLU"

    def __init__(self, matrix: bsr_array | csr_array) -> None:
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


@dataclass(frozen=True, eq=False)
class Plan:
    """How a mesh will be solved: known before its matrix is.

    order : the elimination order; the matrix must be assembled in it.
    fronts : of the multifrontal factorisation; None for the libraries.
    """

    method: str
    order: NodeOrder
    fronts: Fronts | None = None

    def within(self, memory: float | None) -> "Plan":
        """This plan, or iteration in the same order where the factor would not fit [bytes]."""
        if memory is None or self.fronts is None:
            return self
        dofs = 2 * self.fronts.node_count
        if direct_memory(dofs, self.fronts.entries) <= memory:
            return self
        return Plan(ITERATIVE, self.order)

    def factorise(self, matrix: bsr_array, motions: Array | None = None) -> Factor:
        """Factorise a symmetric positive definite matrix of 2x2 node blocks.

        motions : (n, 3) rigid motions, zero at held dofs: what the coarse levels of an iteration
            keep; without them the two shifts

        Raises
        ------
        SingularMatrixError   there is no factor: a mechanism.
        """
        diagonal = matrix.diagonal()
        if not (diagonal > 0).all():
            row = int(np.argmin(diagonal > 0))
            raise SingularMatrixError(f"row {row} of the stiffness matrix has no stiffness")
        if self.method == ITERATIVE:
            return ConjugateGradients(matrix, motions)
        if self.fronts is None:
            return LIBRARIES[self.method](matrix)
        try:
            return MultifrontalFactor(self.fronts, matrix.indptr, matrix.indices, matrix.data)
        except NotPositiveDefiniteError as error:
            raise SingularMatrixError(f"the stiffness matrix is singular ({error})") from error


LIBRARIES: Mapping[str, Callable[[bsr_array], Factor]] = {
    "superlu": SuperLUFactor,
    "pardiso": PardisoFactor,
}
MULTIFRONTAL, ITERATIVE = "multifrontal", "iterative"


def plan_solution(mesh: Mesh, method: str = MULTIFRONTAL) -> Plan:
    """Order the nodes of a mesh for a method: "multifrontal", "superlu", "pardiso", "iterative".

    Raises
    ------
    LookupError   there is no such method.
    """
    if method == MULTIFRONTAL:
        analysis = analyse(mesh)
        return Plan(method, analysis.order, analysis.fronts)
    if method in LIBRARIES or method == ITERATIVE:
        return Plan(method, order_nodes(mesh))
    known = ", ".join([MULTIFRONTAL, *LIBRARIES, ITERATIVE])
    raise LookupError(f"no solver {method!r}; there are {known}")

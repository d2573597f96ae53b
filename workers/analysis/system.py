"""The system of equations of one model: built and factorised once, solved for blocks of cases.

Inside, nodes stand in elimination order and held nodes in their own axes.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import bsr_array, csr_array

from workers.analysis.accuracy import (
    backward_error,
    relative_residual,
    softness,
    weakest_motion,
)
from workers.analysis.assembly import assemble_stiffness, pair_positions
from workers.analysis.constraints import decouple, turn_matrix, turn_vectors
from workers.analysis.effort import Effort
from workers.analysis.iterative import (
    ConjugateGradients,
    NotConvergedError,
    rigid_motions,
)
from workers.analysis.mechanism import describe_motion
from workers.analysis.mesh import Mesh
from workers.analysis.model import Model
from workers.analysis.ordering import NodeOrder
from workers.analysis.solver import (
    MULTIFRONTAL,
    Factor,
    SingularMatrixError,
    SuperLUFactor,
    plan_solution,
)
from workers.analysis.stopwatch import Stopwatch
from workers.analysis.supports import Supports
from workers.errors import AnalysisError, Fault, MechanismError

Array = NDArray[np.float64]

RESIDUAL = 1e-10  # norm of the residual over that of the load, after at most one refinement
# A slender or weakly held plate moves so far that rounding its displacements alone leaves more than
# that; a backward error this small excuses it, up to the second limit (a strip of 1 to 300 leaves
# 2e-6, one of 1 to 1000 2e-4).
BACKWARD = 1e-13
EXCUSABLE = 1e-4
# Mechanisms come out below 1e-17 (all elements, 4 x 4 to 100 x 100 cells), a strip of 1 to 1000 at
# 2e-14.
SINGULAR = 1e-15
SOFT = 1e-14  # a stalled iteration stops at a motion as soft as this only if it is a mechanism
SHIFT = 1e-8  # of the diagonal: makes a mechanism solvable so that its motion can be seen


@dataclass(eq=False)
class System:
    """A factorised model.

    matrix : (2N, 2N)   elimination order, own axes, held dofs decoupled
    at_held : (2s, 2N)  rows of the stiffness (springs included) of the s held nodes, mesh order
    """

    order: NodeOrder
    supports: Supports
    matrix: csr_array
    at_held: csr_array
    factor: Factor
    reciprocal_condition: float
    refinements: int = 0

    @property
    def ordering(self) -> str:
        return self.order.name

    @property
    def effort(self) -> Effort | None:
        """What the iteration took for the load cases so far; None with a factor."""
        return self.factor.effort if isinstance(self.factor, ConjugateGradients) else None

    def begin(self) -> None:
        """Count refinements and iterations anew, for another job."""
        self.refinements = 0
        if isinstance(self.factor, ConjugateGradients):
            self.factor.effort = Effort()

    def solve(self, forces: Array, prescribed: csr_array) -> tuple[Array, Array, Array]:
        """Displacements for nodal forces and the prescribed displacements of the held nodes.

        Parameters
        ----------
        forces : (N, 2, k) array    all nodal forces, those of heating included, in elimination
            order; overwritten [F]
        prescribed : (2N, k) csr    in the mesh's order [L]

        Returns
        -------
        displacement : (N, 2, k) array   in the mesh's order [L]
        reaction : (s, 2, k) array       forces of the supports on the held nodes, K u - f [F]
        residual : (k,) array            relative

        Raises
        ------
        AnalysisError   the residual stays too large.
        """
        N, _, k = forces.shape
        position, supports = self.order.position, self.supports
        at_held = forces[position[supports.nodes]]
        if prescribed.nnz:
            forces -= self._pull(prescribed).reshape(N, 2, k)[self.order.order]
        turned = position[supports.turned]
        turn_vectors(forces, turned, supports.axes)
        forces[supports.held[self.order.order]] = 0.0
        solution, residual = self._solve_refined(forces.reshape(2 * N, k))
        solution = solution.reshape(N, 2, k)
        turn_vectors(solution, turned, supports.axes, back=True)
        displacement = solution[position]
        if prescribed.nnz:
            displacement += prescribed.toarray().reshape(N, 2, k)
        reaction = (self.at_held @ displacement.reshape(2 * N, k)).reshape(at_held.shape)
        return displacement, reaction - at_held, residual

    def _pull(self, prescribed: csr_array) -> Array:
        """Nodal forces K g of the prescribed displacements g; K is symmetric."""
        rows = (2 * self.supports.nodes[:, None] + np.arange(2)).ravel()
        return (self.at_held.T @ prescribed[rows]).toarray()

    def _solve_refined(self, right: Array) -> tuple[Array, Array]:
        """Solve; where too much is left over, solve for that, with SuperLU at last.

        An iteration has its own limits, and looks after them itself.
        """
        if isinstance(self.factor, ConjugateGradients):
            return self._iterate(self.factor, right)
        solution = self.factor.solve(right)
        left = self.matrix @ solution
        np.subtract(right, left, out=left)
        residual = relative_residual(left, right)
        for attempt in (self._refine, self._fall_back):
            poor = self._poor(solution, right, left, residual)
            if not len(poor):
                return solution, residual
            solution[:, poor] = attempt(solution[:, poor], left[:, poor])
            left[:, poor] = right[:, poor] - self.matrix @ solution[:, poor]
            residual[poor] = relative_residual(left[:, poor], right[:, poor])
        if len(poor := self._poor(solution, right, left, residual)):
            message = (
                "the equations could not be solved: the forces out of balance are "
                f"{residual[poor].max():.1e} of the load (reciprocal condition "
                f"{self.reciprocal_condition:.1e}); look for parts that are nearly free to "
                "move, and for extreme ratios of stiffness or length"
            )
            raise AnalysisError([Fault("", message)])
        return solution, residual

    def _iterate(self, factor: ConjugateGradients, right: Array) -> tuple[Array, Array]:
        try:
            solution = factor.solve(right)
        except NotConvergedError as error:
            raise _unsolved(error) from error
        return solution, relative_residual(right - self.matrix @ solution, right)

    def _refine(self, solution: Array, left: Array) -> Array:
        """One step of iterative refinement."""
        self.refinements = 1
        return solution + self.factor.solve(left)

    def _fall_back(self, solution: Array, left: Array) -> Array:
        """The library's factor in place of ours, for these and all later right-hand sides."""
        if not isinstance(self.factor, SuperLUFactor):
            self.factor = SuperLUFactor(self.matrix)
        return solution + self.factor.solve(left)

    def _poor(
        self, solution: Array, right: Array, left: Array, residual: Array
    ) -> NDArray[np.int64]:
        """Columns that are worse than the plate itself excuses.

        The backward error tells a slender plate from a failed solution.
        """
        poor = np.flatnonzero(~(residual <= RESIDUAL))
        if len(poor):
            columns = (a[:, poor] for a in (solution, right, left))
            sound = backward_error(self.matrix, *columns) <= BACKWARD
            poor = poor[~(sound & (residual[poor] <= EXCUSABLE))]
        return poor


def build_system(
    model: Model,
    supports: Supports,
    watch: Stopwatch,
    report: Callable[[str, float], None],
    method: str = MULTIFRONTAL,
    memory: float | None = None,
) -> System:
    """Order, assemble, apply the supports, factorise.

    memory : a factor that needs more is not made; conjugate gradients take its place [bytes]

    Raises
    ------
    MechanismError   something is free to move; names the motion.
    AnalysisError    the iteration does not converge.
    """
    with watch("order"):
        plan = plan_solution(model.mesh, method).within(memory)
        order = plan.order
    with watch("assemble"):
        matrix = assemble_stiffness(model, order.position)
        _add_springs(matrix, supports, order)
        at_held = _rows(matrix, supports, order)
        turn_matrix(matrix, order.position[supports.turned], supports.axes)
        decouple(matrix, supports.held[order.order])
    report("factorising", 0.0)
    with watch("factorise"):
        try:
            factor = plan.factorise(matrix, _motions(model.mesh, supports, order))
        except SingularMatrixError as error:
            raise _mechanism(model.mesh, matrix, supports, order) from error
    rows = matrix.tocsr()  # four times as fast as blocks with many right-hand sides
    with watch("condition"):
        if isinstance(factor, ConjugateGradients):
            condition = _condition_by_iteration(model.mesh, rows, factor, supports, order)
        else:
            condition, _ = weakest_motion(rows, factor)
            if not condition > SINGULAR:
                raise _mechanism(model.mesh, matrix, supports, order)
    return System(order, supports, rows, at_held, factor, condition)


def _add_springs(matrix: bsr_array, supports: Supports, order: NodeOrder) -> None:
    for spring in supports.springs:
        if len(spring.rows):
            rows, columns = order.position[spring.rows], order.position[spring.columns]
            np.add.at(matrix.data, pair_positions(matrix, rows, columns), spring.blocks)


def _rows(matrix: bsr_array, supports: Supports, order: NodeOrder) -> csr_array:
    """Rows of the held nodes, columns back in the mesh's order."""
    nodes = order.position[supports.nodes]
    starts, counts = matrix.indptr[nodes], np.diff(matrix.indptr)[nodes]
    ends = np.concatenate(([0], np.cumsum(counts)))
    chosen = np.repeat(starts - ends[:-1], counts) + np.arange(ends[-1])
    columns = order.order[matrix.indices[chosen]]
    shape = (2 * len(nodes), matrix.shape[1])
    return bsr_array((matrix.data[chosen], columns, ends), shape=shape).tocsr()


def _mechanism(
    mesh: Mesh, matrix: bsr_array, supports: Supports, order: NodeOrder
) -> MechanismError:
    """Find and name a motion that the singular matrix does not resist."""
    shifted = matrix.copy()
    rows = np.repeat(np.arange(mesh.node_count), np.diff(matrix.indptr))
    diagonal = np.flatnonzero(rows == matrix.indices)
    for axis in (0, 1):
        entries = shifted.data[diagonal, axis, axis]
        shifted.data[diagonal, axis, axis] += SHIFT * np.where(entries > 0, entries, 1.0)
    _, motion = weakest_motion(shifted, SuperLUFactor(shifted), steps=6)
    return _named(mesh, motion, supports, order)


def _named(mesh: Mesh, motion: Array, supports: Supports, order: NodeOrder) -> MechanismError:
    """A motion (2N,) in elimination order and own axes, in words."""
    vectors = motion.reshape(-1, 2, 1)
    turn_vectors(vectors, order.position[supports.turned], supports.axes, back=True)
    return MechanismError([describe_motion(mesh, vectors[order.position, :, 0])])


def _motions(mesh: Mesh, supports: Supports, order: NodeOrder) -> Array:
    """Rigid motions (2N, 3) as the matrix has them: elimination order, own axes, held dofs zero."""
    motions = rigid_motions(mesh.nodes[order.order])
    turn_vectors(motions, order.position[supports.turned], supports.axes)
    motions[supports.held[order.order]] = 0.0
    return motions.reshape(-1, 3)


def _condition_by_iteration(
    mesh: Mesh, matrix: csr_array, factor: ConjugateGradients, supports: Supports, order: NodeOrder
) -> float:
    """Reciprocal condition; an iteration that does not end mostly shows the free motion itself."""
    try:
        condition, motion = weakest_motion(matrix, factor)
    except NotConvergedError as error:
        if softness(matrix, error.solution) > SOFT:
            raise _unsolved(error) from error
        raise _named(mesh, error.solution, supports, order) from error
    if not condition > SINGULAR:
        raise _named(mesh, motion, supports, order)
    return condition


def _unsolved(error: NotConvergedError) -> AnalysisError:
    message = (
        f"the plate is too large for a factor, and the iteration did not converge: {error}; look "
        "for parts that are nearly free to move, and for extreme ratios of stiffness or length, "
        "or use a coarser mesh"
    )
    return AnalysisError([Fault("", message)])

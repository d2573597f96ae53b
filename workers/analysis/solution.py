"""The solution of all load cases: displacements, loads, the forces of the supports.

`solve` runs the stages one after another: order the nodes, assemble, factorise once, solve all
cases as blocks of right-hand sides, check the residual, collect the forces of the supports.
"""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.effort import Effort
from workers.analysis.loads.cases import Loads, resolve_loads
from workers.analysis.mesh import Mesh
from workers.analysis.model import Model, build_model
from workers.analysis.motions import free_motions
from workers.analysis.solver import MULTIFRONTAL
from workers.analysis.stopwatch import Stopwatch
from workers.analysis.supports import Supports, resolve_supports
from workers.analysis.system import System, build_system
from workers.analysis.threads import one_thread
from workers.errors import MechanismError
from workers.job import Job

Array = NDArray[np.float64]
Progress = Callable[[str, float], None]

# Bytes of one block of right-hand sides, four of which are in memory at once. At 100 000 dofs these
# are 83 cases; twice as many save a tenth of the time, half as many cost a tenth (measured).
BLOCK_BYTES = 1 << 26


@dataclass(frozen=True, eq=False)
class SupportForces:
    """What one support does to the plate.

    label : key of the support in the results.
    nodes : (k,) node numbers.
    force : (k, 2, c) force of the support on the plate at each node, springs included [F]. A
        node that several supports hold counts once: its force is split between them.
    """

    label: str
    nodes: NDArray[np.int64]
    force: Array


@dataclass(frozen=True, eq=False)
class SolverReport:
    """How the system was solved, and how well.

    residual : (c,) norm of the forces left out of balance over the norm of the load, by case.
    reciprocal_condition : estimate for the matrix scaled to a unit diagonal; near 1e-16 the plate
        is as good as free to move.
    iteration : what it took and left; None if there was a factor.
    seconds : wall time by stage.
    """

    name: str
    ordering: str
    dofs: int
    free_dofs: int
    factor_entries: int
    residual: Array
    refinements: int
    reciprocal_condition: float
    iteration: Effort | None
    seconds: Mapping[str, float]


@dataclass(frozen=True, eq=False)
class Solution:
    """All load cases of a model.

    cases : names, in the order of the last axis.
    displacement : (N, 2, c) global axes [L].
    loads : nodal forces by case, and what temperature does.
    support_forces : one for each support, in the job's order.
    temperature : for each block (m, c) temperature change [K]; None if no case has one.
    """

    model: Model
    cases: tuple[str, ...]
    displacement: Array
    loads: Loads
    support_forces: tuple[SupportForces, ...]
    temperature: tuple[Array, ...] | None
    solver: SolverReport

    @property
    def applied(self) -> Array:
        """Nodal forces of the mechanical loads, written out on demand, (N, 2, c) [F]."""
        return self.loads.applied

    def parts(self) -> Iterator[slice]:
        """Load cases in blocks whose arrays of all dofs fit BLOCK_BYTES."""
        return _parts(len(self.cases), self.model.mesh.dof_count)


@dataclass(eq=False)
class Kept:
    """A place for the factorised system of a model: whoever solves it first leaves it there, and
    further jobs of the same model on the same mesh take it.
    """

    system: System | None = None


def solve(
    job: Job,
    mesh: Mesh,
    progress: Progress | None = None,
    method: str = MULTIFRONTAL,
    kept: Kept | None = None,
    memory: float | None = None,
) -> Solution:
    """Solve all load cases of a job on its mesh.

    Parameters
    ----------
    progress : called with the stage and the fraction of it that is done
    method : "multifrontal", or "superlu" or "pardiso" for comparison, or "iterative"
    kept : takes the factorised system, or has that of a job with the same mesh, sections and
        supports but for what these prescribe
    memory : where the factor would need more, the cases are solved by iteration [bytes]

    Raises
    ------
    MeshError        a support or a load cannot act where the job puts it.
    MechanismError   the plate, or a part of it, is free to move; names the motion.
    AnalysisError    the system could not be solved reliably.
    """
    with one_thread():
        return _solve(job, mesh, progress or _silent, method, kept or Kept(), memory)


def _solve(
    job: Job, mesh: Mesh, report: Progress, method: str, kept: Kept, memory: float | None
) -> Solution:
    """With one BLAS thread: with two, many small fronts are ten to a hundred times slower."""
    watch = Stopwatch()
    report("assembling", 0.0)
    model = build_model(job, mesh)
    with watch("loads and supports"):
        supports = resolve_supports(job, mesh)
        if kept.system is None and (motions := free_motions(mesh, *supports.directions)):
            raise MechanismError(motions)
        loads = resolve_loads(model)
    if kept.system is None:
        kept.system = build_system(model, supports, watch, report, method, memory)
    system = kept.system
    system.begin()
    report("solving", 0.0)
    cases = len(job.load_cases)
    displacement = np.empty((mesh.node_count, 2, cases))
    reaction = np.zeros((len(supports.nodes), 2, cases))
    residual = np.zeros(cases)
    with watch("solve"):
        for part in _parts(cases, mesh.dof_count):
            displacement[:, :, part], reaction[:, :, part], residual[part] = _solve_part(
                system, supports, loads, part
            )
            report("solving", part.stop / cases)
    return Solution(
        model=model,
        cases=tuple(case.name for case in job.load_cases),
        displacement=displacement,
        loads=loads,
        support_forces=_support_forces(job, supports, displacement, reaction),
        temperature=loads.heating.by_element(model),
        solver=SolverReport(
            name=system.factor.name,
            ordering=system.ordering,
            dofs=mesh.dof_count,
            free_dofs=int((~supports.held).sum()),
            factor_entries=system.factor.entries,
            residual=residual,
            refinements=system.refinements,
            reciprocal_condition=system.reciprocal_condition,
            iteration=system.effort,
            seconds=dict(watch.seconds),
        ),
    )


def _silent(stage: str, fraction: float) -> None:
    pass


def _parts(cases: int, dofs: int) -> Iterator[slice]:
    """Load cases in blocks that fit BLOCK_BYTES."""
    width = max(8, BLOCK_BYTES // (8 * dofs))
    for start in range(0, cases, width):
        yield slice(start, min(start + width, cases))


def _solve_part(
    system: System, supports: Supports, loads: Loads, part: slice
) -> tuple[Array, Array, Array]:
    """Displacement (N, 2, k), reactions (s, 2, k) of the held nodes and residual (k,)."""
    forces = loads.forces.of_cases(part, system.order.order)
    loads.heating.add_forces(forces, part, system.order.position)
    return system.solve(forces, supports.prescribed[:, part])


def _support_forces(
    job: Job, supports: Supports, displacement: Array, reaction: Array
) -> tuple[SupportForces, ...]:
    """Divide the reactions (s, 2, c) of the held nodes among the supports; add their springs."""
    found = []
    for support, share, spring in zip(job.supports, supports.shares, supports.springs, strict=True):
        nodes = np.union1d(share.nodes, spring.nodes)
        force = np.zeros((len(nodes), *reaction.shape[1:]))
        held = reaction[np.searchsorted(supports.nodes, share.nodes)]
        size = np.einsum("kic,ki->kc", held, share.measure)
        np.add.at(
            force,
            np.searchsorted(nodes, share.nodes),
            share.direction[:, :, None] * size[:, None, :],
        )
        force[np.searchsorted(nodes, spring.nodes)] += spring.force(displacement)
        found.append(SupportForces(support.label, nodes, force))
    return tuple(found)

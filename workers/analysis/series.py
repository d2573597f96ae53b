"""Solving a job on its own mesh and two finer ones, for a convergence record."""

from workers.analysis.adaptive import MOST_DOFS
from workers.analysis.convergence import Record
from workers.analysis.mesh import Mesh
from workers.analysis.refiner import Refiner
from workers.analysis.solved import Progress, Solved, solve_on
from workers.errors import Fault, MeshError
from workers.job import Job

FINER = (1, 2)  # numbers of the finer meshes, see `Refiner.series`


def solve_series(
    job: Job, refiner: Refiner, mesh: Mesh, progress: Progress, most_dofs: int | None = None
) -> Solved:
    """Solve a job on all meshes of its series; the results are those of the finest.

    Parameters
    ----------
    mesh : the job's own
    most_dofs : of the finest mesh

    Raises
    ------
    MeshError       the finest mesh would have too many unknowns, or cannot be made.
    AnalysisError   as `solution.solve`.
    """
    record = Record(job.meshing.element)
    solved = solve_on(job, mesh, progress)
    record.add(solved.mesh, solved.results)
    for number in FINER:
        progress("meshing", 0.0)
        finer = refiner.series(number)
        if finer.dof_count > (limit := min(most_dofs or MOST_DOFS, MOST_DOFS)):
            raise MeshError([_too_many(finer.dof_count, limit)])
        solved = solve_on(job, finer, progress)
        record.add(solved.mesh, solved.results)
    record.write(solved.results, kind="series")
    return solved


def _too_many(dofs: int, limit: int) -> Fault:
    return Fault(
        "/requests/convergence",
        f"one of the three meshes would have {dofs} unknowns, more than {limit}: coarsen the "
        "job's own mesh, or leave the record out",
    )

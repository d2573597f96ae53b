"""Whether a job may come in, and in which line it stands.

Jobs are worked on in two lines: whatever is interactive before whatever is in bulk. A client says
which he wants (`?priority=`); without that a small job without a label is interactive. But of one
token's jobs only a few stand in the interactive line at a time, so that whoever sends hundreds
does not make a colleague's single one wait, whatever he asks for.
"""

from api.access import Caller
from api.problem_types import JOB_TOO_LARGE, LINE_FULL
from api.problems import RefusalError
from api.services import services
from elements.registry import get
from workers.analysis.mesh import Mesh
from workers.errors import Fault
from workers.estimate import (
    BASIS,
    Workload,
    expected_workload,
    fitted_factor,
    memory_by_iteration,
    memory_by_stage,
    workload,
)
from workers.job import Job
from workers.preflight import Foreseen
from workers.record import BULK, INTERACTIVE
from workers.settings import GIBIBYTE, variable
from workers.sizes import count_states

# Up to here a job takes a few seconds, and waiting behind several of them is bearable.
SMALL_DOFS = 100_000
SMALL_STATES = 50
OVER_MEMORY = (
    "use a coarser mesh, divide the load cases among several jobs, or have "
    f"{variable('memory_limit')} raised"
)
OR_ITERATE = f" (or {variable('large_jobs')} set to iterate)"
RETRY_AFTER = 30  # when a line is full [s]; a worker ends many small jobs in that time


def require_room(caller: Caller) -> None:
    """Refuse when the workspace has too many unfinished jobs.

    Processes that ask at the same moment may each let one in: the limit is for orders of magnitude.

    Raises
    ------
    RefusalError   with the time after which to try again.
    """
    most = services().settings.queue_length
    if services().store.length_of_line(caller.workspace) >= most:
        raise RefusalError(
            LINE_FULL,
            f"{most} jobs of the workspace {caller.workspace} are unfinished, which is as many as "
            "this server takes. Send this one again when some are done.",
            headers={"Retry-After": str(RETRY_AFTER)},
        )


def require_memory(job: Job, foreseen: Foreseen) -> None:
    """Refuse a job that a worker could not hold.

    The meshes of a convergence record are finer than the one that is looked at here; a worker that
    runs out of memory over them says so.

    Raises
    ------
    RefusalError   with the estimate, the limit, and what to do.
    """
    settings = services().settings
    load = _workload(job, foreseen, settings.pictures)
    iterates = settings.large_jobs == "iterate"
    stages = memory_by_iteration(load) if iterates else memory_by_stage(load)
    stage, need = max(stages.items(), key=lambda item: item[1])
    if need <= settings.memory_limit:
        return
    message = (
        f"about {load.dofs} degrees of freedom, {load.cases} load cases and {load.states} results "
        f"need about {need / GIBIBYTE:.2g} GiB of memory while {stage}; {OVER_MEMORY}"
        f"{'' if iterates else OR_ITERATE}"
    )
    raise RefusalError(
        JOB_TOO_LARGE,
        f"The job needs more than the {settings.memory_limit / GIBIBYTE:.2g} GiB of memory that a "
        "job may take here.",
        errors=[Fault("/meshing", message).as_json()],
        estimate={
            "dofs": load.dofs,
            "bytes": round(need),
            "by_stage": {name: round(size) for name, size in stages.items()},
            "basis": BASIS,
        },
        limit=settings.memory_limit,
    )


def _workload(job: Job, foreseen: Foreseen, pictures: int) -> Workload:
    cases, states = len(job.load_cases), count_states(job)
    if (mesh := foreseen.mesh) is None:
        element = get(job.meshing.element)
        return expected_workload(
            element, foreseen.elements, cases=cases, states=states, pictures=pictures
        )
    factor = fitted_factor(mesh)
    return workload(mesh, factor, cases=cases, states=states, fields=states, pictures=pictures)


def choose_line(wish: str | None, job: Job, mesh: Mesh | None, caller: Caller) -> str:
    """The priority that the job gets; `mesh` where it is known before the work begins."""
    wanted = wish or (INTERACTIVE if _is_small(job, mesh) else BULK)
    most = services().settings.interactive_jobs
    if wanted == INTERACTIVE:
        waiting = services().store.interactive_jobs(caller.workspace, caller.name)
        return INTERACTIVE if waiting < most else BULK
    return wanted


def _is_small(job: Job, mesh: Mesh | None) -> bool:
    dofs = 0 if mesh is None else mesh.dof_count
    return job.label is None and count_states(job) <= SMALL_STATES and dofs <= SMALL_DOFS

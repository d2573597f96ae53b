"""Whether a job may come in, and in which line it stands.

Jobs are worked on in two lines: whatever is interactive before whatever is in bulk. A client says
which he wants (`?priority=`); without that a small job without a label is interactive. But of one
token's jobs only a few stand in the interactive line at a time, so that whoever sends hundreds
does not make a colleague's single one wait, whatever he asks for.
"""

from api.access import Caller
from api.problem_types import LINE_FULL
from api.problems import RefusalError
from api.services import services
from workers.analysis.mesh import Mesh
from workers.job import Job
from workers.record import BULK, INTERACTIVE
from workers.sizes import count_states

# Up to here a job takes a few seconds, and waiting behind several of them is bearable.
SMALL_DOFS = 100_000
SMALL_STATES = 50
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

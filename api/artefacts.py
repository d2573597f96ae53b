"""Files of a finished job or batch that a worker makes when somebody asks for them."""

from collections.abc import Callable
from pathlib import Path

from api.problem_types import ARTEFACT_FAILED, ARTEFACT_LATE, PICTURES_UNAVAILABLE
from api.problems import RefusalError
from api.services import services
from workers.batch import Batch
from workers.errors import PicturesUnavailableError
from workers.queue import Answer

WAIT = 25.0  # seconds; a picture takes 1-3 s, clients and proxies give up after 30 or more


def make_artefact(job_id: str, kind: str, case: str, quantity: str | None = None) -> None:
    """Have the file made; on return it is there.

    Raises
    ------
    RefusalError     it is not made yet, or cannot be made; with the reason.
    RedisError       the workers cannot be asked.
    """
    queue = services().queue
    _have_made(lambda wait: queue.make_artefact(job_id, kind, case, quantity, wait=wait))


def make_batch_file(batch: Batch, kind: str) -> Path:
    """Have a joint file of a batch made; returns its path, on which it then is.

    Raises as `make_artefact`.
    """
    path = batch.file(services().store.root, kind)
    if path.is_file():
        return path
    queue = services().queue
    _have_made(
        lambda wait: queue.make_batch_file(
            batch.label, batch.workspace, batch.digest, kind, wait=wait
        )
    )
    if not path.is_file():  # another job has finished: it was made for that one as well
        raise RefusalError(ARTEFACT_LATE, "The batch went on.", headers={"Retry-After": "1"})
    return path


def _have_made(ask: Callable[[float], Answer]) -> None:
    with services().waiting_room.seat() as seated:
        answer = ask(WAIT if seated else 0.0)
    if answer.state == "pending":
        raise RefusalError(
            ARTEFACT_LATE, "A worker will make this file.", headers={"Retry-After": "5"}
        )
    if answer.state == "failed":
        away = answer.error == PicturesUnavailableError.__name__
        raise RefusalError(PICTURES_UNAVAILABLE if away else ARTEFACT_FAILED, answer.reason or "")

"""Files of a finished job that a worker makes when somebody asks for them."""

from api.problem_types import ARTEFACT_FAILED, ARTEFACT_LATE, PICTURES_UNAVAILABLE
from api.problems import RefusalError
from api.services import services
from workers.errors import PicturesUnavailableError

WAIT = 25.0  # seconds; a picture takes 1-3 s, clients and proxies give up after 30 or more


def make_artefact(job_id: str, kind: str, case: str, quantity: str | None = None) -> None:
    """Have the file made; on return it is there.

    Raises
    ------
    RefusalError     it is not made yet, or cannot be made; with the reason.
    RedisError       the workers cannot be asked.
    """
    with services().waiting_room.seat() as seated:
        answer = services().queue.make_artefact(
            job_id, kind, case, quantity, wait=WAIT if seated else 0.0
        )
    if answer.state == "pending":
        raise RefusalError(
            ARTEFACT_LATE, "A worker will make this file.", headers={"Retry-After": "5"}
        )
    if answer.state == "failed":
        away = answer.error == PicturesUnavailableError.__name__
        raise RefusalError(PICTURES_UNAVAILABLE if away else ARTEFACT_FAILED, answer.reason or "")

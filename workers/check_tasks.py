"""What rq runs when somebody asks for a check: the check itself, or one more of its pictures.

Questions are worked on ahead of all jobs. The functions return what JSON can carry.
"""

import logging
from collections.abc import Callable
from pathlib import Path
from typing import Any

from workers import checking
from workers.checks import Checks
from workers.errors import FaultyError, StoreError
from workers.limits import TimeLimitError, memory_limit, time_limit
from workers.outputs.names import file_name
from workers.queue import ANSWER_LIMIT
from workers.settings import Settings
from workers.store import Store
from workers.tasks import explain, is_ours, refusal

Json = dict[str, Any]

log = logging.getLogger(__name__)


def run_check(check_id: str) -> Json:
    """Answer a check that was filed; the answer is in its folder afterwards.

    Returns {"ok": True}, or {"ok": False, "error": class name, "reason": plain words}, with the
    "faults" of the document where that is to blame.
    """
    settings = Settings.from_environment()
    checks = Checks(settings.store)

    def work(scratch: Path) -> None:
        found = scratch / "found"
        found.mkdir()
        checking.check(
            checks.document(check_id),
            found,
            with_job=settings.pictures,
            most_dofs=settings.most_dofs,
            keep_mesh=True,
        )
        checks.publish(check_id, found)

    return _answer(settings, check_id, work)


def draw_check(check_id: str, state: str) -> Json:
    """Draw the loads of one more case or combination of an answered check; returns as above."""
    settings = Settings.from_environment()
    checks = Checks(settings.store)

    def work(scratch: Path) -> None:
        answer = checks.answer(check_id)
        if answer is None:
            raise StoreError("the check is gone; send its document again")
        made = checking.draw(checks.document(check_id), answer, scratch, state)
        place = answer / "previews" / f"{file_name(state)}.png"
        place.parent.mkdir(exist_ok=True)
        made.replace(place)

    return _answer(settings, check_id, work)


def _answer(settings: Settings, check_id: str, work: Callable[[Path], None]) -> Json:
    """Work in a scratch folder within the limits, and say what became of it."""
    try:
        with (
            time_limit(ANSWER_LIMIT),
            memory_limit(settings.memory_limit),
            Store(settings.store).scratch() as scratch,
        ):
            work(scratch)
    except FaultyError as error:
        faults = [fault.as_json() for fault in error.faults]
        return {**refusal(error, explain(error, settings)["reason"]), "faults": faults}
    except KeyError as error:
        return refusal(error, f"the job has nothing of the name {error}")
    except (Exception, TimeLimitError) as error:
        log.warning("check %s has no answer: %s", check_id, error, exc_info=is_ours(error))
        return refusal(error, explain(error, settings)["reason"])
    return {"ok": True}

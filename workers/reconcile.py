"""Nothing accepted is lost: whatever is unfinished is in line, at work, or decided here.

Run after every piece of work for its own job, and on a timer for all. A job that is `running` in
the store while no process holds it had its worker killed: it is queued once more, then given up.
"""

import logging

from workers.checks import Checks
from workers.errors import StoreError, TransitionError, UnknownJobError
from workers.queue import Queue
from workers.record import FAILED, KILLED, QUEUED, RUNNING, TIME
from workers.store import Store

MOST_ATTEMPTS = 2
KILLED_ONCE = "The worker process was killed while it worked on this job."
GIVEN_UP = (
    "The worker process was killed {times} times while it worked on this job, most often because "
    "the machine ran out of memory. Try a coarser mesh or fewer load cases at a time, or give the "
    "machine more memory."
)
HANDED_BACK = "The worker was shut down; the job begins anew with the next one."

log = logging.getLogger(__name__)


def reconcile(store: Store, queue: Queue) -> None:
    """Look after every unfinished job that Redis does not have in line; let old checks go.

    Raises
    ------
    redis.RedisError, StoreError   try again later.
    """
    Checks(store.root).expire()
    waiting = queue.waiting()
    for job_id in store.unfinished():
        if job_id not in waiting:
            try:
                settle(store, queue, job_id)
            except StoreError:  # one job that cannot be helped must not hold up the others
                log.exception("job %s could not be looked after", job_id)


def settle(
    store: Store,
    queue: Queue,
    job_id: str,
    *,
    verdict: str | None = None,
    handed_back: bool = False,
) -> bool:
    """Decide what happens to a job that nobody works on; returns False when somebody does.

    verdict     : why the worker was killed for taking too long: the job has failed.
    handed_back : the worker was shut down in order: the attempt does not count.
    """
    try:
        with store.claimed(job_id) as mine:
            if mine:
                _settle(store, queue, job_id, verdict, handed_back)
            return mine
    except UnknownJobError:
        store.forget_unknown(job_id)
    except TransitionError:
        log.info("job %s was cancelled meanwhile", job_id)
    return True


def _settle(
    store: Store, queue: Queue, job_id: str, verdict: str | None, handed_back: bool
) -> None:
    record = store.record(job_id)
    if record.is_final:
        store.indexes.tidy(record)
        return
    if record.state == RUNNING:
        if store.recover_published(job_id):
            return
        if verdict is not None:
            queue.tallies.add_end(store.transition(job_id, FAILED, reason=verdict, cause=TIME))
            return
        if handed_back:
            store.transition(job_id, QUEUED, reason=HANDED_BACK, attempts=record.attempts - 1)
        elif record.attempts >= MOST_ATTEMPTS:
            reason = GIVEN_UP.format(times=record.attempts)
            queue.tallies.add_end(store.transition(job_id, FAILED, reason=reason, cause=KILLED))
            return
        else:
            store.transition(job_id, QUEUED, reason=KILLED_ONCE)
    log.warning("job %s is queued again", job_id)
    queue.submit(job_id)

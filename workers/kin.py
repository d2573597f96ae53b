"""Jobs of the same model that wait in line together: worked on by one process, one after another.

The first comes off the queue as any job does. The next ones are taken out of the line behind it by
the same process, which has their mesh, factor and operators already. Each is claimed, begun, ended
and filed as if it were alone, and only while it is its turn; nothing ever happens to two of them at
a time. So a job that fails, is cancelled or takes its process with it does so alone.
"""

import logging
import time
from collections.abc import Iterator

import redis

from workers.errors import UnknownJobError
from workers.queue import Queue
from workers.record import QUEUED, Record
from workers.store import Store

MOST_FOLLOWERS = 99  # behind the first: whatever may go wrong with a long-lived process ends here
# No further job is begun after this time, so that a pool that is to stop need not wait long [s].
LONGEST = 20.0
LOOKED_AT = 500  # from the head of the line

log = logging.getLogger(__name__)


def has_followers(queue: Queue, record: Record) -> bool:
    """Whether jobs of the same model wait behind this one. One that failed a worker works alone."""
    if record.model is None or record.attempts > 0:
        return False
    try:
        return bool(queue.kin_in_line(record, LOOKED_AT))
    except redis.RedisError:  # the job itself does not need Redis
        return False


def followers(store: Store, queue: Queue, first: Record) -> Iterator[str]:
    """Ids of the waiting jobs of the same model, as long as nobody else has to wait for them."""
    until = time.monotonic() + LONGEST
    seen = {first.id}
    try:
        while kin := [i for i in queue.kin_in_line(first, LOOKED_AT) if i not in seen]:
            for job_id in kin:
                seen.add(job_id)
                over = len(seen) > MOST_FOLLOWERS + 1 or time.monotonic() > until
                if over or queue.others_wait(first.priority):
                    return
                if _may_follow(store, job_id, first):
                    queue.note_follower(first.id, job_id)
                    yield job_id
    except redis.RedisError as error:
        log.warning("the jobs behind %s are left in line: %s", first.id, error)


def _may_follow(store: Store, job_id: str, first: Record) -> bool:
    """Redis may know less than the store: a job that failed a worker before works alone."""
    try:
        record = store.record(job_id)
    except UnknownJobError:
        return False
    return (record.state, record.model, record.attempts) == (QUEUED, first.model, 0)

"""One worker process: takes tasks off the queues and forks a work-horse for each."""

import logging
import os
import signal
import time
from contextlib import suppress
from types import FrameType
from typing import Any

import redis
import rq
from rq import worker_registration
from rq.executions import Execution
from rq.job import Job
from rq.serializers import JSONSerializer

from workers.errors import StoreError, UnknownJobError
from workers.lineage import die_with_parent
from workers.queue import LINES, QUESTIONS, Queue, connect
from workers.reconcile import settle
from workers.settings import Settings
from workers.tasks import DISK_FULL, DISK_WAS_FULL, OUT_OF_TIME

HEARTBEAT = 15  # between two signs of life while idle [s]; rq adds its own margin of 15 s
LAST_BREATH = 2.0  # for killed processes to let go of a job [s]
MONITOR = 5  # between two looks at a work-horse [s]
LOOK_FOR_ROOM = 1.0  # between two looks whether the disk has room again [s]

log = logging.getLogger(__name__)


class Worker(rq.Worker):
    """An rq worker that settles each job once its work-horse is gone, whatever became of it."""

    max_connection_wait_time = 5.0

    def __init__(self, settings: Settings) -> None:
        self.settings = settings
        self.jobs = Queue(settings)
        self._handing_back = False
        self._group = 0  # process group of the work-horse
        self._disk_was_full = False
        super().__init__(
            [QUESTIONS, *LINES.values()],
            connection=connect(settings),
            serializer=JSONSerializer,
            worker_ttl=2 * HEARTBEAT,
            job_monitoring_interval=MONITOR,
        )

    # --- Redis and the disk may be away for a while --------------------------------------------

    def heartbeat(self, timeout: int | None = None, pipeline: Any = None) -> None:
        """Tell that we live; also a Redis that has lost its data and does not know us any more."""
        super().heartbeat(timeout, pipeline)
        worker_registration.register(self, pipeline)

    def maintain_heartbeats(self, job: Job, execution: Execution) -> None:
        """Nothing that Redis does may end the work on a job: the store has all that matters."""
        try:
            super().maintain_heartbeats(job, execution)
        except redis.RedisError as error:
            log.warning("Redis does not hear that job %s is worked on: %s", job.id, error)

    def set_shutdown_requested_date(self) -> None:
        """A note for Redis that is taken in a signal handler, while a job is worked on."""
        with suppress(redis.RedisError):
            super().set_shutdown_requested_date()

    def dequeue_job_and_maintain_ttl(
        self, timeout: int | None, max_idle_time: int | None = None
    ) -> tuple[Job, rq.Queue] | None:
        """Take the next task; after a full disk not before there is room: else each would fail."""
        while self._disk_was_full and not self.jobs.store.has_room():
            self.heartbeat()
            time.sleep(LOOK_FOR_ROOM)
        self._disk_was_full = False
        found: tuple[Job, rq.Queue] | None
        found = super().dequeue_job_and_maintain_ttl(timeout, max_idle_time)
        return found

    def teardown(self) -> None:
        try:
            super().teardown()
        except redis.RedisError as error:
            log.warning("a worker ends, and Redis does not hear of it: %s", error)

    # --- one task --------------------------------------------------------------------------------

    def execute_job(self, job: Job, queue: rq.Queue) -> None:
        began = time.monotonic()
        try:
            super().execute_job(job, queue)
        finally:
            elapsed = time.monotonic() - began
            left_something = self._kill_rest()
            if queue.name != QUESTIONS:
                self._settle(job.args[0], elapsed, LAST_BREATH if left_something else 0.0)
                self._disk_was_full = self._met_full_disk(job.args[0])

    def fork_work_horse(self, job: Job, queue: rq.Queue) -> None:
        super().fork_work_horse(job, queue)
        self._group = self.horse_pid

    def kill_horse(self, sig: signal.Signals = signal.SIGKILL) -> None:
        if self.horse_pid:  # else rq would kill our own process group, and so us
            super().kill_horse(sig)

    def _kill_rest(self) -> bool:
        """Kill what the work-horse started and left behind; True if there was anything.

        Whatever it forked has inherited its claim on the job.
        """
        group, self._group = self._group, 0
        try:
            if group:
                os.killpg(group, signal.SIGKILL)
            return bool(group)
        except ProcessLookupError:
            return False

    def _settle(self, job_id: str, elapsed: float, patience: float) -> None:
        """Settle a job, and the one of the same model that was worked on behind it at last."""
        # A call into compiled code can outlast the limit inside the work-horse; then rq killed it.
        # The one behind has begun later: it gets its time in another attempt, alone.
        limit = self.settings.time_limit
        verdict = OUT_OF_TIME.format(seconds=limit) if elapsed > limit else None
        try:
            self._settle_one(job_id, verdict, patience)
            if follower := self.jobs.follower(job_id):
                self._settle_one(follower, None, patience)
        except (StoreError, redis.RedisError) as error:
            log.warning("job %s is left to the reconciler: %s", job_id, error)

    def _settle_one(self, job_id: str, verdict: str | None, patience: float) -> None:
        until = time.monotonic() + patience
        while not settle(
            self.jobs.store, self.jobs, job_id, verdict=verdict, handed_back=self._handing_back
        ):
            if time.monotonic() >= until:
                break
            time.sleep(0.01)

    def _met_full_disk(self, job_id: str) -> bool:
        try:
            self.jobs.store.probe()
            return self.jobs.store.record(job_id).reason in (DISK_FULL, DISK_WAS_FULL)
        except UnknownJobError:
            return False
        except StoreError as error:
            log.warning("no job is begun until the store can be written: %s", error)
            return True

    def request_force_stop(self, signum: int, frame: FrameType | None) -> None:
        self._handing_back = True
        super().request_force_stop(signum, frame)

    def setup_work_horse_signals(self) -> None:
        super().setup_work_horse_signals()
        # Else a killed worker leaves a work-horse that nobody watches.
        die_with_parent(signal.SIGKILL, parent=self.pid)


def work(settings: Settings) -> None:
    """Be a worker until told to stop, or until Redis is away; the pool starts another one then."""
    try:
        Worker(settings).work(logging_level="WARNING")
    except redis.RedisError as error:
        log.warning("a worker could not begin: %s", error)

"""The queue: which job a worker takes next, how far it is, and questions that cannot wait.

Everything in Redis may be lost: the store knows what is unfinished, and `reconcile.py` queues it
again. So an id may also be queued twice; `Store.working` lets one worker at it. Redis errors pass
through as `redis.RedisError`. The web process uses this module; it enqueues by name and never
imports what the workers import.
"""

import hashlib
import logging
import time
from contextlib import suppress
from dataclasses import dataclass
from typing import Any

import orjson
import redis
import rq
from rq.command import send_stop_job_command
from rq.exceptions import DuplicateJobError, InvalidJobOperation, NoSuchJobError
from rq.job import Job, JobStatus
from rq.serializers import JSONSerializer
from rq.utils import as_text, decode_redis_hash
from rq.worker_registration import get_keys

from workers.private_redis import address
from workers.record import CANCELLED, PRIORITIES, Record
from workers.settings import Settings
from workers.store import Store
from workers.tallies import Tallies

# Workers serve questions first, then the lines of jobs in this order.
QUESTIONS = "fishplate-questions"
LINES = {priority: f"fishplate-{priority}" for priority in PRIORITIES}

RUN_JOB = "workers.tasks.run_job"
MAKE_ARTEFACT = "workers.tasks.make_artefact"
MAKE_BATCH_FILE = "workers.tasks.make_batch_file"
PROGRESS = "fishplate:progress:"
FOLLOWER = "fishplate:follower:"

BACKSTOP = 15  # beyond the job's own time limit, before the worker kills from outside [s]
ANSWER_LIMIT = 120  # longest work on one question [s]
ANSWER_KEPT = 30  # an answer is kept for whoever asks the same [s]
FAILURE_KEPT = 86_400  # rq's own note on a failure, for the operator [s]
PROGRESS_KEPT = 86_400
# Redis keeps what a worker reports for 65 to 90 s and tells how much of that is left, so that the
# clocks of other machines do not matter. A report comes every 15 s; here four are missing.
LOST = 30  # s
POLL = 0.1  # between two looks for an answer [s]

log = logging.getLogger(__name__)


def redis_address(settings: Settings) -> str:
    """URL of the Redis server: the one that is named, or the private one."""
    return settings.redis_url or address(settings.store)


def connect(settings: Settings) -> redis.Redis:
    """A client that gives up after seconds rather than hang."""
    url = redis_address(settings)
    return redis.Redis.from_url(url, socket_timeout=5.0, socket_connect_timeout=2.0)


@dataclass(frozen=True)
class Answer:
    """What became of a question.

    value  : what the function returned; None while it is pending and when it failed.
    reason : why there is none, in plain words, when it failed.
    error  : name of the error's class, when it failed with one of ours.
    """

    state: str  # "done" | "pending" | "failed"
    value: Any = None
    reason: str | None = None
    error: str | None = None


class Queue:
    """The queues of one installation."""

    def __init__(self, settings: Settings) -> None:
        self.settings = settings
        self.store = Store(settings.store)
        self.connection = connect(settings)
        self.tallies = Tallies(self.connection)
        self._questions = self._line(QUESTIONS)
        self._lines = {priority: self._line(name) for priority, name in LINES.items()}

    def _line(self, name: str) -> rq.Queue:
        return rq.Queue(name, connection=self.connection, serializer=JSONSerializer)

    # --- jobs ------------------------------------------------------------------------------------

    def submit(self, job_id: str) -> None:
        """Queue a job of the store in the line of its priority.

        If Redis refuses, the reconciler will do it later.
        """
        record = self.store.record(job_id)
        self.leave_line(job_id)
        self._lines[record.priority].enqueue_call(
            RUN_JOB,
            args=(job_id,),
            job_id=job_id,
            timeout=self.settings.time_limit + BACKSTOP,
            result_ttl=0,
            failure_ttl=FAILURE_KEPT,
            description=_description(record),
        )

    def cancel(self, job_id: str) -> Record:
        """Cancel a job that is queued or running; it is final on return.

        The process that works on it is killed. Should Redis be away, that process finds out by
        itself, and throws its results away.

        Raises
        ------
        TransitionError   the job is already final.
        """
        record = self.store.transition(job_id, CANCELLED, reason="Cancelled on request.")
        try:
            job = Job.fetch(job_id, connection=self.connection, serializer=JSONSerializer)
            if job.get_status(refresh=False) == JobStatus.STARTED:
                send_stop_job_command(self.connection, job_id, serializer=JSONSerializer)
            else:
                self.leave_line(job_id)
        except (NoSuchJobError, InvalidJobOperation):
            pass  # neither waiting nor begun: whoever takes it sees that it is cancelled
        except redis.RedisError as error:
            log.warning("job %s is cancelled, but Redis could not be told: %s", job_id, error)
        self.tallies.add_end(record)
        return record

    def waiting(self) -> frozenset[str]:
        """Ids of the jobs that Redis has in line."""
        return frozenset(i for line in self._lines.values() for i in line.get_job_ids())

    def leave_line(self, job_id: str) -> None:
        """Take a job out of the line, and all that rq noted about an earlier attempt."""
        # Not Job.delete(): that fails on the fragments which a flush during an attempt leaves.
        with self.connection.pipeline() as pipeline:
            for line in self._lines.values():
                line.remove(job_id, pipeline=pipeline)
            pipeline.delete(Job.key_for(job_id))
            pipeline.execute()

    # --- jobs of one model -----------------------------------------------------------------------

    def kin_in_line(self, first: Record, most: int) -> list[str]:
        """Ids of the jobs of the same model among the first so many of the same line, in order."""
        ids = self._lines[first.priority].get_job_ids(0, most)
        with self.connection.pipeline(transaction=False) as pipeline:
            for job_id in ids:
                pipeline.hget(Job.key_for(job_id), "description")
            said = pipeline.execute()
        wanted = _description(first).encode()
        return [i for i, what in zip(ids, said, strict=True) if what == wanted and i != first.id]

    def others_wait(self, priority: str) -> bool:
        """Whether a question, or a job in a line that comes before this one, waits."""
        before = PRIORITIES[: PRIORITIES.index(priority)]
        return any(line.count for line in (self._questions, *(self._lines[p] for p in before)))

    def note_follower(self, first: str, job_id: str) -> None:
        """Say which job is worked on behind the one that came off the queue."""
        self.connection.set(FOLLOWER + first, job_id, ex=PROGRESS_KEPT)

    def follower(self, first: str) -> str | None:
        """The last job that was worked on behind this one; None if there was none."""
        found = self.connection.getdel(FOLLOWER + first)
        return None if found is None else as_text(found)

    # --- progress --------------------------------------------------------------------------------

    def set_progress(self, job_id: str, stage: str, fraction: float) -> None:
        """Say how far a job is: its stage, and the fraction of that stage that is done."""
        with self.connection.pipeline() as pipeline:
            pipeline.hset(PROGRESS + job_id, mapping={"stage": stage, "fraction": fraction})
            pipeline.expire(PROGRESS + job_id, PROGRESS_KEPT)
            pipeline.execute()

    def progress(self, job_id: str) -> dict[str, Any] | None:
        """{"stage", "fraction"} of a running job, None where nothing is known."""
        found = decode_redis_hash(self.connection.hgetall(PROGRESS + job_id), decode_values=True)
        if not found:
            return None
        return {"stage": found["stage"], "fraction": float(found["fraction"])}

    # --- questions: answered ahead of the jobs ---------------------------------------------------

    def make_artefact(
        self, job_id: str, kind: str, case: str, quantity: str | None = None, *, wait: float = 0.0
    ) -> Answer:
        """Have a file of a finished job made.

        kind : "field" (the VTK file of a case), "preview" (the picture of one quantity), "line"
            (a graph) or "envelope"; then `case` says which of its files.

        When the answer is "done" the file is in the results folder, whole.
        """
        return _unpacked(self.ask(MAKE_ARTEFACT, job_id, kind, case, quantity, wait=wait))

    def make_batch_file(
        self, label: str, workspace: str | None, digest: str, kind: str, *, wait: float = 0.0
    ) -> Answer:
        """Have a file of the joint envelope of a batch made, for its jobs that are finished now.

        digest : of these jobs; kind : "fields", "nodes", or a measure
        """
        return _unpacked(self.ask(MAKE_BATCH_FILE, label, workspace, digest, kind, wait=wait))

    def ask(self, function: str, *arguments: Any, wait: float = 0.0) -> Answer:
        """Have a worker call a function ahead of all jobs; wait that many seconds for its answer.

        The same question asked again meanwhile is the same piece of work: ask again for a pending
        answer. The function returns what JSON can carry.
        """
        question = orjson.dumps([function, arguments])
        question_id = "ask-" + hashlib.sha256(question).hexdigest()[:40]
        with suppress(DuplicateJobError):
            self._questions.enqueue_call(
                function,
                args=arguments,
                job_id=question_id,
                timeout=ANSWER_LIMIT + BACKSTOP,
                result_ttl=ANSWER_KEPT,
                failure_ttl=ANSWER_KEPT,
                description=f"{function} {question_id}",
                unique=True,
            )
        until = time.monotonic() + wait
        while (answer := self._answer(question_id)).state == "pending":
            left = until - time.monotonic()
            if left <= 0.0:
                break
            time.sleep(min(POLL, left))
        return answer

    def _answer(self, question_id: str) -> Answer:
        try:
            job = Job.fetch(question_id, connection=self.connection, serializer=JSONSerializer)
        except NoSuchJobError:
            return Answer("pending")  # Redis lost it; asking again queues it again
        status = job.get_status(refresh=False)
        if status == JobStatus.FINISHED:
            return Answer("done", value=job.return_value())
        if status in (JobStatus.FAILED, JobStatus.STOPPED):
            return Answer("failed", reason="the worker process ended before it had an answer")
        return Answer("pending")

    # --- health ----------------------------------------------------------------------------------

    def ping(self) -> None:
        """Raise redis.RedisError when Redis does not answer."""
        self.connection.ping()

    def workers_alive(self) -> int:
        """How many workers, on any machine, have reported lately."""
        keys = get_keys(connection=self.connection)
        with self.connection.pipeline(transaction=False) as pipeline:
            for key in keys:
                pipeline.ttl(key)
                pipeline.hexists(key, "death")
            told = pipeline.execute()
        return sum(
            left > LOST and not dead for left, dead in zip(told[::2], told[1::2], strict=True)
        )

    def depths(self) -> dict[str, int]:
        """Number of entries in line: questions, and jobs by priority."""
        lines = {"questions": self._questions, **self._lines}
        return {name: line.count for name, line in lines.items()}


def _unpacked(answer: Answer) -> Answer:
    """The answer of a task that says by itself whether it has failed."""
    if answer.state == "done" and not answer.value["ok"]:
        return Answer("failed", reason=answer.value["reason"], error=answer.value["error"])
    return answer


def _description(record: Record) -> str:
    """What rq keeps beside a job: enough to see which jobs are of one model."""
    return f"model {record.model}" if record.model else f"job {record.id}"

"""The queue against a real, empty Redis, with no worker to disturb it."""

import json
import zlib
from dataclasses import replace

import pytest
import redis

from tests.service_pool import accept
from workers.errors import TransitionError
from workers.queue import Queue
from workers.record import new_id
from workers.settings import Settings


@pytest.fixture
def queue_without_redis(settings: Settings) -> Queue:
    return Queue(replace(settings, redis_url="unix:///nowhere/redis.sock"))


def test_jobs_wait_in_line_and_a_second_submission_is_the_same_place(queue: Queue) -> None:
    ids = [accept(queue.store, "nothing") for _ in range(3)]
    for job_id in (*ids, ids[0]):
        queue.submit(job_id)
    assert queue.waiting() == set(ids)
    assert queue.depths() == {"questions": 0, "interactive": 0, "bulk": 3}


def test_what_is_queued_is_plain_json(queue: Queue) -> None:
    """Nothing that Redis holds is ever unpickled: the payload is JSON, compressed by zlib."""
    job_id = accept(queue.store, "nothing")
    queue.submit(job_id)
    payload = queue.connection.hget(f"rq:job:{job_id}", "data")
    assert json.loads(zlib.decompress(payload)) == ["workers.tasks.run_job", None, [job_id], {}]


def test_a_queued_job_that_is_cancelled_leaves_the_line(queue: Queue) -> None:
    job_id = accept(queue.store, "nothing")
    queue.submit(job_id)
    record = queue.cancel(job_id)
    assert record.state == "cancelled"
    assert queue.store.record(job_id) == record
    assert queue.waiting() == set()
    with pytest.raises(TransitionError):
        queue.cancel(job_id)


def test_jobs_stand_in_the_line_of_their_priority(queue: Queue) -> None:
    """Also when they are queued again: the priority is in the record, not in Redis."""
    ids = {p: accept(queue.store, "nothing", priority=p) for p in ("bulk", "interactive")}
    for _ in range(2):
        for job_id in ids.values():
            queue.submit(job_id)
        assert queue.depths() == {"questions": 0, "interactive": 1, "bulk": 1}
        assert queue.waiting() == set(ids.values())
        queue.connection.flushall()


def test_cancelling_works_while_redis_is_away(queue_without_redis: Queue) -> None:
    job_id = accept(queue_without_redis.store, "nothing")
    assert queue_without_redis.cancel(job_id).state == "cancelled"


def test_an_absent_redis_is_an_error_within_seconds(queue_without_redis: Queue) -> None:
    for ask in (queue_without_redis.ping, queue_without_redis.workers_alive):
        with pytest.raises(redis.ConnectionError):
            ask()


def test_progress_is_what_was_said_last(queue: Queue) -> None:
    job_id = new_id()
    assert queue.progress(job_id) is None
    queue.set_progress(job_id, "meshing", 1.0)
    queue.set_progress(job_id, "solving", 0.25)
    assert queue.progress(job_id) == {"stage": "solving", "fraction": 0.25}


def test_the_same_question_twice_is_one_piece_of_work(queue: Queue) -> None:
    job_id = new_id()
    for quantity in ("model", "model", "deformed"):
        answer = queue.make_artefact(job_id, "preview", "lift", quantity)
        assert answer.state == "pending"
    assert queue.depths() == {"questions": 2, "interactive": 0, "bulk": 0}


def test_without_workers_none_is_alive(queue: Queue) -> None:
    assert queue.workers_alive() == 0


def test_a_worker_counts_as_long_as_it_reports_whatever_its_clock_says(queue: Queue) -> None:
    for name, left in {"near": 90, "far": 65, "lost": 20}.items():
        key = f"rq:worker:{name}"
        queue.connection.sadd("rq:workers", key)
        queue.connection.hset(key, "last_heartbeat", "2001-02-03T04:05:06.000000Z")
        queue.connection.expire(key, left)
    assert queue.workers_alive() == 2
    queue.connection.hset("rq:worker:far", "death", "2031-02-03T04:05:06.000000Z")
    assert queue.workers_alive() == 1

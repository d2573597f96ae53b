"""Counts that all workers keep together, in a real Redis."""

import time
from dataclasses import replace

import pytest

from tests.service_pool import accept
from workers.queue import Queue
from workers.record import Event
from workers.settings import Settings
from workers.tallies import BOUNDS, Stopwatch


def test_ends_are_counted_by_state_and_cause(queue: Queue) -> None:
    record = queue.store.record(accept(queue.store, "nothing"))
    for state, cause in (("finished", None), ("failed", "time"), ("failed", "time")):
        ended = replace(record, history=(*record.history, Event(state, record.accepted)))
        queue.tallies.add_end(replace(ended, cause=cause))
    assert queue.tallies.ended() == {("finished", ""): 1, ("failed", "time"): 2}


def test_a_cancelled_job_is_counted(queue: Queue) -> None:
    queue.cancel(accept(queue.store, "nothing"))
    assert queue.tallies.ended() == {("cancelled", ""): 1}


def test_durations_fall_into_classes_and_add_up(queue: Queue) -> None:
    """0.05 is in the first class, 0.1 on its bound still, 2000 above all bounds."""
    record = queue.store.record(accept(queue.store, "nothing"))
    for seconds in (0.05, 0.1, 0.2, 2000.0):
        queue.tallies.add_end(record, {"solving": seconds})
    durations = queue.tallies.stages()["solving"]
    assert durations.counts == [2, 1, *[0] * (len(BOUNDS) - 2), 1]
    assert durations.total == pytest.approx(2000.35)


def test_the_time_in_line_is_counted_with_the_first_attempt(queue: Queue) -> None:
    record = queue.store.record(accept(queue.store, "nothing"))
    events = [
        Event("queued", "2031-04-05T06:00:00.000Z"),
        Event("running", "2031-04-05T06:00:02.000Z"),
        Event("queued", "2031-04-05T06:01:00.000Z"),
        Event("running", "2031-04-05T06:02:00.000Z"),
    ]
    queue.tallies.add_end(replace(record, history=tuple(events)))
    assert queue.tallies.stages()["waiting"].total == 2.0


def test_counting_without_redis_does_no_harm(settings: Settings) -> None:
    away = Queue(replace(settings, redis_url="unix:///nowhere/redis.sock"))
    away.tallies.add_end(away.store.record(accept(away.store, "nothing")))


def test_a_stopwatch_adds_up_what_each_stage_took() -> None:
    watch = Stopwatch()
    began = time.monotonic()
    for stage in ("reading", "solving", "solving", "reading", None):
        watch.enter(stage)
        time.sleep(0.01)
    took = time.monotonic() - began
    assert set(watch.seconds) == {"reading", "solving"}
    assert all(seconds >= 0.02 for seconds in watch.seconds.values())
    assert sum(watch.seconds.values()) <= took

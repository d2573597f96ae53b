"""Jobs of one model that wait together: one process, and each ends as if it had been alone."""

import os
import random
import signal
from contextlib import suppress
from dataclasses import replace
from pathlib import Path

import pytest

from tests.service_pool import (
    Service,
    accept,
    attempts_in,
    check_one_end,
    eventually,
    running_pool,
)
from workers import kin
from workers.queue import Queue
from workers.settings import Settings
from workers.store import Store

server = pytest.mark.server


def folder(service: Service, job_id: str) -> Path:
    return service.store.jobs.path(job_id)


def process_of(service: Service, job_id: str) -> set[str]:
    """ "shared-PID" or "alone-PID" of every attempt."""
    marks = [*folder(service, job_id).glob("shared-*"), *folder(service, job_id).glob("alone-*")]
    return {mark.name for mark in marks}


@pytest.fixture
def service(patient_service: Service) -> Service:
    """No reconciler looks round: the workers alone have to notice whatever happens."""
    return patient_service


class Line:
    """Jobs that wait behind a first one that only ends when it is told to."""

    def __init__(self, service: Service) -> None:
        self.service = service
        self._first = service.submit("wait")
        service.begun(self._first)

    def add(self, do: str, model: str | None = "m", **order: object) -> str:
        return self.service.submit(do, model=model, **order)

    def start(self) -> None:
        (folder(self.service, self._first) / "go").touch()


@pytest.fixture
def line(service: Service) -> Line:
    return Line(service)


# --- which jobs follow which ----------------------------------------------------------------------


@server
def test_jobs_of_one_model_are_worked_on_by_one_process(service: Service, line: Line) -> None:
    ids = [line.add("nothing") for _ in range(5)]
    line.start()
    for job_id in ids:
        record = service.ended(job_id)
        assert (record.state, record.attempts) == ("finished", 1)
        check_one_end(service, job_id)
    (process,) = {mark for job_id in ids for mark in process_of(service, job_id)}
    assert process.startswith("shared-")
    eventually(lambda: not service.queue.waiting())


@server
def test_other_jobs_do_not_follow(service: Service, line: Line) -> None:
    models = ["m", "n", None, "m", "n", None]
    ids = [line.add("nothing", model) for model in models]
    line.start()
    marks = []
    for job_id in ids:
        assert service.ended(job_id).state == "finished"
        (mark,) = process_of(service, job_id)
        marks.append(mark)
    assert marks[0] == marks[3]
    assert marks[1] == marks[4]
    assert len({*marks}) == 4
    assert [mark.split("-")[0] for mark in marks] == [
        "shared", "shared", "alone", "shared", "shared", "alone",
    ]  # fmt: skip


@server
def test_a_job_with_nobody_behind_it_keeps_nothing(service: Service) -> None:
    job_id = service.submit("nothing", model="m")
    service.ended(job_id)
    (process,) = process_of(service, job_id)
    assert process.startswith("alone-")


@pytest.fixture
def waiting(store: Store, queue: Queue) -> list[str]:
    """Six jobs of one model in line, without anybody at work."""
    ids = [accept(store, "nothing", model="m") for _ in range(6)]
    for job_id in ids:
        queue.submit(job_id)
    return ids


def follow(store: Store, queue: Queue, first: str) -> list[str]:
    return list(kin.followers(store, queue, store.record(first)))


@server
def test_followers_come_in_the_order_of_the_line(
    store: Store, queue: Queue, waiting: list[str]
) -> None:
    assert kin.has_followers(queue, store.record(waiting[0]))
    assert follow(store, queue, waiting[0]) == waiting[1:]


@server
def test_jobs_that_join_the_line_meanwhile_follow_as_well(
    store: Store, queue: Queue, waiting: list[str]
) -> None:
    coming = kin.followers(store, queue, store.record(waiting[0]))
    assert next(coming) == waiting[1]
    late = accept(store, "nothing", model="m")
    queue.submit(late)
    assert list(coming) == [*waiting[2:], late]


@server
def test_a_group_has_an_end(
    store: Store, queue: Queue, waiting: list[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(kin, "MOST_FOLLOWERS", 2)
    assert follow(store, queue, waiting[0]) == waiting[1:3]
    monkeypatch.setattr(kin, "LONGEST", 0.0)
    assert follow(store, queue, waiting[0]) == []


@server
def test_a_question_or_a_more_urgent_job_ends_the_group(
    store: Store, queue: Queue, waiting: list[str]
) -> None:
    coming = kin.followers(store, queue, store.record(waiting[0]))
    assert next(coming) == waiting[1]
    urgent = accept(store, "nothing", "interactive")
    queue.submit(urgent)
    assert list(coming) == []
    queue.leave_line(urgent)
    assert len(follow(store, queue, waiting[0])) == 5
    queue.ask("any.function")
    assert follow(store, queue, waiting[0]) == []


@server
def test_jobs_that_failed_a_worker_or_are_not_queued_any_more_do_not_follow(
    store: Store, queue: Queue, waiting: list[str]
) -> None:
    _, again, cancelled, running, *rest = waiting
    store.transition(again, "running")
    store.transition(again, "queued")
    store.transition(cancelled, "cancelled")
    store.transition(running, "running")
    assert follow(store, queue, waiting[0]) == rest
    assert not kin.has_followers(queue, store.record(again))  # nor does anybody follow them


@server
def test_without_redis_nobody_follows(store: Store, settings: Settings) -> None:
    away = Queue(replace(settings, redis_url="redis://localhost:1/0"))
    first = store.record(accept(store, "nothing", model="m"))
    assert not kin.has_followers(away, first)
    assert list(kin.followers(store, away, first)) == []


# --- each ends on its own -------------------------------------------------------------------------


@server
def test_a_follower_that_fails_fails_alone(service: Service, line: Line) -> None:
    first = line.add("nothing")
    bad = line.add("raise", error="DocumentError", message="too thin")
    last = line.add("nothing")
    line.start()
    assert service.ended(bad).state == "failed"
    for job_id in (first, last):
        assert service.ended(job_id).state == "finished"
    assert process_of(service, first) == process_of(service, bad) == process_of(service, last)
    for job_id in (first, bad, last):
        check_one_end(service, job_id)


@server
def test_after_an_error_of_ours_the_rest_begins_in_a_new_process(
    service: Service, line: Line
) -> None:
    ids = [line.add("nothing"), line.add("raise", error="RuntimeError", message="x"),
           line.add("nothing"), line.add("nothing")]  # fmt: skip
    line.start()
    assert [service.ended(job_id).state for job_id in ids] == [
        "finished", "failed", "finished", "finished",
    ]  # fmt: skip
    marks = [process_of(service, job_id) for job_id in ids]
    assert marks[0] == marks[1] != marks[2] == marks[3]


@server
def test_a_killed_process_costs_only_the_job_of_the_moment(service: Service, line: Line) -> None:
    """Its second attempt is alone; those before it are done, those after it never began."""
    done, killed, later = line.add("nothing"), line.add("die", times=1), line.add("nothing")
    line.start()
    for job_id, attempts in ((done, 1), (killed, 2), (later, 1)):
        record = service.ended(job_id)
        assert (record.state, record.attempts) == ("finished", attempts)
        check_one_end(service, job_id)
    first, second = sorted(process_of(service, killed))
    assert (first.split("-")[0], second.split("-")[0]) == ("alone", "shared")


@server
def test_a_follower_killed_twice_fails_and_the_others_finish(service: Service, line: Line) -> None:
    ids = [line.add("nothing"), line.add("die", times=9), line.add("nothing")]
    line.start()
    assert [service.ended(job_id).state for job_id in ids] == ["finished", "failed", "finished"]
    assert "killed 2 times" in service.store.record(ids[1]).reason
    assert attempts_in(service.store, ids[1]) == 2
    for job_id in ids:
        check_one_end(service, job_id)


@server
def test_a_follower_is_cancelled_while_it_runs(service: Service, line: Line) -> None:
    first, cancelled, last = line.add("nothing"), line.add("wait"), line.add("nothing")
    line.start()
    service.begun(cancelled)
    assert service.queue.cancel(cancelled).state == "cancelled"
    for job_id in (first, last):
        assert service.ended(job_id).state == "finished"
    assert process_of(service, last) == process_of(service, first)
    for job_id in (first, cancelled, last):
        check_one_end(service, job_id)


@server
def test_a_follower_cancelled_in_line_never_begins(service: Service, line: Line) -> None:
    first, running, cancelled = line.add("nothing"), line.add("wait"), line.add("nothing")
    line.start()
    service.begun(running)
    service.queue.cancel(cancelled)
    (folder(service, running) / "go").touch()
    assert service.ended(running).state == "finished"
    assert service.ended(service.submit("nothing")).state == "finished"
    assert attempts_in(service.store, cancelled) == 0
    for job_id in (first, running, cancelled):
        check_one_end(service, job_id)


@server
def test_each_follower_has_its_own_time_limit(settings: Settings) -> None:
    """Three of 0.7 s pass a limit of 1 s for each; one that takes too long fails alone."""
    with running_pool(replace(settings, time_limit=1, reconcile_every=1e5)) as service:
        first = service.submit("wait", seconds=0.5)
        service.begun(first)
        ids = [service.submit("wait", model="m", seconds=0.7) for _ in range(3)]
        slow = service.submit("wait", model="m")
        last = service.submit("nothing", model="m")
        assert [service.ended(job_id).state for job_id in (*ids, slow, last)] == [
            "finished", "finished", "finished", "failed", "finished",
        ]  # fmt: skip
        assert "longer than the 1 s allowed" in service.store.record(slow).reason
        check_one_end(service, slow)


@server
def test_a_job_that_lacks_memory_beside_others_is_tried_alone(service: Service, line: Line) -> None:
    ids = [line.add("nothing"), line.add("allocate", bytes=2 * 1024**3), line.add("nothing")]
    line.start()
    assert [service.ended(job_id).state for job_id in ids] == ["finished", "failed", "finished"]
    record = service.store.record(ids[1])
    assert "more than the 1.0 GiB of memory allowed" in record.reason
    assert record.attempts == 2
    assert "alone" in [event.reason or "" for event in record.history if event.state == "queued"][1]
    assert {mark.split("-")[0] for mark in process_of(service, ids[1])} == {"shared", "alone"}
    check_one_end(service, ids[1])


@server
def test_a_question_is_answered_between_two_followers(service: Service, line: Line) -> None:
    done = line.add("nothing", None)
    ids = [line.add("wait", seconds=0.5) for _ in range(4)]
    line.start()
    service.begun(ids[1])
    answer = service.queue.make_artefact(done, "preview", "lift", "deformed", wait=20.0)
    assert answer.state == "done"
    assert not service.store.record(ids[3]).is_final
    for job_id in ids:
        assert service.ended(job_id).state == "finished"


@server
def test_a_follower_that_outlasts_the_grace_is_handed_back_and_not_counted(
    settings: Settings,
) -> None:
    with running_pool(replace(settings, shutdown_grace=1.5, reconcile_every=1e5)) as service:
        line = Line(service)
        first, running, waiting = line.add("nothing"), line.add("wait"), line.add("nothing")
        line.start()
        service.begun(running)
        assert service.stop() == 0
        record = service.store.record(running)
        assert (record.state, record.attempts) == ("queued", 0)
        assert service.store.record(first).state == "finished"
        assert service.queue.waiting() == {running, waiting}
    with running_pool(settings) as service:
        (folder(service, running) / "go").touch()
        for job_id in (running, waiting):
            assert service.ended(job_id).state == "finished"
            check_one_end(service, job_id)


@server
def test_followers_outlive_everything_being_killed(settings: Settings) -> None:
    with running_pool(settings) as service:
        line = Line(service)
        ids = [line.add("nothing"), line.add("wait"), line.add("nothing")]
        line.start()
        service.begun(ids[1])
        workers = service.workers()
        service.process.kill()
        for worker in workers:
            worker.kill()
    with running_pool(settings) as service:
        (folder(service, ids[1]) / "go").touch()
        for job_id in ids:
            assert service.ended(job_id).state == "finished"
            check_one_end(service, job_id)


@server
@pytest.mark.slow
def test_under_random_kills_every_job_of_a_model_ends_once(settings: Settings) -> None:
    chance = random.Random(5)
    with running_pool(replace(settings, workers=2)) as service:
        ids = [service.submit("wait", model=chance.choice("mn"), seconds=0.2) for _ in range(24)]
        for round_number in range(20):
            victims = service.horses() if round_number % 3 else service.workers()
            if victims:
                with suppress(ProcessLookupError):  # it may just have ended
                    os.kill(chance.choice(victims).pid, signal.SIGKILL)
            if round_number == 10:
                service.queue.connection.flushall()
            if chance.random() < 0.2 and (unfinished := service.store.unfinished()):
                service.queue.cancel(chance.choice(unfinished))
            eventually(service.workers)
        for job_id in ids:
            assert service.ended(job_id).attempts <= 2
            check_one_end(service, job_id)

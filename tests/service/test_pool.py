"""Real forking workers: whatever is killed, each job ends in exactly one final state."""

import json
import os
import random
import signal
from contextlib import suppress
from dataclasses import replace

import psutil
import pytest

from tests.service_pool import (
    PATIENCE,
    RESULTS,
    Service,
    accept,
    attempts_in,
    check_one_end,
    eventually,
    running_pool,
)
from workers.settings import Settings

pytestmark = pytest.mark.server


# --- the ordinary course -------------------------------------------------------------------------


def test_a_job_runs_and_its_results_are_published(service: Service) -> None:
    record = service.ended(service.submit("nothing"))
    assert (record.state, record.attempts) == ("finished", 1)
    assert record.cautions == ({"code": "made-up"},)
    folder = service.store.results_path(record.id)
    for name in RESULTS:
        assert (folder / name).read_bytes() == service.store.document(record.id)
    check_one_end(service, record.id)


def test_workers_count_how_jobs_ended_and_how_long_each_stage_took(service: Service) -> None:
    """Stages as the stand-in reports them; every line that a worker logs is a JSON object."""
    service.ended(service.submit("wait", seconds=0.2))
    job_id = service.submit("raise", error="DocumentError", message="too thin")
    service.ended(job_id)
    ended = {("finished", ""): 1, ("failed", "document"): 1}
    eventually(lambda: service.queue.tallies.ended() == ended)
    stages = service.queue.tallies.stages()
    assert 0.2 <= stages["solving"].total < PATIENCE
    assert sum(stages["waiting"].counts) == 2
    log = (service.settings.store / "pool.log").read_text().splitlines()
    lines = [json.loads(line) for line in log]
    assert any(line["logger"] == "workers.tasks" and line.get("job") == job_id for line in lines)


def test_progress_is_reported_by_stage(service: Service) -> None:
    job_id = service.submit("wait")
    expected = {"stage": "solving", "fraction": 0.25}
    eventually(lambda: service.queue.progress(job_id) == expected)
    service.queue.cancel(job_id)


def test_faults_of_the_document_end_the_job_with_their_places(service: Service) -> None:
    record = service.ended(service.submit("raise", error="DocumentError", message="too thin"))
    assert record.state == "failed"
    assert [f.as_json() for f in record.faults] == [{"pointer": "/plate", "message": "too thin"}]
    check_one_end(service, record.id)


def test_an_error_of_ours_is_called_that_and_not_tried_again(service: Service) -> None:
    record = service.ended(service.submit("raise", error="RuntimeError", message="slipped"))
    assert (record.state, record.attempts) == ("failed", 1)
    assert "Fishplate itself failed" in record.reason
    assert "slipped" in record.reason
    check_one_end(service, record.id)


def test_a_job_in_line_twice_runs_once(service: Service) -> None:
    first = service.submit("wait")
    service.begun(first)
    job_id = accept(service.store, "nothing")
    service.queue.submit(job_id)
    service.queue.connection.rpush("rq:queue:fishplate-bulk", job_id)
    service.queue.cancel(first)
    assert service.ended(job_id).state == "finished"
    eventually(lambda: not service.queue.waiting())
    assert attempts_in(service.store, job_id) == 1
    check_one_end(service, job_id)


def test_one_interactive_job_does_not_wait_behind_many_in_bulk(service: Service) -> None:
    """With one worker: it begins when what runs has ended, before all that came earlier."""
    running = service.submit("wait")
    service.begun(running)
    bulk = [service.submit("nothing") for _ in range(20)]
    single = service.submit("nothing", priority="interactive")
    (service.store.jobs.path(running) / "go").touch()
    ended = [service.ended(job_id) for job_id in (single, *bulk)]
    began = [record.started for record in ended]
    assert began[0] <= min(began[1:])


def test_workers_are_counted(service: Service) -> None:
    eventually(lambda: service.queue.workers_alive() == 1)


# --- artefacts -----------------------------------------------------------------------------------


def test_an_artefact_is_made_ahead_of_the_jobs_in_line(service: Service) -> None:
    done = service.submit("nothing")
    service.ended(done)
    running = service.submit("wait")
    service.begun(running)
    waiting = service.submit("wait")
    assert service.queue.make_artefact(done, "preview", "lift", "deformed").state == "pending"
    (service.store.jobs.path(running) / "go").touch()
    answer = service.queue.make_artefact(done, "preview", "lift", "deformed", wait=20.0)
    assert answer.state == "done"
    assert (service.store.results_path(done) / "previews/lift/deformed.png").is_file()
    # The one in line has not ended: the artefact was not made after it.
    assert not service.store.record(waiting).is_final
    service.queue.cancel(waiting)


@pytest.mark.parametrize(
    ("do", "reason"), [("nothing", "nothing of the name 'film'"), ("wait", "it has no results")]
)
def test_an_artefact_that_cannot_be_made_is_refused_with_the_reason(
    settings: Settings, do: str, reason: str
) -> None:
    with running_pool(replace(settings, workers=2)) as service:
        job_id = service.submit(do)
        service.begun(job_id)
        kind = "film" if do == "nothing" else "field"
        if do == "nothing":
            service.ended(job_id)
        answer = service.queue.make_artefact(job_id, kind, "lift", wait=20.0)
        assert answer.state == "failed"
        assert reason in answer.reason


# --- killed --------------------------------------------------------------------------------------


@pytest.mark.parametrize("number", [signal.SIGKILL, signal.SIGSEGV, signal.SIGABRT])
def test_a_killed_work_horse_is_followed_by_a_second_attempt(
    patient_service: Service, number: signal.Signals
) -> None:
    service = patient_service  # its worker alone has to notice
    record = service.ended(service.submit("die", times=1, signal_number=int(number)))
    assert (record.state, record.attempts) == ("finished", 2)
    assert not list(service.store.results_path(record.id).glob("half"))
    check_one_end(service, record.id)


def test_a_job_killed_twice_fails_and_says_why(patient_service: Service) -> None:
    service = patient_service
    record = service.ended(service.submit("die", times=9))
    assert (record.state, record.attempts) == ("failed", 2)
    assert "killed 2 times" in record.reason
    assert "memory" in record.reason
    assert record.cause == "killed"
    assert attempts_in(service.store, record.id) == 2
    check_one_end(service, record.id)


def test_processes_that_a_killed_work_horse_started_end_with_it(
    patient_service: Service,
) -> None:
    """Else they would keep its claim on the job, which they have inherited."""
    service = patient_service
    record = service.ended(service.submit("leave_child"))
    assert (record.state, record.attempts) == ("finished", 2)
    (child,) = service.store.jobs.path(record.id).glob("child-*")
    pid = int(child.name.removeprefix("child-"))
    eventually(lambda: not psutil.pid_exists(pid))


def test_a_killed_worker_is_replaced_and_its_job_begun_again(service: Service) -> None:
    job_id = service.submit("wait")
    service.begun(job_id)
    (worker,), (horse,) = service.workers(), service.horses()
    worker.kill()
    psutil.wait_procs([horse], timeout=10.0)
    assert not horse.is_running()  # nobody would watch its limits
    eventually(lambda: attempts_in(service.store, job_id) == 2)
    assert service.workers() != [worker]
    (service.store.jobs.path(job_id) / "go").touch()
    record = service.ended(job_id)
    assert (record.state, record.attempts) == ("finished", 2)
    check_one_end(service, job_id)


def test_jobs_outlive_everything_being_killed(settings: Settings) -> None:
    with running_pool(settings) as first:
        running, waiting = first.submit("wait"), first.submit("nothing")
        first.begun(running)
        workers, horses = first.workers(), first.horses()
        first.process.kill()
        for worker in workers:
            worker.kill()
        psutil.wait_procs(horses, timeout=10.0)
    with running_pool(settings) as second:
        (second.store.jobs.path(running) / "go").touch()
        for job_id in (running, waiting):
            assert second.ended(job_id).state == "finished"
            check_one_end(second, job_id)


def test_the_workers_of_a_killed_pool_end_after_their_job(service: Service) -> None:
    job_id = service.submit("wait")
    service.begun(job_id)
    (worker,) = service.workers()
    service.process.kill()
    (service.store.jobs.path(job_id) / "go").touch()
    assert service.ended(job_id).state == "finished"
    worker.wait(timeout=10.0)
    check_one_end(service, job_id)


def test_jobs_that_a_flushed_redis_forgot_all_end(service: Service) -> None:
    running = service.submit("wait")
    service.begun(running)
    waiting = [service.submit("nothing") for _ in range(3)]
    service.queue.connection.flushall()
    (service.store.jobs.path(running) / "go").touch()
    for job_id in (running, *waiting):
        assert service.ended(job_id).state == "finished"
        check_one_end(service, job_id)


def test_jobs_end_although_redis_is_killed(settings: Settings) -> None:
    """With the private server: it comes back with the pool, and the store knows what is due."""
    private = replace(settings, redis_url=None)
    with running_pool(private) as service:
        job_id = accept(service.store, "wait")
        service.begun(job_id)
        redis_of(service).kill()
        (service.store.jobs.path(job_id) / "go").touch()
        assert service.ended(job_id).state == "finished"
        late = accept(service.store, "nothing")
        assert service.ended(late).state == "finished"


def test_a_running_job_goes_on_while_redis_is_away(settings: Settings) -> None:
    """Longer than the time between two signs of life of a worker that works, which is 5 s."""
    private = replace(settings, redis_url=None)
    with running_pool(private) as service:
        job_id = accept(service.store, "wait")
        service.begun(job_id)
        service.process.send_signal(signal.SIGSTOP)  # nobody starts the server again
        redis_of(service).kill()
        log = private.store / "pool.log"
        eventually(lambda: "Redis does not hear" in log.read_text())
        service.process.send_signal(signal.SIGCONT)
        (service.store.jobs.path(job_id) / "go").touch()
        record = service.ended(job_id)
        assert (record.state, record.attempts) == ("finished", 1)
        check_one_end(service, job_id)


def test_a_worker_is_known_again_to_a_redis_that_lost_its_data(service: Service) -> None:
    """Else the server would count as not ready, for want of workers."""
    redis = service.queue.connection
    eventually(lambda: any(client["cmd"] == "blpop" for client in redis.client_list()))
    workers = service.workers()
    redis.flushall()
    service.ended(service.submit("nothing"))
    eventually(lambda: service.queue.workers_alive() == 1)
    assert service.workers() == workers


def redis_of(service: Service) -> psutil.Process:
    return next(c for c in psutil.Process(service.process.pid).children() if "redis" in c.name())


# --- cancelled -----------------------------------------------------------------------------------


def test_a_running_job_is_cancelled_at_once_and_its_process_killed(
    patient_service: Service,
) -> None:
    service = patient_service
    job_id = service.submit("block", seconds=60)  # would notice nothing by itself
    service.begun(job_id)
    (horse,) = service.horses()
    assert service.queue.cancel(job_id).state == "cancelled"
    horse.wait(timeout=10.0)
    after = service.submit("nothing")
    assert service.ended(after).state == "finished"
    check_one_end(service, job_id)


def test_a_job_cancelled_while_redis_is_away_stops_by_itself(patient_service: Service) -> None:
    service = patient_service
    job_id = service.submit("wait")
    service.begun(job_id)
    (horse,) = service.horses()
    service.store.transition(job_id, "cancelled")  # nobody tells the worker
    horse.wait(timeout=10.0)
    check_one_end(service, job_id)


def test_a_queued_job_that_is_cancelled_never_begins(service: Service) -> None:
    running = service.submit("wait")
    service.begun(running)
    job_id = service.submit("nothing")
    service.queue.cancel(job_id)
    (service.store.jobs.path(running) / "go").touch()
    service.ended(service.submit("nothing"))
    assert attempts_in(service.store, job_id) == 0
    check_one_end(service, job_id)


def test_a_running_job_that_is_cancelled_and_removed_leaves_nothing(service: Service) -> None:
    job_id = service.submit("wait")
    service.begun(job_id)
    service.queue.cancel(job_id)
    service.store.remove(job_id)
    assert service.ended(service.submit("nothing")).state == "finished"
    assert not service.store.jobs.path(job_id).exists()


# --- limits --------------------------------------------------------------------------------------


def test_a_job_over_its_time_fails_and_says_so(settings: Settings) -> None:
    with running_pool(replace(settings, time_limit=1)) as service:
        record = service.ended(service.submit("wait"))
        assert (record.state, record.attempts) == ("failed", 1)
        assert "longer than the 1 s allowed" in record.reason
        assert record.cause == "time"
        check_one_end(service, record.id)


@pytest.mark.slow
def test_a_job_over_its_time_inside_compiled_code_is_killed_from_outside(
    settings: Settings,
) -> None:
    # rq kills 60 s after its own limit, which is 15 s after ours.
    with running_pool(replace(settings, time_limit=1)) as service:
        job_id = service.submit("block", seconds=300)
        record = eventually(
            lambda: (r := service.store.record(job_id)).is_final and r, patience=120.0
        )
        assert (record.state, record.attempts) == ("failed", 1)
        assert "longer than the 1 s allowed" in record.reason
        check_one_end(service, job_id)


def test_a_job_over_its_memory_fails_and_says_so(service: Service) -> None:
    record = service.ended(service.submit("allocate", bytes=2 * 1024**3))
    assert (record.state, record.attempts) == ("failed", 1)
    assert "more than the 1.0 GiB of memory allowed" in record.reason
    check_one_end(service, record.id)


def test_a_job_within_its_memory_finishes(service: Service) -> None:
    record = service.ended(service.submit("allocate", bytes=256 * 1024**2))
    assert record.state == "finished"


def test_a_job_that_fills_the_disk_fails_and_says_so(service: Service) -> None:
    # The kernel refuses writes beyond RLIMIT_FSIZE as it would on a full disk (setrlimit(2)).
    (worker,) = eventually(service.workers)
    worker.rlimit(psutil.RLIMIT_FSIZE, (1 << 20, 1 << 20))
    record = service.ended(service.submit("fill", bytes=2 << 20))
    assert (record.state, record.attempts, record.cause) == ("failed", 2, "disk")
    assert "begins anew when there is room" in record.history[2].reason
    assert "disk of the job store is full" in record.reason
    check_one_end(service, record.id)


def test_jobs_wait_in_line_while_the_disk_is_full(service: Service) -> None:
    (worker,) = eventually(service.workers)
    running = service.submit("wait")
    service.begun(running)
    waiting = [service.submit("nothing") for _ in range(3)]
    for process in (worker, *service.horses()):
        process.rlimit(psutil.RLIMIT_FSIZE, (0, psutil.RLIM_INFINITY))
    (service.store.jobs.path(running) / "go").touch()
    # Its attempt came to nothing; the pool, which is not limited, puts it in line again.
    eventually(lambda: service.store.record(running).state == "queued")
    eventually(lambda: service.queue.waiting() == {running, *waiting})
    assert {service.store.record(job_id).attempts for job_id in waiting} == {0}
    worker.rlimit(psutil.RLIMIT_FSIZE, (psutil.RLIM_INFINITY, psutil.RLIM_INFINITY))
    for job_id in (running, *waiting):
        record = service.ended(job_id)
        assert (record.state, record.attempts) == ("finished", 2 if job_id == running else 1)
        check_one_end(service, job_id)


# --- shutting down -------------------------------------------------------------------------------


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_a_stopping_pool_lets_a_running_job_end(service: Service, number: signal.Signals) -> None:
    job_id = service.submit("wait", seconds=1.5)
    service.begun(job_id)
    waiting = service.submit("nothing")
    assert service.stop(number) == 0
    assert service.store.record(job_id).state == "finished"
    assert service.store.record(waiting).state == "queued"
    check_one_end(service, job_id)


def test_a_job_that_outlasts_the_grace_is_handed_back_and_not_counted(
    settings: Settings,
) -> None:
    with running_pool(replace(settings, shutdown_grace=1.5)) as service:
        job_id = service.submit("wait")
        service.begun(job_id)
        horses = service.horses()
        assert service.stop() == 0
        assert not any(horse.is_running() for horse in horses)
        record = service.store.record(job_id)
        assert (record.state, record.attempts) == ("queued", 0)
        assert service.queue.waiting() == {job_id}
    with running_pool(settings) as service:
        (service.store.jobs.path(job_id) / "go").touch()
        assert service.ended(job_id).state == "finished"


def test_the_private_redis_ends_with_the_pool_and_remembers(settings: Settings) -> None:
    private = replace(settings, redis_url=None, shutdown_grace=1.5)
    with running_pool(private) as service:
        job_id = accept(service.store, "wait")
        service.begun(job_id)
        children = psutil.Process(service.process.pid).children(recursive=True)
        assert any("redis-server" in child.name() for child in children)
        assert service.stop() == 0
        assert not any(child.is_running() for child in children)
    with running_pool(private) as service:
        (service.store.jobs.path(job_id) / "go").touch()
        assert service.ended(job_id).state == "finished"


# --- several machines ----------------------------------------------------------------------------


def test_a_job_of_a_pool_that_is_gone_is_begun_again_by_another_one(settings: Settings) -> None:
    """Whatever either knows of the other it knows from locks and from Redis: no process ids."""
    with running_pool(settings) as first, running_pool(settings) as second:
        eventually(lambda: first.queue.workers_alive() == 2)
        ids = [first.submit("wait") for _ in range(2)]
        for job_id in ids:
            first.begun(job_id)
        killed = [first.process.pid, *(p.pid for p in (*first.workers(), *first.horses()))]
        for pid in killed:
            os.kill(pid, signal.SIGKILL)
        eventually(lambda: sum(attempts_in(second.store, job_id) for job_id in ids) == 3)
        for job_id in ids:
            (second.store.jobs.path(job_id) / "go").touch()
        attempts = [second.ended(job_id).attempts for job_id in ids]
        assert sorted(attempts) == [1, 2]
        for job_id in ids:
            check_one_end(second, job_id)


# --- everything at once --------------------------------------------------------------------------


@pytest.mark.slow
def test_under_random_kills_every_job_ends_once(settings: Settings) -> None:
    chance = random.Random(4)
    with running_pool(replace(settings, workers=2)) as service:
        ids = [service.submit("wait", seconds=0.3) for _ in range(16)]
        for round_number in range(20):
            victims = service.horses() if round_number % 3 else service.workers()
            if victims:
                with suppress(ProcessLookupError):  # it may just have ended
                    os.kill(chance.choice(victims).pid, signal.SIGKILL)
            if round_number == 10:
                service.queue.connection.flushall()
            if chance.random() < 0.2:
                unfinished = service.store.unfinished()
                if unfinished:
                    service.queue.cancel(chance.choice(unfinished))
            eventually(service.workers)
        for job_id in ids:
            record = service.ended(job_id)
            assert record.attempts <= 2
            check_one_end(service, job_id)

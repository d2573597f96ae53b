"""Nothing accepted is lost, nothing is decided twice: with a real Redis and no worker."""

import threading

import pytest

from tests.service_pool import accept
from workers.errors import StoreError
from workers.queue import Queue
from workers.reconcile import reconcile, settle
from workers.store import Store


def look_round(queue: Queue) -> None:
    reconcile(queue.store, queue)


def test_an_accepted_job_that_was_never_queued_is_queued(queue: Queue) -> None:
    job_id = accept(queue.store, "nothing")
    look_round(queue)
    assert queue.waiting() == {job_id}
    assert queue.store.record(job_id).state == "queued"


def test_jobs_that_a_flushed_redis_forgot_are_queued_again_oldest_first(queue: Queue) -> None:
    ids = [accept(queue.store, "nothing") for _ in range(3)]
    for job_id in ids:
        queue.submit(job_id)
    queue.connection.flushall()
    look_round(queue)
    assert queue._lines["bulk"].get_job_ids() == ids


def test_final_jobs_are_left_alone(queue: Queue) -> None:
    job_id = accept(queue.store, "nothing")
    queue.store.transition(job_id, "cancelled")
    look_round(queue)
    assert queue.waiting() == set()


def test_a_job_whose_worker_is_dead_is_begun_once_more_and_then_given_up(queue: Queue) -> None:
    store = queue.store
    job_id = accept(store, "nothing")
    store.transition(job_id, "running")
    look_round(queue)
    assert store.record(job_id).state == "queued"
    assert queue.waiting() == {job_id}

    store.transition(job_id, "running")
    queue.connection.flushall()
    look_round(queue)
    record = store.record(job_id)
    assert (record.state, record.attempts) == ("failed", 2)
    assert "killed 2 times" in record.reason
    assert queue.waiting() == set()


def test_a_job_that_somebody_works_on_is_left_alone(queue: Queue) -> None:
    store = queue.store
    job_id = accept(store, "nothing")
    with store.working(job_id):
        store.transition(job_id, "running")
        look_round(queue)
        assert store.record(job_id).state == "running"
    assert queue.waiting() == set()


def test_an_attempt_handed_back_by_a_shutdown_does_not_count(queue: Queue) -> None:
    store = queue.store
    job_id = accept(store, "nothing")
    for _ in range(3):
        store.transition(job_id, "running")
        settle(store, queue, job_id, handed_back=True)
        assert (store.record(job_id).state, store.record(job_id).attempts) == ("queued", 0)
    assert queue.waiting() == {job_id}


def test_a_kill_on_purpose_is_the_verdict(queue: Queue) -> None:
    job_id = accept(queue.store, "nothing")
    queue.store.transition(job_id, "running")
    settle(queue.store, queue, job_id, verdict="It took too long.")
    record = queue.store.record(job_id)
    assert (record.state, record.reason) == ("failed", "It took too long.")


def test_published_results_win_over_a_lost_record(
    queue: Queue, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Killed between rename and record: the job is finished, not begun anew."""
    store = queue.store
    job_id = accept(store, "nothing")
    store.transition(job_id, "running")
    with store.working(job_id) as staging, monkeypatch.context() as patch:
        patch.setattr(Store, "_replace", lambda *_: None)  # as if killed just there
        store.publish(job_id, staging)
    assert store.record(job_id).state == "running"
    look_round(queue)
    assert store.record(job_id).state == "finished"
    assert queue.waiting() == set()


def test_many_reconcilers_at_once_decide_once(queue: Queue) -> None:
    store = queue.store
    ids = [accept(store, "nothing") for _ in range(5)]
    for job_id in ids:
        store.transition(job_id, "running")
    threads = [threading.Thread(target=look_round, args=(queue,)) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    for job_id in ids:
        assert [e.state for e in store.record(job_id).history] == ["queued", "running", "queued"]
    assert queue.waiting() == set(ids)


def test_an_index_entry_without_a_job_does_not_stop_the_rest(
    queue: Queue, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("workers.store.NEWS_ARRIVE", 0.0)
    store = queue.store
    gone, job_id = accept(store, "nothing"), accept(store, "nothing")
    store.jobs.path(gone).rename(store.root / "elsewhere")
    look_round(queue)
    assert queue.waiting() == {job_id}
    assert store.unfinished() == (job_id,)


def test_what_a_cancelled_and_killed_worker_left_is_cleared_away(queue: Queue) -> None:
    store = queue.store
    job_id = accept(store, "nothing")
    store.transition(job_id, "running")
    staging = store.jobs.path(job_id) / "staging"
    staging.mkdir()
    store.transition(job_id, "cancelled")
    look_round(queue)
    assert not staging.exists()
    assert store.unfinished() == ()
    assert store.record(job_id).state == "cancelled"


def test_a_damaged_record_does_not_hold_up_the_others(queue: Queue) -> None:
    store = queue.store
    damaged, job_id = accept(store, "nothing"), accept(store, "nothing")
    (store.jobs.path(damaged) / "record.json").write_text('{"id": ')
    look_round(queue)
    assert queue.waiting() == {job_id}
    assert [record.id for record in store.list().records] == [job_id]
    with pytest.raises(StoreError, match=f"{damaged} is damaged"):
        store.record(damaged)


def test_fragments_that_a_flush_leaves_in_redis_do_not_matter(queue: Queue) -> None:
    """A worker's next sign of life writes a single field of a job that the flush removed."""
    job_id = accept(queue.store, "nothing")
    queue.connection.hset(f"rq:job:{job_id}", "last_heartbeat", "2031-04-05T06:07:08.000000Z")
    look_round(queue)
    assert queue.waiting() == {job_id}
    queue.cancel(job_id)
    assert queue.waiting() == set()

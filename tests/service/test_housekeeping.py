"""What is removed from the store, and what never is."""

import json
import os
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from tests.service_pool import eventually, running_pool
from workers import housekeeping, record
from workers.housekeeping import disk_usage, keep_house, usage_of
from workers.settings import Settings
from workers.store import Store

DAY = 86_400.0
Make = Callable[..., str]


@pytest.fixture
def settings(store: Store) -> Settings:
    return Settings(store=store.root)


@pytest.fixture
def make(store: Store, monkeypatch: pytest.MonkeyPatch) -> Make:
    """A finished job of some size that was accepted, and ended, so many days ago."""

    def job(*, age: float = 0.0, kilobytes: int = 0, state: str = "finished") -> str:
        moment = datetime.now(UTC) - timedelta(days=age)
        with monkeypatch.context() as patch:
            patch.setattr(record.time, "time_ns", lambda: int(moment.timestamp() * 1e9))
            patch.setattr("workers.store.now", lambda: record.timestamp(moment))
            patch.setattr("workers.record.now", lambda: record.timestamp(moment))
            job_id = store.accept(b"{}", title="lug").record.id
            if state != "queued":
                store.transition(job_id, "running")
            if state == "finished":
                with store.working(job_id) as staging:
                    assert staging is not None
                    (staging / "displacements.npy").write_bytes(os.urandom(1024 * kilobytes))
                    store.publish(job_id, staging)
        return job_id

    return job


def left(store: Store) -> set[str]:
    return {r.id for r in store.list(limit=200).records}


def test_nothing_is_removed_unasked(store: Store, settings: Settings, make: Make) -> None:
    old = make(age=4000, kilobytes=100)
    keep_house(settings)
    assert left(store) == {old}


def test_final_jobs_are_removed_so_many_days_after_their_end(
    store: Store, settings: Settings, make: Make
) -> None:
    make(age=11)
    kept = {make(age=9), make(age=40, state="queued"), make(age=40, state="running")}
    pinned = make(age=40)
    store.pin(pinned, True)
    keep_house(replace(settings, keep_days=10.0))
    assert left(store) == {*kept, pinned}


def test_a_job_that_ended_late_is_kept_although_it_was_accepted_early(
    store: Store, settings: Settings, make: Make
) -> None:
    job_id = make(age=40, state="running")
    store.transition(job_id, "failed", reason="slipped")
    keep_house(replace(settings, keep_days=10.0))
    assert left(store) == {job_id}


def test_the_oldest_make_room_until_the_rest_fits(
    store: Store, settings: Settings, make: Make
) -> None:
    """Five of 200 kB, a little more each for records; 700 kB hold three."""
    jobs = [make(age=age, kilobytes=200) for age in (5, 4, 3, 2, 1)]
    store.pin(jobs[1], True)
    waiting = make(age=9, state="queued")
    keep_house(replace(settings, keep_bytes=700 * 1024))
    assert left(store) == {jobs[1], jobs[3], jobs[4], waiting}


def test_what_was_removed_is_in_the_audit_log_with_the_reason(
    store: Store, settings: Settings, make: Make
) -> None:
    gone = make(age=11)
    keep_house(replace(settings, keep_days=10.0))
    (path,) = (store.root / "audit").iterdir()
    entry = json.loads(path.read_text())
    assert (entry["action"], entry["job"], entry["who"]) == ("expired", gone, "housekeeping")
    assert entry["reason"] == "older than 10 days"


def test_what_the_store_holds_is_written_down(store: Store, settings: Settings, make: Make) -> None:
    """As `du` counts it: blocks on the disk."""
    assert usage_of(store.root) is None
    ids = [make(kilobytes=100) for _ in range(3)]
    keep_house(settings)
    usage = usage_of(store.root)
    assert usage is not None
    assert usage.jobs == 3
    assert usage.bytes == sum(disk_usage(store.jobs.path(i)) for i in ids)
    assert usage.bytes >= 3 * 100 * 1024


def test_empty_days_are_tidied_away_and_come_back_when_needed(
    store: Store, settings: Settings, make: Make
) -> None:
    old = make(age=40)
    store.remove(old)
    kept = make(age=30, state="running")
    keep_house(settings)
    assert [day.name for day in (store.root / "jobs").iterdir()] == [record.day_of(kept)]
    assert not (store.root / "states" / "failed" / record.day_of(kept)).exists()
    store.transition(kept, "failed", reason="slipped")
    assert [r.id for r in store.list(state="failed").records] == [kept]


def test_two_housekeepers_do_not_meet(
    settings: Settings, monkeypatch: pytest.MonkeyPatch, make: Make
) -> None:
    make()
    looked: list[Path] = []

    def look(folder: Path) -> int:
        looked.append(folder)
        keep_house(settings)  # finds the lock taken, and leaves
        return 0

    monkeypatch.setattr(housekeeping, "disk_usage", look)
    keep_house(settings)
    assert len(looked) == 1


@pytest.mark.server
def test_the_pool_has_the_house_kept(store: Store, make: Make, tmp_path: Path) -> None:
    gone = make(age=11)
    settings = Settings(store=store.root, workers=1, keep_days=10.0, housekeeping_every=0.2)
    with running_pool(settings):
        eventually(lambda: gone not in left(store))
        eventually(lambda: usage_of(store.root))

"""The store: accepted means on the disk, one final state, results all at once or not at all."""

import errno
import itertools
import json
import os
import resource
import shutil
import subprocess
import sys
import threading
from collections import namedtuple
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from pathlib import Path
from typing import Any
from unittest.mock import MagicMock

import pytest

from tests.service_pool import ROOT
from workers import durable
from workers.errors import (
    Fault,
    KeyConflictError,
    NotFinalError,
    PinnedError,
    StoreError,
    TransitionError,
    UnknownJobError,
)
from workers.record import Record, is_id, new_id
from workers.store import Store


class Crash(BaseException):
    """The process ends here."""


def crash(*_arguments: Any) -> None:
    raise Crash


def accept(store: Store, **more: Any) -> str:
    return store.accept(b'{"plate": 1}', **{"title": "lug", **more}).record.id


def begin(store: Store, job_id: str) -> None:
    store.transition(job_id, "running")


def finish(store: Store, job_id: str) -> Record:
    begin(store, job_id)
    with store.working(job_id) as staging:
        (staging / "results.json").write_text("{}")
        return store.publish(job_id, staging)


def everything_in(store: Store) -> list[Path]:
    """All that is left of jobs, in any corner of the store."""
    return [path for path in store.root.rglob("*") if is_id(path.name)]


# --- accepting -----------------------------------------------------------------------------------


def test_what_was_accepted_can_be_read_by_another_process(store: Store) -> None:
    document = '{"title": "Hebezeug-Öse"}'.encode()
    record, created = store.accept(document, title="Öse", label="yard 3")
    assert created
    assert (record.state, record.title, record.label) == ("queued", "Öse", "yard 3")
    assert Store(store.root).record(record.id) == record
    assert Store(store.root).document(record.id) == document


def test_file_and_folders_are_synced_before_accept_returns(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Every new file and every folder with a new name in it goes through fsync."""
    accept(store)  # makes the folders that all jobs share
    synced: set[str] = set()
    real_fsync = os.fsync

    def fsync(descriptor: int) -> None:
        synced.add(str(Path(f"/proc/self/fd/{descriptor}").readlink()))
        real_fsync(descriptor)

    monkeypatch.setattr(os, "fsync", fsync)
    job_id = accept(store)
    folder = store.jobs.path(job_id)
    incoming = store.root / "incoming" / job_id
    queued = store.root / "states" / "queued" / folder.parent.name
    for path in (incoming / "job.json", incoming / "record.json", incoming, folder.parent, queued):
        assert str(path) in synced


@pytest.mark.parametrize("refused", range(1, 11))
def test_a_full_disk_at_any_step_leaves_nothing_half_accepted(
    store: Store, monkeypatch: pytest.MonkeyPatch, refused: int
) -> None:
    """A keyed and labelled job needs ten syncs; whichever of them fails, nothing is accepted."""
    kept = accept(store, key="other", label="yard")
    calls = itertools.count(1)  # from several threads
    real = os.fsync

    def fsync(descriptor: int) -> None:
        if next(calls) == refused:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        real(descriptor)

    with monkeypatch.context() as patch:
        patch.setattr(os, "fsync", fsync)
        with pytest.raises(StoreError, match="could not be filed: No space left") as caught:
            accept(store, key="a key", label="yard")
    assert caught.value.errno == errno.ENOSPC
    assert [r.id for r in store.list().records] == [kept]
    assert store.unfinished() == (kept,)
    assert {path.name for path in everything_in(store)} == {kept}
    # The disk has room again: the same key is as good as new.
    assert store.accept(b"{}", title="again", key="a key").created


FILE_SIZE_LIMIT = """
import resource, sys
from pathlib import Path
from workers.errors import StoreError
from workers.store import Store
resource.setrlimit(resource.RLIMIT_FSIZE, (4096, 4096))
try:
    Store(Path(sys.argv[1])).accept(b"x" * 5000, title="too large for the disk")
except StoreError as error:
    print(error.errno)
"""


def test_a_write_that_the_kernel_cuts_short_is_not_accepted(store: Store) -> None:
    # setrlimit(2): beyond RLIMIT_FSIZE a write fails with EFBIG, after a part was written.
    kept = accept(store)
    run = subprocess.run(
        [sys.executable, "-c", FILE_SIZE_LIMIT, str(store.root)],
        cwd=ROOT, check=True, capture_output=True, text=True,
    )  # fmt: skip
    assert run.stdout.strip() == str(errno.EFBIG)
    assert store.unfinished() == (kept,)
    assert {path.name for path in everything_in(store)} == {kept}


def test_a_store_that_cannot_be_written_says_so(store: Store) -> None:
    store.probe()
    limits = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (1, limits[1]))
    try:
        with pytest.raises(StoreError, match="cannot be written"):
            store.probe()
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, limits)
    assert list((store.root / "incoming").iterdir()) == []


# --- the Idempotency-Key -------------------------------------------------------------------------

ACCEPT = """
import sys
from pathlib import Path
from workers.store import Store
print("ready", flush=True)
sys.stdin.readline()
for key in range(20):
    record, created = Store(Path(sys.argv[1])).accept(b"{}", title="t", key=str(key))
    print(record.id, created)
"""


def test_two_processes_with_the_same_key_make_one_job(store: Store) -> None:
    accepting = [
        subprocess.Popen(
            [sys.executable, "-c", ACCEPT, str(store.root)],
            cwd=ROOT, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True,
        )
        for _ in range(2)
    ]  # fmt: skip
    for process in accepting:
        assert process.stdout is not None
        assert process.stdout.readline() == "ready\n"
    for process in accepting:
        assert process.stdin is not None
        process.stdin.write("\n")
        process.stdin.flush()
    answers = [process.communicate()[0].splitlines() for process in accepting]
    assert len(answers[0]) == len(answers[1]) == 20
    for first, second in zip(*answers, strict=True):
        assert first.split()[0] == second.split()[0]
        assert {first.split()[1], second.split()[1]} == {"True", "False"}
    assert len(store.unfinished()) == 20


def test_a_key_used_for_another_document_is_refused(store: Store) -> None:
    first = accept(store, key="7")
    assert not store.accept(b'{"plate": 1}', title="lug", key="7").created
    with pytest.raises(KeyConflictError) as caught:
        store.accept(b'{"plate": 2}', title="lug", key="7")
    assert caught.value.job_id == first
    assert len(store.list().records) == 1


def test_a_crash_after_the_key_was_written_leaves_the_key_unused(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    with monkeypatch.context() as patch:
        patch.setattr(Store, "_file", crash)
        with suppress(Crash):
            accept(store, key="7")
    assert len(list((store.root / "keys").iterdir())) == 1
    assert store.accept(b"{}", title="lug", key="7").created
    assert len(store.list().records) == 1


def test_a_key_is_free_again_once_its_job_was_removed(store: Store) -> None:
    first = accept(store, key="7")
    store.transition(first, "cancelled")
    store.remove(first)
    assert store.accept(b"{}", title="lug", key="7").created


def test_a_key_that_is_used_again_while_its_job_is_removed_stays_used(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Else a third request with the key would make a second job."""
    first = accept(store, key="7")
    store.transition(first, "cancelled")
    drop, second = store.indexes.drop, []

    def drop_slowly(record: Record) -> None:
        drop(record)
        second.append(accept(store, key="7"))

    with monkeypatch.context() as patch:
        patch.setattr(store.indexes, "drop", drop_slowly)
        store.remove(first)
    again = store.accept(b'{"plate": 1}', title="lug", key="7")
    assert (again.record.id, again.created) == (second[0], False)


def test_after_a_full_disk_a_store_waits_for_more_than_the_last_bytes(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    accept(store)
    disk = namedtuple("disk", "f_blocks f_bavail f_frsize")
    for size, free, enough in [(10**9, 10**3, False), (10**9, 10**6, True), (4000, 300, True)]:
        found = disk(size, free, 1024)
        monkeypatch.setattr(os, "statvfs", MagicMock(return_value=found))
        assert store.has_room() == enough


# --- states --------------------------------------------------------------------------------------


def test_an_illegal_transition_is_refused_and_changes_nothing(store: Store) -> None:
    job_id = accept(store)
    store.transition(job_id, "cancelled", reason="not wanted")
    before = store.record(job_id)
    for state in ("queued", "running", "failed", "cancelled"):
        with pytest.raises(TransitionError):
            store.transition(job_id, state)
    assert store.record(job_id) == before


def test_nothing_is_finished_without_results(store: Store) -> None:
    job_id = accept(store)
    begin(store, job_id)
    with pytest.raises(ValueError, match="publish"):
        store.transition(job_id, "finished")


def test_a_failed_job_keeps_its_faults(store: Store) -> None:
    job_id = accept(store)
    begin(store, job_id)
    faults = (Fault("/plate", "too thin"), Fault("/supports", "none"))
    store.transition(job_id, "failed", reason="two faults", faults=faults)
    assert store.record(job_id).faults == faults


@pytest.mark.parametrize("job_id", ["nothing", "..", new_id()], ids=["word", "path", "id"])
def test_unknown_jobs_are_named(store: Store, job_id: str) -> None:
    for ask in (store.record, store.document, store.results_path, store.remove):
        with pytest.raises(UnknownJobError, match="there is no job"):
            ask(job_id)
    with pytest.raises(UnknownJobError):
        store.transition(job_id, "running")


# --- results -------------------------------------------------------------------------------------


def test_results_appear_all_at_once(store: Store) -> None:
    """While they are written nothing is visible; after publish everything is, cautions too."""
    job_id = accept(store)
    begin(store, job_id)
    with store.working(job_id) as staging:
        for name in ("results.json", "displacements.npy"):
            (staging / name).write_text(name)
            assert not (store.jobs.path(job_id) / "results").exists()
            with pytest.raises(NotFinalError, match="is running"):
                store.results_path(job_id)
        record = store.publish(job_id, staging, [{"code": "engineer-review"}])
    assert record.state == "finished"
    assert record.cautions == ({"code": "engineer-review"},)
    folder = store.results_path(job_id)
    assert {p.name for p in folder.iterdir()} >= {"results.json", "displacements.npy"}
    assert not (store.jobs.path(job_id) / "staging").exists()


def test_results_are_synced_before_they_are_published(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    job_id = accept(store)
    begin(store, job_id)
    steps: list[str] = []
    real_move, real_fsync = durable.move, os.fsync

    def fsync(descriptor: int) -> None:
        steps.append(Path(f"/proc/self/fd/{descriptor}").readlink().name)
        real_fsync(descriptor)

    def move(source: Path, target: Path) -> None:
        steps.append("the rename")
        real_move(source, target)

    with store.working(job_id) as staging:
        (staging / "fields").mkdir()
        (staging / "fields" / "lift.vtu").write_text("x")
        monkeypatch.setattr(os, "fsync", fsync)
        monkeypatch.setattr(durable, "move", move)
        store.publish(job_id, staging)
    assert {"lift.vtu", "fields", "staging"} <= set(steps[: steps.index("the rename")])


@pytest.mark.parametrize("attempt", range(15))
def test_cancelling_a_finishing_job_has_exactly_one_outcome(store: Store, attempt: int) -> None:
    """Whoever comes first wins: cancelled without results, or finished with them."""
    job_id = accept(store)
    begin(store, job_id)
    together = threading.Barrier(2)

    def publish() -> str:
        with store.working(job_id) as staging:
            (staging / "results.json").write_text("{}")
            together.wait()
            with suppress(TransitionError):
                return store.publish(job_id, staging).state
        return "too late"

    def cancel() -> str:
        together.wait()
        with suppress(TransitionError):
            return store.transition(job_id, "cancelled").state
        return "too late"

    with ThreadPoolExecutor(2) as threads:
        outcomes = {f.result() for f in (threads.submit(publish), threads.submit(cancel))}
    record = store.record(job_id)
    assert outcomes == {record.state, "too late"}
    assert sum(event.state in ("finished", "cancelled") for event in record.history) == 1
    has_results = (store.jobs.path(job_id) / "results").exists()
    assert has_results == (record.state == "finished")


def test_a_crash_between_rename_and_record_ends_finished(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    job_id = accept(store)
    begin(store, job_id)
    with store.working(job_id) as staging, monkeypatch.context() as patch:
        (staging / "results.json").write_text("{}")
        patch.setattr(durable, "replace", crash)
        with pytest.raises(Crash):
            store.publish(job_id, staging, [{"code": "engineer-review"}])
    with pytest.raises(NotFinalError):
        store.results_path(job_id)
    assert store.recover_published(job_id)
    assert store.record(job_id).cautions == ({"code": "engineer-review"},)
    assert (store.results_path(job_id) / "results.json").exists()
    assert not store.recover_published(job_id)


def test_only_one_process_works_on_a_job(store: Store) -> None:
    job_id = accept(store)
    with store.working(job_id) as first, store.working(job_id) as second:
        assert first is not None
        assert second is None
    with store.working(job_id) as third:
        assert third is not None


def test_leftovers_of_a_killed_attempt_are_gone_in_the_next(store: Store) -> None:
    job_id = accept(store)
    leftover = store.jobs.path(job_id) / "staging" / "half.vtu"
    leftover.parent.mkdir()
    leftover.touch()
    with store.working(job_id) as staging:
        assert list(staging.iterdir()) == []


# --- lists ---------------------------------------------------------------------------------------


def test_pages_run_from_the_newest_to_the_oldest_without_gap(store: Store) -> None:
    ids = [accept(store) for _ in range(11)]
    seen, after = [], None
    while True:
        page = store.list(after=after, limit=4)
        seen += [record.id for record in page.records]
        assert len(page.records) <= 4
        if (after := page.after) is None:
            break
    assert seen == ids[::-1]


def test_a_job_accepted_between_two_pages_disturbs_neither(store: Store) -> None:
    ids = [accept(store) for _ in range(4)]
    first = store.list(limit=2)
    accept(store)
    second = store.list(limit=2, after=first.after)
    assert [r.id for r in (*first.records, *second.records)] == ids[::-1]


def test_state_and_label_choose(store: Store) -> None:
    ids = {
        (s, la): accept(store, label=la) for s in ("queued", "cancelled") for la in ("a/..", "b")
    }
    for (state, _), job_id in ids.items():
        if state == "cancelled":
            store.transition(job_id, state)
    for (state, label), job_id in ids.items():
        assert [r.id for r in store.list(state=state, label=label).records] == [job_id]
        assert len(store.list(state=state).records) == 2
        assert len(store.list(label=label).records) == 2
    assert store.list(label="no such label").records == ()


@pytest.mark.parametrize(
    "choice",
    [{}, {"state": "cancelled"}, {"label": "rare"}, {"state": "cancelled", "label": "rare"}],
)
def test_a_page_opens_few_records_however_many_there_are(
    store: Store, monkeypatch: pytest.MonkeyPatch, choice: dict[str, str]
) -> None:
    monkeypatch.setattr(os, "fsync", lambda _descriptor: None)  # a test's disk may be slow
    rare = [accept(store, label="rare") for _ in range(5)]
    for job_id in rare:
        store.transition(job_id, "cancelled")
    for _ in range(300):
        accept(store)
    opened = []
    real = store.record
    monkeypatch.setattr(store, "record", lambda job_id: opened.append(job_id) or real(job_id))
    page = store.list(limit=4, **choice)
    assert len(page.records) == 4
    assert len(opened) <= 5


def test_a_cursor_that_is_none_is_refused(store: Store) -> None:
    with pytest.raises(UnknownJobError, match="not a cursor"):
        store.list(after="yesterday")


# --- removing and repairing ----------------------------------------------------------------------


def test_nothing_is_left_of_a_removed_job(store: Store) -> None:
    job_id = accept(store, label="yard", key="7")
    finish(store, job_id)
    store.remove(job_id)
    assert everything_in(store) == []
    assert list((store.root / "keys").iterdir()) == []
    with pytest.raises(UnknownJobError):
        store.record(job_id)


@pytest.mark.parametrize("state", ["queued", "running"])
def test_an_unfinished_job_cannot_be_removed(store: Store, state: str) -> None:
    job_id = accept(store)
    if state == "running":
        begin(store, job_id)
    with pytest.raises(NotFinalError, match=f"is {state}; cancel it first"):
        store.remove(job_id)
    assert store.record(job_id).state == state


def test_indexes_come_back_from_the_records(store: Store) -> None:
    queued, done = accept(store, label="yard"), accept(store)
    finish(store, done)
    for index in ("states", "labels"):
        for path in sorted((store.root / index).rglob("*"), reverse=True):
            path.rmdir() if path.is_dir() else path.unlink()
    assert store.unfinished() == ()
    store.reindex()
    assert store.unfinished() == (queued,)
    assert [r.id for r in store.list(state="finished").records] == [done]
    assert [r.id for r in store.list(label="yard").records] == [queued]


def test_an_index_entry_too_many_is_not_listed_and_can_be_tidied(store: Store) -> None:
    """As after a crash between the record and the index."""
    done = accept(store)
    finish(store, done)
    store.indexes.of_state("queued").add(done)
    assert store.list(state="queued").records == ()
    assert store.unfinished() == (done,)
    store.indexes.tidy(store.record(done))
    assert store.unfinished() == ()
    assert [r.id for r in store.list(state="finished").records] == [done]


def test_a_job_that_is_just_being_accepted_is_not_taken_for_an_unknown_one(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    real_move = durable.move

    def forget_then_move(source: Path, target: Path) -> None:
        store.forget_unknown(source.name)
        real_move(source, target)

    monkeypatch.setattr(durable, "move", forget_then_move)
    job_id = accept(store)
    assert store.unfinished() == (job_id,)


def test_a_record_on_the_disk_is_json_that_a_person_can_read(store: Store) -> None:
    job_id = accept(store)
    record = json.loads((store.jobs.path(job_id) / "record.json").read_text())
    assert record["history"][0]["state"] == "queued"


# --- workspaces, pins ----------------------------------------------------------------------------


def test_lists_are_narrowed_by_workspace_label_and_state_together(store: Store) -> None:
    mine = accept(store, workspace="dock", label="week 3")
    for other in ({"workspace": "slip", "label": "week 3"}, {"workspace": "dock"}):
        accept(store, **other)
    done = accept(store, workspace="dock", label="week 3")
    finish(store, done)

    def listed(**query: Any) -> list[str]:
        return [record.id for record in store.list(**query).records]

    assert listed(workspace="dock", label="week 3") == [done, mine]
    assert listed(workspace="dock", label="week 3", state="queued") == [mine]
    assert listed(workspace="dock", state="finished") == [done]
    assert listed(workspace="yard") == []
    assert len(listed()) == 4


def test_a_page_of_one_workspace_opens_no_records_of_others(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Else one office with ten thousand jobs would make the lists of all others slow."""
    mine = accept(store, workspace="dock")
    for _ in range(20):
        accept(store, workspace="slip")
    opened: list[str] = []
    read = store.record
    monkeypatch.setattr(store, "record", lambda job_id: opened.append(job_id) or read(job_id))
    assert [r.id for r in store.list(workspace="dock").records] == [mine]
    assert opened == [mine]


def test_the_same_key_in_another_workspace_is_another_job(store: Store) -> None:
    first = store.accept(b"{}", title="a", key="one", workspace="dock")
    second = store.accept(b"[]", title="b", key="one", workspace="slip")
    assert first.created
    assert second.created


def test_the_line_of_a_workspace_is_as_long_as_it_has_unfinished_jobs(store: Store) -> None:
    assert store.length_of_line("dock") == 0
    ids = [accept(store, workspace="dock") for _ in range(3)]
    accept(store, workspace="slip")
    assert store.length_of_line("dock") == 3
    finish(store, ids[0])
    store.transition(ids[1], "cancelled")
    assert store.length_of_line("dock") == 1
    store.remove(ids[1])
    begin(store, ids[2])
    assert store.length_of_line("dock") == 1


def test_what_a_crash_left_in_the_line_is_taken_out_but_not_while_it_may_be_news(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    """On a shared folder a job that another machine has just filed may not be seen yet."""
    job_id = accept(store, workspace="dock")
    store.jobs.path(job_id).rename(store.root / "elsewhere")
    store.forget_unknown(job_id)
    assert store.length_of_line("dock") == 1
    monkeypatch.setattr("workers.store.NEWS_ARRIVE", 0.0)
    store.forget_unknown(job_id)
    assert store.length_of_line("dock") == 0


def test_what_is_left_of_a_job_whose_acceptance_was_killed_is_taken_out(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Nobody was told that it was accepted; else it would count as waiting for ever."""

    class Killed(BaseException):
        pass

    def be_killed(*_: Path) -> None:
        raise Killed

    with monkeypatch.context() as patch, suppress(Killed):
        patch.setattr(durable, "move", be_killed)
        accept(store, workspace="dock")
    (job_id,) = store.unfinished()
    store.forget_unknown(job_id)
    assert store.unfinished() == ()
    assert store.length_of_line("dock") == 0
    assert list((store.root / "incoming").iterdir()) == []


def test_indexes_that_an_earlier_version_did_not_have_are_made(store: Store) -> None:
    waiting, done = accept(store), accept(store)
    finish(store, done)
    for name in ("workspaces", "lines"):
        shutil.rmtree(store.root / name)
    store.reindex()
    assert [r.id for r in store.list(workspace="default").records] == [done, waiting]
    assert store.length_of_line("default") == 1


def test_a_record_of_an_earlier_version_is_read(store: Store) -> None:
    record = store.record(accept(store))
    document = record.as_json()
    for name in ("workspace", "owner", "priority", "pinned", "cause"):
        del document[name]
    assert Record.from_bytes(json.dumps(document).encode()) == record


def test_a_pinned_job_stays_until_it_is_unpinned(store: Store) -> None:
    job_id = accept(store)
    assert store.pin(job_id, True).pinned
    assert finish(store, job_id).pinned
    with pytest.raises(PinnedError, match="unpin it first"):
        store.remove(job_id)
    store.pin(job_id, False)
    store.remove(job_id)
    assert everything_in(store) == []

"""The version of a store: newer ones are refused, older ones migrated, interrupted or not."""

import json
import multiprocessing
import os
import shutil
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

from api.app import create_app
from api.commands import main
from tests.small_results import RESULTS
from workers import durable, layout
from workers.errors import LayoutError
from workers.migrations import migrate
from workers.pool import run_pool
from workers.record import RUNNING, Record
from workers.settings import Settings
from workers.store import Store

# Fields of a record that came after layout 0, and indexes likewise.
LATER_FIELDS = ("workspace", "owner", "priority", "pinned", "cause", "model", "outcome")
LATER_FOLDERS = ("workspaces", "lines", "interactive")


def accept(store: Store, **more: Any) -> str:
    return store.accept(b'{"plate": 1}', **{"title": "lug", **more}).record.id


def finish(store: Store, job_id: str) -> None:
    store.transition(job_id, RUNNING)
    with store.working(job_id) as staging:
        assert staging is not None
        (staging / "results.json").write_text(json.dumps(RESULTS))
        store.publish(job_id, staging)


@pytest.fixture
def old(store: Store) -> Store:
    """A store as the first Fishplate left it: two jobs in line, one finished, one damaged."""
    for _ in range(2):
        accept(store, label="yard")
    finish(store, accept(store))
    (store.jobs.path(accept(store)) / "record.json").write_text("{")
    for path in store.jobs.root.glob("*/*/record.json"):
        record = json.loads(path.read_text() if path.read_text() != "{" else "[]")
        if record:
            kept = {name: value for name, value in record.items() if name not in LATER_FIELDS}
            path.write_text(json.dumps(kept))
    for name in LATER_FOLDERS:
        shutil.rmtree(store.root / name, ignore_errors=True)
    (store.root / layout.FILE).unlink()
    return store


def fishplate(*arguments: str | Path) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


def test_the_first_job_brings_the_layout(store: Store) -> None:
    assert layout.layout_of(store.root) is None
    accept(store)
    assert json.loads((store.root / "layout.json").read_text())["layout"] == layout.LAYOUT


def test_a_store_without_jobs_is_new_whatever_else_is_in_it(store: Store) -> None:
    """Tokens are made before the first start."""
    store.root.mkdir()
    (store.root / "tokens.json").write_text("[]")
    layout.require(store.root)
    with layout.in_use(store.root):
        assert layout.layout_of(store.root) == layout.LAYOUT


@pytest.mark.parametrize(
    "command",
    [("serve", "--port", "0"), ("tokens", "list"), ("tokens", "add", "ana", "--role", "read"),
     ("migrate",)],
)  # fmt: skip
def test_every_command_refuses_a_newer_store_and_changes_nothing(
    store: Store, command: tuple[str, ...]
) -> None:
    accept(store)
    layout.stamp(store.root, layout.LAYOUT + 1)
    before = (store.root / layout.FILE).read_bytes()
    result = fishplate(*command, "--store", store.root)
    assert result.exit_code == 1
    assert "a newer Fishplate has written it" in " ".join(result.stderr.split())
    assert (store.root / layout.FILE).read_bytes() == before
    assert not (store.root / "tokens.json").exists()


def test_server_and_pool_refuse_an_older_store_and_say_what_to_do(old: Store) -> None:
    settings = Settings(store=old.root, redis_url="unix:///nowhere")
    for start in (create_app, run_pool):
        with pytest.raises(LayoutError, match="fishplate migrate"):
            start(settings)
    assert layout.layout_of(old.root) == 0


def test_a_damaged_version_is_refused(store: Store) -> None:
    accept(store)
    for text in ("", "{}", '{"layout": "one"}', '{"layout": -1}', "[1]"):
        (store.root / layout.FILE).write_text(text)
        with pytest.raises(LayoutError, match=r"layout\.json is damaged"):
            layout.require(store.root)


def test_old_jobs_are_found_again_after_the_migration(old: Store) -> None:
    """In the workspace in which all were, and in the line that counts them."""
    assert old.list(workspace="default").records == ()
    done = migrate(old.root)
    assert (done.before, done.after, done.jobs) == (0, 1, 4)
    (damaged,) = done.damaged
    assert "is damaged" in damaged
    layout.require(old.root)
    assert len(old.list(workspace="default").records) == 3
    assert old.length_of_line("default") == 2
    (finished,) = old.list(state="finished").records
    assert finished.outcome is not None
    assert finished.outcome["envelope"] == RESULTS["envelope"]
    text = (old.jobs.path(finished.id) / "record.json").read_text()
    assert set(LATER_FIELDS) < json.loads(text).keys()


def test_a_migration_that_is_interrupted_anywhere_is_repeated(
    old: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Killed at the first, second, ... change: the store is of the old layout, and whole."""
    ids = [record.id for record in old.list().records]
    real = durable.replace
    for survives in range(3):  # three records; each repetition goes on where the last one was
        calls = iter(range(survives))

        def replace(*arguments: Any, calls: Any = calls) -> None:
            next(calls)
            real(*arguments)

        with monkeypatch.context() as patch:
            patch.setattr(durable, "replace", replace)
            patch.setattr(layout, "stamp", replace)
            with pytest.raises(StopIteration):
                migrate(old.root)
        assert layout.layout_of(old.root) == 0
        assert [record.id for record in old.list().records] == ids
    migrate(old.root)
    assert {record.id for record in old.list(workspace="default").records} == set(ids)


def test_a_second_migration_has_nothing_to_do(old: Store) -> None:
    assert "4 jobs" in fishplate("migrate", "--store", old.root).stderr
    before = {p: p.read_bytes() for p in old.root.rglob("*") if p.is_file()}
    again = fishplate("migrate", "--store", old.root)
    assert again.exit_code == 0
    assert "nothing to do" in again.stderr
    assert {p: p.read_bytes() for p in old.root.rglob("*") if p.is_file()} == before


def test_there_must_be_a_store_to_migrate(tmp_path: Path) -> None:
    result = fishplate("migrate", "--store", tmp_path / "nowhere")
    assert result.exit_code == 1
    assert not (tmp_path / "nowhere").exists()


def _use(root: Path, begun: Any, may_end: Any) -> None:
    with layout.in_use(root):
        begun.set()
        may_end.wait(30.0)


def test_a_store_in_use_is_not_migrated_until_its_user_is_gone(store: Store) -> None:
    """However it goes: here it is killed."""
    accept(store)
    context = multiprocessing.get_context("spawn")
    begun, may_end = context.Event(), context.Event()
    user = context.Process(target=_use, args=(store.root, begun, may_end))
    user.start()
    assert begun.wait(30.0)
    with layout.in_use(store.root):  # several may
        pass
    with pytest.raises(LayoutError, match="is in use"):
        migrate(store.root)
    user.kill()
    user.join()
    assert migrate(store.root).after == layout.LAYOUT
    with layout.alone(store.root, "migrated"), pytest.raises(LayoutError, match="being migrated"):
        _use(store.root, begun, may_end)


def test_records_of_any_age_are_read(old: Store) -> None:
    """A back-up is made before the migration, so that the old records must be readable."""
    for record in old.list().records:
        assert isinstance(record, Record)
        assert record.workspace == "default"


@pytest.mark.skipif(os.geteuid() != 0, reason="only root could do it")
@pytest.mark.parametrize(
    "command", [("tokens", "add", "ana", "--role", "read"), ("migrate",), ("backup", "/nowhere")]
)
def test_root_leaves_the_store_of_another_user_alone(
    store: Store, command: tuple[str, ...]
) -> None:
    """Its server could not read what root wrote there."""
    accept(store)
    os.chown(store.root, 54321, -1)
    before = set(store.root.rglob("*"))
    result = fishplate(*command, "--store", store.root)
    assert result.exit_code == 2
    assert "user number 54321" in " ".join(result.stderr.split())
    assert set(store.root.rglob("*")) == before

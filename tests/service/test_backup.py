"""Back-ups: consistent, written once, checked, and restored to what was there."""

import errno
import hashlib
import io
import json
import os
import shutil
import tarfile
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

from api.commands import main
from workers import backup, layout, packing
from workers import restore as restoring
from workers.audit import SUBMITTED, Audit
from workers.backup import back_up, forget
from workers.backup_folder import list_path, read_run, run_names
from workers.errors import BackupError, LayoutError, StoreError
from workers.packing import Packer, unpack
from workers.record import RUNNING, is_id
from workers.restore import choose, restore
from workers.store import Store
from workers.tokens import Tokens


def accept(store: Store, **more: Any) -> str:
    return store.accept(b'{"plate": 1}', **{"title": "lug", **more}).record.id


def finish(store: Store, job_id: str) -> None:
    store.transition(job_id, RUNNING)
    with store.working(job_id) as staging:
        assert staging is not None
        (staging / "results.json").write_text(f'{{"job": "{job_id}"}}')
        (staging / "fields").mkdir()
        (staging / "fields" / "lift.vtu").write_bytes(os.urandom(5000))
        store.publish(job_id, staging, outcome={"units": {}, "mesh": None, "envelope": {}})


@pytest.fixture
def full(store: Store) -> dict[str, str]:
    """One job in each state, tokens, an audit log; ids by state."""
    jobs = {"queued": accept(store, key="order 7", label="yard", workspace="dock", owner="ana")}
    jobs["running"] = accept(store)
    store.transition(jobs["running"], RUNNING)
    jobs["finished"] = accept(store, key="order 8", label="yard")
    finish(store, jobs["finished"])
    jobs["failed"] = accept(store)
    store.transition(jobs["failed"], RUNNING)
    store.transition(jobs["failed"], "failed", reason="free to move")
    jobs["cancelled"] = accept(store)
    store.transition(jobs["cancelled"], "cancelled")
    Tokens(store.root).add("ana", "submit", "dock")
    Audit(store.root).note(SUBMITTED, job=jobs["queued"], who="ana")
    return jobs


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return tmp_path / "elsewhere" / "back-ups"


@pytest.fixture
def new(tmp_path: Path) -> Path:
    """Where a restored store will be."""
    return tmp_path / "new"


def fishplate(*arguments: str | Path) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


def said(result: Result) -> str:
    return " ".join(result.stderr.split())


def job_files(root: Path) -> dict[str, bytes]:
    """All that jobs consist of, by path; records are compared apart."""
    return {
        path.relative_to(root).as_posix(): path.read_bytes()
        for path in (root / "jobs").rglob("*")
        if path.is_file() and path.name != "record.json" and not path.name.endswith(".lock")
    }


def entries(root: Path) -> set[str]:
    """Index entries and keys."""
    names = ("states", "labels", "workspaces", "lines", "interactive", "keys")
    return {
        path.relative_to(root).as_posix()
        for name in names
        for path in (root / name).rglob("*")
        if path.is_file() and not path.name.endswith(".lock")
    }


def restored(folder: Path, root: Path, name: str | None = None) -> Store:
    restore(folder, choose(folder, name), root)
    return Store(root)


# --- there and back ------------------------------------------------------------------------------


def test_a_restored_store_is_what_it_was(
    store: Store, full: dict[str, str], folder: Path, new: Path
) -> None:
    """Documents, results, records, indexes, tokens and audit log; what was at work waits again."""
    made = back_up(store.root, folder)
    assert (len(made.run.jobs), made.run.unfinished, made.packed) == (3, 2, 3)
    done = restored(folder, new)
    assert job_files(new) == job_files(store.root)
    for state in ("finished", "failed", "cancelled"):
        assert done.record(full[state]) == store.record(full[state])
    for state in ("queued", "running"):
        before, after = store.record(full[state]), done.record(full[state])
        assert (after.state, after.attempts) == ("queued", 0)
        assert after.history[:-1] == before.history
        assert "Restored" in (after.reason or "")
    assert done.unfinished() == tuple(sorted((full["queued"], full["running"])))
    renamed = {e.replace("states/running", "states/queued") for e in entries(store.root)}
    assert entries(new) == renamed
    for name in ("tokens.json", *(f"audit/{p.name}" for p in (store.root / "audit").iterdir())):
        assert (new / name).read_bytes() == (store.root / name).read_bytes()
        assert (new / name).stat().st_mode & 0o077 == 0
    assert layout.layout_of(new) == layout.LAYOUT


def test_a_request_that_is_repeated_after_the_restore_makes_no_second_job(
    store: Store, full: dict[str, str], folder: Path, new: Path
) -> None:
    back_up(store.root, folder)
    done = restored(folder, new)
    again = done.accept(b'{"plate": 1}', title="lug", key="order 8")
    assert (again.record.id, again.created) == (full["finished"], False)


def test_files_keep_their_times(
    store: Store, full: dict[str, str], folder: Path, new: Path
) -> None:
    back_up(store.root, folder)
    place = Path("jobs", store.jobs.path(full["finished"]).relative_to(store.jobs.root))
    path = place / "results" / "results.json"
    restored(folder, new)
    assert (new / path).stat().st_mtime == pytest.approx((store.root / path).stat().st_mtime)


def test_a_finished_job_is_copied_once(store: Store, full: dict[str, str], folder: Path) -> None:
    """A pin goes into the list; the packed job stays as it is."""
    back_up(store.root, folder)
    before = {path: path.stat().st_ino for path in folder.glob("jobs/*/*")}
    store.pin(full["finished"], True)
    finish(store, full["queued"])
    again = back_up(store.root, folder)
    assert (again.packed, len(again.run.jobs), again.run.unfinished) == (1, 4, 1)
    after = {path: path.stat().st_ino for path in folder.glob("jobs/*/*")}
    assert before.items() < after.items()
    assert again.run.pinned == (full["finished"],)


def test_an_earlier_run_can_be_restored(
    store: Store, full: dict[str, str], folder: Path, new: Path
) -> None:
    """A job that was removed by mistake is in the run from before; a pin comes back as it was."""
    store.pin(full["failed"], True)
    first = back_up(store.root, folder).run
    store.pin(full["failed"], False)
    store.remove(full["finished"])
    second = back_up(store.root, folder).run
    assert full["finished"] not in second.jobs
    done = restored(folder, new, first.name)
    assert done.record(full["finished"]).state == "finished"
    assert done.record(full["failed"]).pinned


def test_old_runs_go_with_the_jobs_that_only_they_list(
    store: Store, full: dict[str, str], folder: Path, new: Path
) -> None:
    back_up(store.root, folder)
    store.remove(full["finished"])
    for _ in range(2):
        back_up(store.root, folder)
    assert forget(folder, keep=2) == 1
    assert len(run_names(folder)) == 2
    assert not list(folder.glob(f"jobs/*/{full['finished']}.*"))
    assert restored(folder, new).record(full["failed"]).state == "failed"


def test_a_restored_store_can_be_backed_up_into_the_same_folder(
    store: Store, full: dict[str, str], folder: Path, new: Path
) -> None:
    back_up(store.root, folder)
    restored(folder, new)
    assert back_up(new, folder).packed == 0


def test_an_empty_store_can_be_backed_up(store: Store, folder: Path, new: Path) -> None:
    store.root.mkdir()
    back_up(store.root, folder)
    assert restored(folder, new).list().records == ()


# --- while others work ---------------------------------------------------------------------------


def test_jobs_that_change_during_a_run_are_whole_or_absent(
    store: Store, full: dict[str, str], folder: Path, new: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """One finishes after it was looked at, one is removed before, one while it is packed."""
    real = backup._Attempt._take
    seen: list[str] = []

    def take(attempt: Any, record: Any) -> None:
        real(attempt, record)
        seen.append(record.id)
        if len(seen) == 1:
            store.remove(full["failed"] if record.id != full["failed"] else full["cancelled"])
        if record.id == full["queued"]:
            finish(store, full["queued"])

    add_tree = Packer.add_tree

    def remove_first(packer: Packer, name: str, path: Path) -> None:
        if path.parent.name == full["finished"]:
            store.remove(full["finished"])
            raise FileNotFoundError(path)
        add_tree(packer, name, path)

    monkeypatch.setattr(backup._Attempt, "_take", take)
    monkeypatch.setattr(Packer, "add_tree", remove_first)
    made = back_up(store.root, folder)
    assert made.damaged == ()
    assert full["finished"] not in made.run.jobs
    assert restored(folder, new).record(full["queued"]).state == "queued"


def test_a_damaged_job_is_named_and_the_others_are_in_the_back_up(
    store: Store, full: dict[str, str], folder: Path, new: Path
) -> None:
    (store.jobs.path(full["failed"]) / "record.json").write_text("{")
    (store.jobs.path(full["cancelled"]) / "job.json").write_text('{"plate": 2}')
    result = fishplate("backup", folder, "--store", store.root)
    assert result.exit_code == 1
    for state in ("failed", "cancelled"):
        assert full[state] in result.stderr
    assert list(choose(folder).jobs) == [full["finished"]]


def test_a_full_disk_leaves_earlier_runs_as_they_were(
    store: Store, full: dict[str, str], folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    back_up(store.root, folder)
    before = {path: path.read_bytes() for path in folder.rglob("*") if path.is_file()}
    accept(store)
    finish(store, full["queued"])

    def refuse(_: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    with monkeypatch.context() as patch:
        patch.setattr(packing.os, "fsync", refuse)
        with pytest.raises(StoreError, match="No space left"):
            back_up(store.root, folder)
    assert {path: path.read_bytes() for path in folder.rglob("*") if path.is_file()} == before
    assert back_up(store.root, folder).packed == 1


def test_what_a_killed_run_left_is_cleared_away(
    store: Store, full: dict[str, str], folder: Path
) -> None:
    folder.mkdir(parents=True)
    (folder / ".half-1").write_bytes(b"half")
    back_up(store.root, folder)
    assert {path.name for path in folder.iterdir()} == {"jobs", "runs", "back-up.lock"}


# --- refused -------------------------------------------------------------------------------------


@pytest.mark.parametrize("damage", ["flipped", "cut", "gone"])
@pytest.mark.parametrize("which", ["finished", "rest"])
def test_a_damaged_file_is_named_and_nothing_is_restored(
    store: Store, full: dict[str, str], folder: Path, new: Path, which: str, damage: str
) -> None:
    run = back_up(store.root, folder).run
    file = folder / (run.rest if which == "rest" else run.jobs[full[which]]).path
    content = bytearray(file.read_bytes())
    if damage == "gone":
        file.unlink()
    else:
        content[700] ^= 1
        file.write_bytes(content[:-512] if damage == "cut" else content)
    for more in (["--check"], []):
        result = fishplate("restore", folder, "--store", new, *more)
        assert result.exit_code == 1
        assert file.name in result.stderr.replace("\n", "")
    assert not new.exists()


@pytest.mark.parametrize("wrong", ["", "{}", "[]", '{"format": 1, "run": {}}'])
def test_a_damaged_list_is_refused_by_name(
    store: Store, full: dict[str, str], folder: Path, new: Path, wrong: str
) -> None:
    run = back_up(store.root, folder).run
    list_path(folder, run.name).write_text(wrong)
    with pytest.raises(BackupError, match=rf"{run.name}\.json is damaged"):
        choose(folder)


def test_any_change_of_a_list_is_noticed(store: Store, full: dict[str, str], folder: Path) -> None:
    """Also one that leaves it legible: a job less, another number."""
    name = back_up(store.root, folder).run.name
    path = list_path(folder, name)
    text = json.loads(path.read_text())
    for change in ({"unfinished": 1}, {"jobs": {}}, {"pinned": [full["failed"]]}):
        path.write_text(json.dumps({**text, "run": {**text["run"], **change}}))
        with pytest.raises(BackupError, match="its digest does not agree"):
            read_run(folder, name)


def test_a_store_that_is_not_empty_is_not_restored_over(
    store: Store, full: dict[str, str], folder: Path
) -> None:
    back_up(store.root, folder)
    before = job_files(store.root)
    result = fishplate("restore", folder, "--store", store.root)
    assert result.exit_code == 1
    assert "is not empty" in said(result)
    assert job_files(store.root) == before


def test_a_store_in_use_is_not_restored_into(
    store: Store, full: dict[str, str], folder: Path, new: Path
) -> None:
    back_up(store.root, folder)
    run = choose(folder)
    new.mkdir()
    with layout._opened(new, shared=True), pytest.raises(LayoutError, match="is in use"):
        restore(folder, run, new)


def test_a_store_of_a_newer_layout_is_neither_backed_up_nor_restored(
    store: Store, full: dict[str, str], folder: Path, new: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    layout.stamp(store.root, layout.LAYOUT + 1)
    assert "newer Fishplate" in said(fishplate("backup", folder, "--store", store.root))
    with monkeypatch.context() as patch:
        patch.setattr(layout, "LAYOUT", layout.LAYOUT + 1)
        back_up(store.root, folder)
    result = fishplate("restore", folder, "--store", new)
    assert result.exit_code == 1
    assert "with a newer one" in said(result)
    assert not new.exists()


def test_an_older_store_is_backed_up_restored_and_then_migrated(
    store: Store, full: dict[str, str], folder: Path, new: Path
) -> None:
    """As the upgrade has it; after the migration all jobs are copied anew."""
    (store.root / layout.FILE).unlink()
    assert back_up(store.root, folder).run.layout == 0
    assert "fishplate migrate" in said(fishplate("restore", folder, "--store", new))
    assert layout.layout_of(new) == 0
    assert fishplate("migrate", "--store", new).exit_code == 0
    assert back_up(new, folder).packed == 3


def test_the_folder_is_for_back_ups_alone_and_apart_from_the_store(
    store: Store, full: dict[str, str], tmp_path: Path
) -> None:
    letters = tmp_path / "letters"
    letters.mkdir()
    (letters / "letter.txt").write_text("dear")
    for folder, why in ((letters, "something else"), (store.root / "b", "inside each other"),
                        (store.root.parent, "inside each other")):  # fmt: skip
        with pytest.raises(BackupError, match=why):
            back_up(store.root, folder)
    assert [path.name for path in letters.iterdir()] == ["letter.txt"]


def test_there_must_be_a_store_and_a_back_up(tmp_path: Path, folder: Path) -> None:
    assert fishplate("backup", folder, "--store", tmp_path / "none").exit_code == 1
    assert not folder.exists()
    folder.mkdir(parents=True)
    assert "no back-up" in said(fishplate("restore", folder, "--store", tmp_path / "new"))


@pytest.mark.parametrize("name", ["../outside", "/outside", "link"])
def test_a_tar_file_from_elsewhere_writes_nothing_beyond_the_store(
    tmp_path: Path, name: str
) -> None:
    """Digests guard against decay; whoever can write the folder could forge them as well."""
    with tarfile.open(tmp_path / "forged.tar", "w") as tar:
        entry = tarfile.TarInfo(name)
        if name == "link":
            entry.type, entry.linkname = tarfile.SYMTYPE, "/etc"
        tar.addfile(entry, io.BytesIO())
    with pytest.raises(BackupError, match="not of a back-up"):
        unpack(tmp_path / "forged.tar", tmp_path / "inside" / "deep")
    assert not (tmp_path / "inside" / "outside").exists()


# --- interrupted ---------------------------------------------------------------------------------


@pytest.mark.parametrize("survives", range(4))
def test_an_interrupted_restore_is_no_store_until_it_is_repeated(
    store: Store,
    full: dict[str, str],
    folder: Path,
    new: Path,
    monkeypatch: pytest.MonkeyPatch,
    survives: int,
) -> None:
    """After no, one, two, three files; another back-up is not mixed in."""
    first = back_up(store.root, folder).run
    finish(store, full["queued"])
    second = back_up(store.root, folder).run
    steps = iter(range(survives))

    def stop(file: Path, target: Path) -> None:
        next(steps)
        unpack(file, target)

    with monkeypatch.context() as patch:
        patch.setattr(restoring, "unpack", stop)
        with pytest.raises(StopIteration):
            restore(folder, first, new)
    with pytest.raises(LayoutError, match="repeat `fishplate restore`"):
        layout.require(new)
    with pytest.raises(BackupError, match=f"--run {first.name}"):
        restore(folder, second, new)
    done = restored(folder, new, first.name)
    assert len(done.list().records) == len(full)
    assert not [path for path in new.iterdir() if path.name.startswith(".")]


def test_packed_jobs_are_tar_files_that_any_program_reads(
    store: Store, full: dict[str, str], folder: Path, tmp_path: Path
) -> None:
    """Should Fishplate be gone: a tar file for each job, whose digest is in the list."""
    run = back_up(store.root, folder).run
    packed = run.jobs[full["finished"]]
    data = (folder / packed.path).read_bytes()
    assert hashlib.sha256(data).hexdigest() == packed.sha256
    shutil.unpack_archive(folder / packed.path, tmp_path / "out", "tar")
    assert (tmp_path / "out" / "job.json").read_bytes() == store.document(full["finished"])
    assert is_id(Path(packed.path).name.split(".")[0])

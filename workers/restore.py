"""Bringing a back-up into an empty store.

Nothing is written before every file of the run was read and agrees with its SHA-256. Unfinished
jobs are put in line again. While it goes on the store says so, and no server opens it; interrupted,
it is repeated.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from shutil import copyfile, rmtree

from workers import durable, layout
from workers.audit import FOLDER as AUDIT
from workers.backup import UNFINISHED
from workers.backup_folder import Run, damage, read_run, run_names
from workers.errors import BackupError
from workers.packing import unpack
from workers.record import QUEUED, Event, Record, is_id, now
from workers.store import Store
from workers.store_reader import telling
from workers.tokens import FILE as TOKENS

BEGUN_ANEW = "Restored from a back-up; the job begins anew."
REST = ".rest"  # folder in the store while it is restored
# What an empty store may hold: a lock, the mark of an interrupted restore, what a new disk has.
NOTHING = frozenset({layout.IN_USE, layout.RESTORING, "lost+found"})
MOST_NAMED = 20  # damaged files


@dataclass(frozen=True)
class Restored:
    """What was restored: queued of the jobs were unfinished and are in line again."""

    run: Run
    queued: int


def choose(folder: Path, name: str | None = None) -> Run:
    """The list of the run of that name, or of the newest.

    Raises
    ------
    BackupError   there is none, it is damaged, or a newer Fishplate has written it.
    """
    names = run_names(folder)
    if not names:
        raise BackupError(f"there is no back-up in {folder}")
    run = read_run(folder, name or names[-1])
    if run.layout > layout.LAYOUT:
        raise BackupError(
            f"back-up {run.name} is of layout {run.layout}, made by {run.by}; this Fishplate knows "
            f"none above {layout.LAYOUT}: restore it with a newer one"
        )
    return run


def verify(folder: Path, run: Run) -> None:
    """Read every file of a run.

    Raises
    ------
    BackupError   with the names of the files that are damaged or missing.
    """
    found = list(damage(folder, run))
    if found:
        named = "; ".join(found[:MOST_NAMED])
        more = f"; and {len(found) - MOST_NAMED} more" if len(found) > MOST_NAMED else ""
        raise BackupError(f"back-up {run.name} is damaged and is not used: {named}{more}")


def restore(folder: Path, run: Run, root: Path) -> Restored:
    """Make an empty store what it was when the run was made.

    Raises
    ------
    BackupError   a file is damaged (the store is then untouched), or the store is not empty.
    LayoutError   a server is at work on the store.
    StoreError    the disk refused; repeat it.
    """
    _refuse_full(root, run)
    verify(folder, run)
    with layout.alone(root, "restored"), telling(f"the store {root} could not be written"):
        mark = root / layout.RESTORING
        durable.write(mark, run.name.encode())
        durable.sync_folder(root)
        queued = _fill(folder, run, Store(root))
        durable.sync_tree(root)
        layout.stamp(root, run.layout)
        mark.unlink()
        durable.sync_folder(root)
    return Restored(run, queued)


def _refuse_full(root: Path, run: Run) -> None:
    with telling(f"the store {root} could not be read"):
        held = sorted(path.name for path in root.iterdir()) if root.is_dir() else []
        mark = root / layout.RESTORING
        begun = mark.read_text() if mark.exists() else None
    if begun is not None and begun != run.name:
        raise BackupError(
            f"back-up {begun or '(unknown)'} was being restored into {root} when it was "
            f"interrupted: restore that one (`--run {begun}`), or begin with an empty folder"
        )
    if begun is None and (foreign := [name for name in held if name not in NOTHING]):
        raise BackupError(
            f"the store {root} is not empty ({', '.join(foreign[:3])}); a back-up is restored into "
            "an empty folder only"
        )


def _fill(folder: Path, run: Run, store: Store) -> int:
    for job_id, packed in run.jobs.items():
        place = store.jobs.path(job_id)
        rmtree(place, ignore_errors=True)  # of an interrupted restore
        unpack(folder / packed.path, place)
        record = _record(place, job_id)
        if record.pinned != (job_id in run.pinned):
            _write(place, replace(record, pinned=job_id in run.pinned))
    rest = store.root / REST
    rmtree(rest, ignore_errors=True)
    rest.mkdir()
    unpack(folder / run.rest.path, rest)
    _take_tokens_and_audit(rest, store.root)
    queued = list(_queue_again(rest / UNFINISHED, store))
    rmtree(rest)
    store.reindex()
    _take_keys(store)
    if len(queued) != run.unfinished:
        raise BackupError(
            f"{folder / run.rest.path} holds {len(queued)} unfinished jobs, not {run.unfinished}"
        )
    return len(queued)


def _queue_again(unfinished: Path, store: Store) -> Iterator[str]:
    for source in sorted(unfinished.iterdir()) if unfinished.is_dir() else ():
        record = _record(source, source.name)
        place = store.jobs.path(record.id)
        rmtree(place, ignore_errors=True)
        place.parent.mkdir(parents=True, exist_ok=True)
        source.rename(place)
        history = (*record.history, Event(QUEUED, now(), BEGUN_ANEW))
        _write(place, replace(record, history=history, attempts=0))
        yield record.id


def _take_tokens_and_audit(rest: Path, root: Path) -> None:
    if (rest / TOKENS).exists():
        copyfile(rest / TOKENS, root / TOKENS)
        (root / TOKENS).chmod(0o600)
    for line in (rest / AUDIT).glob("*.jsonl"):
        (root / AUDIT).mkdir(mode=0o700, exist_ok=True)
        copyfile(line, root / AUDIT / line.name)
        (root / AUDIT / line.name).chmod(0o600)


def _take_keys(store: Store) -> None:
    """What Idempotency-Keys stand for, so that clients may repeat what they sent before."""
    keys = store.root / "keys"
    for job_id in store.jobs.newest_first():
        if key := store.record(job_id).key:
            keys.mkdir(exist_ok=True)
            (keys / key).write_text(job_id)


def _record(place: Path, job_id: str) -> Record:
    try:
        record = Record.from_bytes((place / "record.json").read_bytes())
    except (OSError, ValueError, TypeError, LookupError) as error:
        raise BackupError(
            f"the record of job {job_id} in the back-up is damaged: {error}"
        ) from error
    if record.id != job_id or not is_id(job_id):
        raise BackupError(f"the record of job {job_id} in the back-up is that of {record.id!r}")
    return record


def _write(place: Path, record: Record) -> None:
    (place / "record.json").write_bytes(record.as_bytes())

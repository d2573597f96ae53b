"""Copying a store to another place while it is in use.

A final job is never changed, so it is packed once; a later run only lists it again. An unfinished
job goes with its document and is worked on anew after a restore. Every job is as it was at one
moment; what comes in while a run goes on may be in it or not. What follows from the rest (indexes,
kept meshes, checks, joint files of batches, Redis) is left out.
"""

import hashlib
import logging
from dataclasses import dataclass
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path

import orjson

from workers import durable, layout
from workers.audit import FOLDER as AUDIT
from workers.backup_folder import (
    JOBS,
    LOCK,
    RUNS,
    Packed,
    Run,
    list_path,
    read_run,
    run_names,
)
from workers.errors import BackupError, StoreError, UnknownJobError
from workers.packing import HALF, Packer, make_folder, pack
from workers.record import Record, day_of, timestamp
from workers.store import Store
from workers.store_reader import telling
from workers.tokens import FILE as TOKENS

NOTE = "backed-up.json"  # in the store: when it was copied last, whole
UNFINISHED = "unfinished"  # folder in the file of the rest
DIGITS = 12  # of the digest in the name of a packed job

log = logging.getLogger(__name__)


@dataclass(frozen=True)
class Made:
    """A run that was made.

    packed : number of jobs that were not in the folder yet; written: bytes written by this run.
    damaged : what is wrong with each job that could not be read, and so is not in it.
    """

    run: Run
    packed: int
    written: int
    damaged: tuple[str, ...]


def back_up(root: Path, folder: Path) -> Made:
    """Add a run to a folder of back-ups, which may be new.

    Raises
    ------
    BackupError   the folder holds something else, or is in use.
    LayoutError   the store was written by a newer Fishplate.
    StoreError    the disk refused; earlier runs are as they were.
    """
    if not root.is_dir():
        raise BackupError(f"there is no store {root}")
    _refuse_unfit(root.resolve(), folder.resolve())
    with layout.unchanged(root), telling(f"the back-up in {folder} could not be written"):
        make_folder(folder)
        with durable.lock(folder / LOCK, wait=False) as mine:
            if not mine:
                raise BackupError(f"another back-up into {folder} is being made")
            for half in folder.glob(HALF + "*"):  # of a run that was killed
                half.unlink()
            made = _Attempt(Store(root), folder).run()
    if not made.damaged:
        _note(root, made.run)
    return made


def last_back_up(root: Path) -> str | None:
    """When the last back-up began in which nothing was missing, RFC 3339; None without one."""
    try:
        at: str = orjson.loads((root / NOTE).read_bytes())["at"]
        return at
    except FileNotFoundError:
        return None


def _note(root: Path, run: Run) -> None:
    """For /metrics; a full disk of the store must not make the back-up a failure."""
    try:
        durable.replace(root / NOTE, orjson.dumps({"at": run.at, "run": run.name}))
    except OSError as error:
        log.warning("that there is back-up %s could not be noted: %s", run.name, error)


def forget(folder: Path, keep: int) -> int:
    """Remove all runs but the newest, and jobs that no run lists any more; returns how many runs.

    Raises
    ------
    BackupError   the list of a run that stays is damaged: then nothing is removed.
    """
    names = run_names(folder)
    old, kept = names[:-keep], names[-keep:]
    listed = {file.path for name in kept for file in read_run(folder, name).files}
    with telling(f"old back-ups in {folder} could not be removed"):
        for name in old:
            list_path(folder, name).unlink()
        for path in (*folder.glob(f"{JOBS}/*/*.tar"), *folder.glob(f"{RUNS}/*.tar")):
            if path.relative_to(folder).as_posix() not in listed:
                path.unlink()
    return len(old)


def _refuse_unfit(root: Path, folder: Path) -> None:
    if folder.is_relative_to(root) or root.is_relative_to(folder):
        raise BackupError(f"{folder} and the store {root} must not be inside each other")
    foreign = (
        sorted({p.name for p in folder.iterdir()} - {JOBS, RUNS, LOCK}) if folder.is_dir() else []
    )
    foreign = [name for name in foreign if not name.startswith(HALF) and name != "lost+found"]
    if foreign:
        raise BackupError(f"{folder} holds something else than back-ups ({foreign[0]})")


class _Attempt:
    """One run in the making."""

    def __init__(self, store: Store, folder: Path) -> None:
        self.store = store
        self.folder = folder
        found = layout.layout_of(store.root)
        self.layout = layout.LAYOUT if found is None else found
        self.known = self._listed_before()
        self.jobs: dict[str, Packed] = {}
        self.pinned: list[str] = []
        self.unfinished: list[Record] = []
        self.damaged: list[str] = []
        self.written = self.packed = 0

    def run(self) -> Made:
        began = datetime.now(UTC)
        name = f"{began:%Y-%m-%dT%H-%M-%S}.{began.microsecond // 1000:03}Z"
        for job_id in list(self.store.jobs.newest_first()):
            try:
                self._take(self.store.record(job_id))
            except UnknownJobError:
                continue  # removed meanwhile
            except StoreError as error:
                self.damaged.append(str(error))
        rest = pack(self.folder, lambda _: f"{RUNS}/{name}.tar", self._pack_rest)
        run = Run(
            name=name,
            layout=self.layout,
            by=f"fishplate {version('fishplate')}",
            at=timestamp(began),
            jobs=self.jobs,
            pinned=tuple(self.pinned),
            rest=rest,
            unfinished=len(self.unfinished),
        )
        durable.replace(list_path(self.folder, name), run.as_bytes(), mode=0o600)
        return Made(run, self.packed, self.written + rest.bytes, tuple(self.damaged))

    def _listed_before(self) -> dict[str, Packed]:
        """Jobs of the last run; none where that was of another layout."""
        names = run_names(self.folder)
        last = read_run(self.folder, names[-1]) if names else None
        return last.jobs if last and last.layout == self.layout else {}

    def _take(self, record: Record) -> None:
        if not record.is_final:
            self.unfinished.append(record)
            return
        packed = self.known.get(record.id)
        if packed is None or not self._is_there(packed):
            packed = self._pack(record)
        self.jobs[record.id] = packed
        if record.pinned:
            self.pinned.append(record.id)

    def _is_there(self, packed: Packed) -> bool:
        path = self.folder / packed.path
        return path.is_file() and path.stat().st_size == packed.bytes

    def _pack(self, record: Record) -> Packed:
        place = f"{JOBS}/{day_of(record.id)}/{record.id}"
        try:
            packed = pack(
                self.folder,
                lambda digest: f"{place}.{digest[:DIGITS]}.tar",
                lambda packer: self._fill(packer, record),
            )
        except FileNotFoundError:
            self.store.record(record.id)  # raises UnknownJobError if it was removed meanwhile
            raise
        self.packed += 1
        self.written += packed.bytes
        return packed

    def _fill(self, packer: Packer, record: Record) -> None:
        packer.add("job.json", self._document(record))
        packer.add("record.json", record.as_bytes())
        packer.add_tree("results", self.store.jobs.path(record.id) / "results")

    def _pack_rest(self, packer: Packer) -> None:
        tokens = self.store.root / TOKENS
        if tokens.exists():
            packer.add_file(TOKENS, tokens)
        for path in sorted((self.store.root / AUDIT).glob("*.jsonl")):
            with durable.lock(path):  # else the last line might be half there
                packer.add_file(f"{AUDIT}/{path.name}", path)
        for record in tuple(self.unfinished):
            try:
                document = self._document(record)
            except UnknownJobError:  # cancelled and removed meanwhile
                self.unfinished.remove(record)
                continue
            packer.add(f"{UNFINISHED}/{record.id}/job.json", document)
            packer.add(f"{UNFINISHED}/{record.id}/record.json", record.as_bytes())

    def _document(self, record: Record) -> bytes:
        document = self.store.document(record.id)
        if record.checksum != "sha256:" + hashlib.sha256(document).hexdigest():
            raise StoreError(f"the document of job {record.id} is damaged: its SHA-256 is another")
        return document

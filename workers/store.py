"""The job store: a folder for each job, and the truth about what state it is in.

    jobs/DAY/ID/job.json       the document as accepted, never changed
                record.json    the record (record.py), replaced at once under record.lock
                run.lock       held by the one process that works on the job
                staging/       results being written; nobody else looks inside
                results/       published by one rename
    states/STATE/DAY/ID        index: where to look for jobs of a state (index.py)
    labels/LABEL/DAY/ID        index: the jobs of a label
    workspaces/NAME/DAY/ID     index: the jobs of a workspace
    lines/NAME/DAY/ID          index: those of them that are unfinished
    interactive/WHO/DAY/ID     index: unfinished interactive jobs of an owner in a workspace
    batches/DIGEST             joint files of the finished jobs of a label, made when asked for
    keys/DIGEST                the job that an Idempotency-Key stands for, within a workspace
    incoming/ID, removed/ID    on the way in and out
    tokens.json, audit/        who may do what (tokens.py), who did what (audit.py)
    usage.json                 what the store held when it was looked at last (housekeeping.py)
    pools/HOST.ID              locked by each pool that is at work (neighbours.py)
    layout.json, in-use.lock   the version of all this, who is at work on it (layout.py)

Redis may be lost at any time; this folder may not. Every method raises StoreError when the file
system refuses (full disk, no permission), and UnknownJobError for an id without a job.
"""

import hashlib
import shutil
import time
from collections.abc import Iterator, Mapping, Sequence
from contextlib import ExitStack, contextmanager, suppress
from dataclasses import replace
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any, NamedTuple

from workers import durable, layout
from workers.batch import batch_folder
from workers.errors import (
    KeyConflictError,
    NotFinalError,
    PinnedError,
    StoreError,
    UnknownJobError,
)
from workers.record import (
    BULK,
    DEFAULT_WORKSPACE,
    FINISHED,
    QUEUED,
    RUNNING,
    Event,
    Record,
    age_of,
    new_id,
    now,
)
from workers.store_reader import StoreReader, telling

# The record as it will be, inside the results: the rename publishes both at once.
FINAL_RECORD = ".record.json"
STAGING = "staging"
RECORD_LOCK = "record.lock"
# After a full disk: less would be full again after a few jobs.
ROOM = 256 * 1024**2  # bytes,
ROOM_PART = 20  # or this part of a small disk
NEWS_ARRIVE = 300.0  # network file systems keep what they know of a folder for up to 60 s [s]
ABANDONED = 86_400.0  # age at which something in incoming/ is nobody's any more [s]


class Acceptance(NamedTuple):
    """Answer to `accept`: `created` is False when the Idempotency-Key was used before."""

    record: Record
    created: bool


class Store(StoreReader):
    """The jobs below one folder. Holds no state: any number of processes may share the folder."""

    def __init__(self, root: Path) -> None:
        super().__init__(root)
        self._incoming = self.root / "incoming"
        self._removed = self.root / "removed"
        self._keys = self.root / "keys"

    # --- accepting -------------------------------------------------------------------------------

    def accept(
        self,
        document: bytes,
        *,
        label: str | None = None,
        title: str,
        key: str | None = None,
        workspace: str = DEFAULT_WORKSPACE,
        owner: str | None = None,
        priority: str = BULK,
        model: str | None = None,
    ) -> Acceptance:
        """File a job. On return it is on the disk: it will be worked on whatever is killed.

        Raises
        ------
        KeyConflictError   the key was used before, for another document.
        StoreError         nothing was filed.
        """
        record = Record(
            id=new_id(),
            title=title,
            label=label,
            checksum="sha256:" + hashlib.sha256(document).hexdigest(),
            size=len(document),
            history=(Event(QUEUED, now()),),
            # A workspace has no "/" in its name: nobody meets a key of another workspace.
            key=None if key is None else hashlib.sha256(f"{workspace}/{key}".encode()).hexdigest(),
            workspace=workspace,
            owner=owner,
            priority=priority,
            model=model,
        )
        with telling("the job could not be filed"):
            if record.key is not None:
                return self._file_under_key(record, document, self._keys / record.key)
            self._file(record, document)
        return Acceptance(record, created=True)

    def _file_under_key(self, record: Record, document: bytes, key: Path) -> Acceptance:
        durable.make_folder(self._keys)
        with durable.lock(key):
            try:
                earlier = self.record(key.read_text())
            except UnknownJobError:
                # The key is written first: a crash in between leaves it pointing at no job, which
                # counts as unused. So a key can never stand for two jobs.
                key.write_text(record.id)
                self._file(record, document, key, self._keys)
                return Acceptance(record, created=True)
        if earlier.checksum != record.checksum:
            raise KeyConflictError(earlier.id)
        return Acceptance(earlier, created=False)

    def _file(self, record: Record, document: bytes, *before: Path) -> None:
        """Make everything durable, what must be there `before` as well; then the rename."""
        incoming = self._incoming / record.id
        target = self.jobs.path(record.id)
        try:
            if not self.jobs.root.exists():  # the first job of a store
                layout.stamp(self.root)
            durable.make_folder(self._incoming)
            durable.make_folder(target.parent)
            incoming.mkdir()
            # Held until the job is where it belongs: so it shows when the process was killed.
            with durable.lock(incoming / RECORD_LOCK):
                (incoming / "job.json").write_bytes(document)
                (incoming / "record.json").write_bytes(record.as_bytes())
                entries = self.indexes.enter(record)
                files = [incoming / "job.json", incoming / "record.json", incoming]
                durable.sync(*files, *entries, *before)
                durable.move(incoming, target)
        except OSError:
            for half_done in (target, incoming):
                shutil.rmtree(half_done, ignore_errors=True)
            self.indexes.drop(record)
            raise

    def probe(self) -> None:
        """Write and remove a small file, as `accept` would.

        Raises
        ------
        StoreError   new jobs cannot be filed.
        """
        with telling("the job store cannot be written"):
            durable.make_folder(self._incoming)
            path = self._incoming / new_id()
            try:
                durable.write(path, bytes(4096))
            finally:
                path.unlink(missing_ok=True)

    def has_room(self) -> bool:
        """Whether jobs can be worked on again after the disk was full: not on the last bytes."""
        try:
            self.probe()
            return self.room_left() >= min(ROOM, self.disk_size() // ROOM_PART)
        except StoreError:
            return False

    # --- changing --------------------------------------------------------------------------------

    def transition(
        self, job_id: str, state: str, *, reason: str | None = None, **facts: Any
    ) -> Record:
        """Move a job to another state; "finished" is reached by `publish` only.

        reason : plain words for the client; facts : fields of the record that change with the
        state: `faults` (tuple of Fault), `attempts`.

        Raises
        ------
        TransitionError   the change is not legal from the state that the job is in now.
        """
        if state == FINISHED:
            raise ValueError("a job becomes finished by publish()")
        with self._changing(job_id) as folder:
            return self._replace(folder, self.record(job_id).moved(state, reason=reason, **facts))

    def publish(
        self,
        job_id: str,
        staging: Path,
        cautions: Sequence[Mapping[str, Any]] = (),
        outcome: Mapping[str, Any] | None = None,
    ) -> Record:
        """Make the staged results the results of a running job: all of them, at once.

        cautions, outcome : of the results; the record keeps them for whoever asks for no more.

        Raises
        ------
        TransitionError   the job is not running (any more): it was cancelled meanwhile. The staged
            results are then left where they are.
        """
        with telling(f"the results of job {job_id} could not be written"):
            durable.sync_tree(staging)
        with self._changing(job_id) as folder:
            record = self.record(job_id).moved(FINISHED, cautions=tuple(cautions), outcome=outcome)
            (staging / FINAL_RECORD).write_bytes(record.as_bytes())
            durable.sync(staging / FINAL_RECORD, staging)
            durable.move(staging, folder / "results")
            return self._replace(folder, record)

    def recover_published(self, job_id: str) -> bool:
        """Finish a job that was killed between the rename and the record; True if it was."""
        with self._changing(job_id) as folder:
            published = folder / "results" / FINAL_RECORD
            if not published.exists() or self.record(job_id).state != RUNNING:
                return False
            self._replace(folder, Record.from_bytes(published.read_bytes()))
            return True

    @contextmanager
    def claimed(self, job_id: str) -> Iterator[bool]:
        """Be the one process that has to do with a job; yields False when another one is.

        The kernel ends the claim when the process dies: "running, and nobody has claimed it" means
        that its worker was killed. What that one left half-done is cleared away.
        """
        staging = self._folder(job_id) / STAGING
        with ExitStack() as held:
            with telling(f"job {job_id} could not be begun"):
                mine = held.enter_context(durable.lock(staging.with_name("run.lock"), wait=False))
            if not mine:
                yield False
                return
            shutil.rmtree(staging, ignore_errors=True)
            try:
                yield True
            finally:
                shutil.rmtree(staging, ignore_errors=True)

    @contextmanager
    def working(self, job_id: str) -> Iterator[Path | None]:
        """Claim a job and have an empty folder for its results; yields None if another has it."""
        with self.claimed(job_id) as mine:
            if not mine:
                yield None
                return
            staging = self.jobs.path(job_id) / STAGING
            with telling(f"job {job_id} could not be begun"):
                staging.mkdir()
            yield staging

    @contextmanager
    def scratch(self) -> Iterator[Path]:
        """A folder on the file system of the store, gone afterwards."""
        with telling("the job store cannot be written"):
            durable.make_folder(self._incoming)
            folder = TemporaryDirectory(dir=self._incoming)
        with folder as path:
            yield Path(path)

    def pin(self, job_id: str, pinned: bool) -> Record:
        """Have a job kept whatever its age and size, or no more."""
        with self._changing(job_id) as folder:
            return self._replace(folder, replace(self.record(job_id), pinned=pinned))

    def remove(self, job_id: str) -> None:
        """Forget a final job and everything of it.

        Raises
        ------
        NotFinalError   it is queued or running; cancel it first.
        PinnedError     it is pinned; unpin it first.
        """
        with self._changing(job_id) as folder:
            record = self.record(job_id)
            if not record.is_final:
                raise NotFinalError(f"job {job_id} is {record.state}; cancel it first")
            if record.pinned:
                raise PinnedError(f"job {job_id} is pinned; unpin it first")
            removed = self._removed / job_id
            durable.make_folder(self._removed)
            durable.move(folder, removed)
            self.indexes.drop(record)
            if record.label is not None:  # what was joint holds its numbers as well
                shutil.rmtree(batch_folder(self.root, record.label), ignore_errors=True)
            shutil.rmtree(removed, ignore_errors=True)
            if record.key:
                self._forget_key(self._keys / record.key, job_id)

    def _forget_key(self, key: Path, job_id: str) -> None:
        """Free the key of a removed job, unless it stands for another one already."""
        with durable.lock(key):
            if key.read_text() in (job_id, ""):
                key.unlink()

    def reindex(self) -> None:
        """Rebuild the indexes from the records, and clear what crashes left behind."""
        with telling("the job store could not be tidied"):
            for job_id in self.jobs.newest_first():
                if record := self._readable(job_id):
                    self.indexes.enter(record)
            shutil.rmtree(self._removed, ignore_errors=True)
            for path in self._incoming.iterdir() if self._incoming.is_dir() else ():
                if time.time() - path.stat().st_mtime > ABANDONED:
                    shutil.rmtree(path) if path.is_dir() else path.unlink()

    def forget_unknown(self, job_id: str) -> None:
        """Take out what a crash left of a job that never was: index entries, half of its files.

        Where nothing tells of the crash the job may be there although it is not seen: on a shared
        folder another machine's news arrive late.
        """
        half = self._incoming / job_id
        with telling(f"what is left of job {job_id} could not be removed"):
            crashed = age_of(job_id) > NEWS_ARRIVE
            with suppress(FileNotFoundError), durable.lock(half / RECORD_LOCK, wait=False) as mine:
                if mine:
                    shutil.rmtree(half)
                    crashed = True
            # A job being accepted is in incoming/ until it is in jobs/: look there first.
            if crashed and not half.exists() and not self.jobs.path(job_id).exists():
                self.indexes.drop_unknown(job_id)

    @contextmanager
    def _changing(self, job_id: str) -> Iterator[Path]:
        """Hold the record lock: every change of a record happens inside."""
        folder = self._folder(job_id)
        with (
            telling(f"the record of job {job_id} could not be written"),
            durable.lock(folder / RECORD_LOCK),
        ):
            yield folder

    def _replace(self, folder: Path, record: Record) -> Record:
        self.indexes.enter(record)
        durable.replace(folder / "record.json", record.as_bytes())
        # A job cancelled at work stays among the running ones until its worker, or the reconciler
        # in its place, has cleared away what it leaves.
        if not (record.is_final and (folder / STAGING).exists()):
            self.indexes.tidy(record)
        return record

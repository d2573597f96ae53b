"""Looking into the job store: records, documents, results, lists. Changes nothing.

How the folder is laid out, and what changes it, is in `store.py`.
"""

import logging
import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import NamedTuple

from workers.errors import NotFinalError, StoreError, UnknownJobError
from workers.index import Index, Indexes, newest_first
from workers.record import FINISHED, Record, is_id

log = logging.getLogger(__name__)


class Page(NamedTuple):
    """One page of a listing; `after` is the cursor of the next page, None on the last."""

    records: tuple[Record, ...]
    after: str | None


class StoreReader:
    """The readable half of a store."""

    def __init__(self, root: Path) -> None:
        self.root = Path(root)
        self.jobs = Index(self.root / "jobs")
        self.indexes = Indexes(self.root)

    def record(self, job_id: str) -> Record:
        """The record of a job."""
        if is_id(job_id):
            with telling(f"the record of job {job_id} could not be read"):
                try:
                    return Record.from_bytes((self.jobs.path(job_id) / "record.json").read_bytes())
                except FileNotFoundError:
                    pass
                except (ValueError, TypeError, LookupError) as error:
                    raise StoreError(f"the record of job {job_id} is damaged: {error}") from error
        raise UnknownJobError(f"there is no job {job_id!r}")

    def document(self, job_id: str) -> bytes:
        """The job document, byte for byte as it was accepted."""
        with telling(f"the document of job {job_id} could not be read"):
            return (self._folder(job_id) / "job.json").read_bytes()

    def results_path(self, job_id: str) -> Path:
        """The folder of the published results.

        Raises
        ------
        NotFinalError   the job has no results (yet).
        """
        record = self.record(job_id)
        if record.state != FINISHED:
            raise NotFinalError(f"job {job_id} is {record.state}; it has no results")
        return self.jobs.path(job_id) / "results"

    def list(
        self,
        *,
        state: str | None = None,
        label: str | None = None,
        workspace: str | None = None,
        after: str | None = None,
        limit: int = 50,
    ) -> Page:
        """Jobs, newest first, below the id `after`; opens little more than `limit` records."""
        if after is not None and not is_id(after):
            raise UnknownJobError(f"{after!r} is not a cursor of this listing")
        indexes = []
        if label is not None:
            indexes.append(self.indexes.of_label(label))
        if workspace is not None:
            indexes.append(self.indexes.of_workspace(workspace))
        if state is not None:
            indexes.append(self.indexes.of_state(state))
        records: tuple[Record, ...] = ()
        with telling("the jobs could not be listed"):
            for job_id in newest_first(indexes or [self.jobs], after):
                record = self._readable(job_id)
                if (
                    record
                    and state in (None, record.state)
                    and label in (None, record.label)
                    and workspace in (None, record.workspace)
                ):
                    if len(records) == limit:
                        return Page(records, records[-1].id)
                    records += (record,)
        return Page(records, None)

    def length_of_line(self, workspace: str) -> int:
        """Number of unfinished jobs of a workspace."""
        with telling("the unfinished jobs could not be counted"):
            return self.indexes.line_of(workspace).count()

    def unfinished(self) -> tuple[str, ...]:
        """Ids of all jobs that are queued or running, oldest first."""
        with telling("the unfinished jobs could not be listed"):
            return tuple(sorted(self.indexes.unfinished()))

    def interactive_jobs(self, workspace: str, owner: str | None) -> int:
        """Number of unfinished jobs of an owner in the interactive line."""
        with telling("the unfinished jobs could not be counted"):
            return self.indexes.interactive_of(workspace, owner).count()

    def room_left(self) -> int:
        """Free bytes on the disk of the store."""
        disk = self._disk()
        return disk.f_bavail * disk.f_frsize

    def disk_size(self) -> int:
        """All bytes of the disk of the store."""
        disk = self._disk()
        return disk.f_blocks * disk.f_frsize

    def _disk(self) -> os.statvfs_result:
        with telling("the disk of the store could not be asked"):
            existing = next(path for path in (self.root, *self.root.parents) if path.exists())
            return os.statvfs(existing)

    def _folder(self, job_id: str) -> Path:
        self.record(job_id)
        return self.jobs.path(job_id)

    def _readable(self, job_id: str) -> Record | None:
        """The record for a list, which a single damaged one must not break."""
        try:
            return self.record(job_id)
        except UnknownJobError:
            return None
        except StoreError:
            log.exception("job %s is left out of a list", job_id)
            return None


@contextmanager
def telling(trouble: str) -> Iterator[None]:
    """Turn what the operating system says into a StoreError that says what failed."""
    try:
        yield
    except StoreError:
        raise
    except OSError as error:
        raise StoreError(error.errno, f"{trouble}: {error.strerror or error}") from error

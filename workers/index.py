"""Sorted folder of job ids: newest first without opening a single record.

An index is a folder of days, each with one empty file (or, for the jobs themselves, one folder) for
every id. It may name too much after a crash, never too little: entries are added before the fact
they stand for and taken out after it has gone. Readers therefore look at the record as well.
"""

from collections.abc import Iterator
from pathlib import Path

from workers import durable
from workers.record import day_of, is_id


class Index:
    """Ids below one folder, by day."""

    def __init__(self, root: Path) -> None:
        self.root = root

    def path(self, job_id: str) -> Path:
        return self.root / day_of(job_id) / job_id

    def add(self, job_id: str, *, sync: bool = False) -> None:
        """Name the id; with `sync` the entry is durable on return."""
        path = self.path(job_id)
        durable.make_folder(path.parent)
        path.touch()
        if sync:
            durable.sync_folder(path.parent)

    def discard(self, job_id: str) -> None:
        self.path(job_id).unlink(missing_ok=True)

    def newest_first(self, after: str | None = None) -> Iterator[str]:
        """Ids in falling order, beginning below `after`; lists one day at a time."""
        for day in sorted(_names(self.root), reverse=True):
            if after and day > day_of(after):
                continue
            for job_id in sorted(_names(self.root / day), reverse=True):
                if is_id(job_id) and (not after or job_id < after):
                    yield job_id


def _names(folder: Path) -> list[str]:
    try:
        return [entry.name for entry in folder.iterdir()]
    except FileNotFoundError:
        return []

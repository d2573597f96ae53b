"""Sorted folders of job ids: newest first without opening a single record.

An index is a folder of days, each with one empty file (or, for the jobs themselves, one folder) for
every id. It may name too much after a crash, never too little: entries are added before the fact
they stand for and taken out after it has gone. Readers therefore look at the record as well.
"""

import hashlib
import os
from collections.abc import Iterable, Iterator, Sequence
from contextlib import suppress
from datetime import datetime
from pathlib import Path
from urllib.parse import quote

from workers import durable
from workers.record import INTERACTIVE, QUEUED, RUNNING, STATES, Record, day_of, is_id

LONGEST_NAME = 200  # of a folder that is named after its label [bytes]


class Index:
    """Ids below one folder, by day."""

    def __init__(self, root: Path) -> None:
        self.root = root

    def path(self, job_id: str) -> Path:
        return self.root / day_of(job_id) / job_id

    def add(self, job_id: str) -> Path:
        """Name the id; returns the folder to sync, where that is wanted."""
        path = self.path(job_id)
        while True:
            durable.make_folder(path.parent)
            try:
                path.touch()
                break
            except FileNotFoundError:  # the empty day was tidied away in between
                continue
        return path.parent

    def discard(self, job_id: str) -> None:
        self.path(job_id).unlink(missing_ok=True)

    def newest_first(self, after: str | None = None) -> Iterator[str]:
        """Ids in falling order, beginning below `after`; lists one day at a time."""
        return newest_first([self], after)

    def count(self) -> int:
        """Number of ids."""
        return sum(len(_names(self.root / day)) for day in _names(self.root))

    def oldest(self) -> str | None:
        """The lowest id."""
        for day in sorted(_names(self.root)):
            if ids := [name for name in _names(self.root / day) if is_id(name)]:
                return min(ids)
        return None

    def prune(self, before: datetime) -> None:
        """Take out the empty days before a time, so that counting does not slow down with age."""
        for day in _names(self.root):
            if day < before.date().isoformat():
                with suppress(OSError):  # not empty
                    (self.root / day).rmdir()


def newest_first(indexes: Sequence[Index], after: str | None = None) -> Iterator[str]:
    """Ids that all the indexes name, in falling order, beginning below `after`.

    Lists one day at a time, so that a page costs little however old the store is.
    """
    for day in sorted(_common(index.root for index in indexes), reverse=True):
        if after and day > day_of(after):
            continue
        for job_id in sorted(_common(index.root / day for index in indexes), reverse=True):
            if is_id(job_id) and (not after or job_id < after):
                yield job_id


def _folder_name(label: str) -> str:
    """A path component for a label; differs whenever the labels differ.

    File systems allow 255 bytes, and a letter may take twelve. Those that are cut are longer than
    all that are not.
    """
    # Neither the folder itself nor its parent, which "." and ".." are.
    name = "." + {"": "%", ".": "%2E"}.get(label, quote(label, safe=" "))
    if len(name) <= LONGEST_NAME:
        return name
    return f"{name[:LONGEST_NAME]}~{hashlib.sha256(label.encode()).hexdigest()[:32]}"


class Indexes:
    """Where to look for the jobs of a state, of a label, of a workspace."""

    def __init__(self, root: Path) -> None:
        self._root = root
        self._states = {state: Index(root / "states" / state) for state in STATES}
        self._labels = root / "labels"
        self._workspaces = root / "workspaces"
        self._lines = root / "lines"
        self._interactive = root / "interactive"

    def of_state(self, state: str) -> Index:
        return self._states[state]

    def of_label(self, label: str) -> Index:
        return Index(self._labels / _folder_name(label))

    def of_workspace(self, workspace: str) -> Index:
        return Index(self._workspaces / workspace)

    def line_of(self, workspace: str) -> Index:
        """The unfinished jobs of a workspace: small, so that counting them is quick."""
        return Index(self._lines / workspace)

    def interactive_of(self, workspace: str, owner: str | None) -> Index:
        """The unfinished jobs of an owner that stand in the interactive line."""
        return Index(self._interactive / f"{workspace}.{owner or ''}")

    def unfinished(self) -> set[str]:
        """Ids of the jobs that are queued or running, and perhaps of others that were."""
        return {i for state in (QUEUED, RUNNING) for i in self._states[state].newest_first()}

    def enter(self, record: Record) -> tuple[Path, ...]:
        """Before the record is written: name the job wherever it is to be found.

        Returns the folders to sync, where the entries are to be durable.
        """
        if not record.is_final:  # not worth a sync: these are only counted
            for line in self._lines_with(record):
                line.add(record.id)
        indexes = [self._states[record.state], self.of_workspace(record.workspace)]
        if record.label is not None:
            indexes.append(self.of_label(record.label))
        return tuple(index.add(record.id) for index in indexes)

    def tidy(self, record: Record) -> None:
        """After it was written: take the job out of wherever it is no more."""
        for state, index in self._states.items():
            if state != record.state:
                index.discard(record.id)
        if record.is_final:
            for line in self._lines_with(record):
                line.discard(record.id)

    def _lines_with(self, record: Record) -> Iterator[Index]:
        yield self.line_of(record.workspace)
        if record.priority == INTERACTIVE:
            yield self.interactive_of(record.workspace, record.owner)

    def prune(self, before: datetime) -> None:
        """Take out the empty days before a time from all indexes, and from the jobs themselves."""
        Index(self._root / "jobs").prune(before)
        for index in self._states.values():
            index.prune(before)
        for folder in (self._labels, self._workspaces, self._lines, self._interactive):
            for name in _names(folder):
                Index(folder / name).prune(before)

    def drop(self, record: Record) -> None:
        """Take out a job that is no more."""
        self.drop_unknown(record.id)
        self.of_workspace(record.workspace).discard(record.id)
        if record.label is not None:
            self.of_label(record.label).discard(record.id)

    def drop_unknown(self, job_id: str) -> None:
        """The same where there is no record to tell the workspace; the states lead others here."""
        for index in self._states.values():
            index.discard(job_id)
        for folder in (self._lines, self._interactive):
            for name in _names(folder):
                Index(folder / name).discard(job_id)


def _common(folders: Iterable[Path]) -> set[str]:
    """Names that stand in every one of the folders; the rest are not read once there is none."""
    first, *rest = folders
    common = set(_names(first))
    for folder in rest:
        if common:
            common.intersection_update(_names(folder))
    return common


def _names(folder: Path) -> list[str]:
    try:
        with os.scandir(folder) as entries:
            return [entry.name for entry in entries]
    except FileNotFoundError:
        return []

"""Bringing a store from an older layout to that of this program, one step a version.

Never at a start by itself: several machines may share a store, and the first one to be upgraded
must not change it under the others. Every step may be repeated; the version is written after it, so
that an interrupted migration goes on where it was.
"""

from collections.abc import Callable, Mapping
from contextlib import suppress
from dataclasses import dataclass, replace
from pathlib import Path
from types import MappingProxyType

import orjson

from workers import durable, layout
from workers.batch import outcome_of
from workers.errors import LayoutError, StoreError
from workers.record import FINISHED, Record
from workers.store import Store
from workers.store_reader import telling


@dataclass(frozen=True)
class Migration:
    """What was done.

    damaged : what is wrong with each job that could not be read before, and cannot be now.
    """

    before: int
    after: int
    jobs: int
    damaged: tuple[str, ...]


def migrate(root: Path) -> Migration:
    """Bring a store to the layout of this program.

    Raises
    ------
    LayoutError   it is of a newer layout, is in use, or there is no store.
    StoreError    the disk refused; what was done stays, repeat it.
    """
    if not root.is_dir():
        raise LayoutError(f"there is no store {root}")
    with layout.alone(root, "migrated"):
        before = layout.layout_of(root)
        if before is None:
            before = layout.LAYOUT
        if before > layout.LAYOUT:
            layout.require(root)
        store = Store(root)
        damaged: list[str] = []
        with telling(f"the store {root} could not be migrated"):
            for version in range(before, layout.LAYOUT):
                damaged = STEPS[version](store)
                layout.stamp(root, version + 1)
            if layout.layout_of(root) is None:
                layout.stamp(root)
        jobs = sum(1 for _ in store.jobs.newest_first())
    return Migration(before, layout.LAYOUT, jobs, tuple(damaged))


def complete_records(store: Store) -> list[str]:
    """0 to 1: records have all their fields, and stand in every index.

    Before, records lacked what Fishplate had not yet known when it wrote them (workspace, owner,
    line, what a batch compares), and their jobs were missing in the indexes that came later. An
    Idempotency-Key that was used before there were workspaces is not recognised any more: only a
    digest of it was kept.
    """
    damaged = []
    for job_id in list(store.jobs.newest_first()):
        try:
            record = _with_outcome(store, store.record(job_id))
        except StoreError as error:
            damaged.append(str(error))
            continue
        folder = store.jobs.path(job_id)
        store.indexes.enter(record)
        if (folder / "record.json").read_bytes() != record.as_bytes():
            durable.replace(folder / "record.json", record.as_bytes())
        store.indexes.tidy(record)
    return damaged


def _with_outcome(store: Store, record: Record) -> Record:
    """With what its batch wants to know, where the results tell it."""
    if record.state == FINISHED and record.outcome is None:
        path = store.jobs.path(record.id) / "results" / "results.json"
        with suppress(FileNotFoundError, LookupError, ValueError):
            return replace(record, outcome=outcome_of(orjson.loads(path.read_bytes())))
    return record


# By the version that a step begins with.
STEPS: Mapping[int, Callable[[Store], list[str]]] = MappingProxyType({0: complete_records})

"""What the store holds, and what is removed from it: by age, by total size, never what is pinned.

Nothing is removed that the operator did not ask to remove (`keep_days`, `keep_bytes`): results are
evidence. One process at a time looks, on whichever machine; the pools start it now and then.
"""

import logging
import os
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path

import orjson

from workers import durable
from workers.audit import EXPIRED, Audit
from workers.errors import StoreError
from workers.record import Record, now, time_of, timestamp
from workers.settings import Settings
from workers.store import Store

USAGE = "usage.json"
BLOCK = 512  # bytes of a block as stat(2) counts them

log = logging.getLogger(__name__)


@dataclass(frozen=True)
class Usage:
    """What the store held when it was looked at last; bytes on the disk, of jobs alone."""

    at: str
    jobs: int
    bytes: int


def keep_house(settings: Settings) -> None:
    """Remove what is due, and write down what is left; nothing where another process is at it."""
    store = Store(settings.store)
    durable.make_folder(store.root)
    with durable.lock(store.root / "housekeeping.lock", wait=False) as mine:
        if mine:
            sizes = {job_id: disk_usage(store.jobs.path(job_id)) for job_id in oldest_first(store)}
            for record, why in list(due(store, settings, sizes)):
                if _remove(store, record, why):
                    del sizes[record.id]
            store.indexes.prune(before=datetime.now(UTC) - timedelta(days=2))
            usage = Usage(now(), len(sizes), sum(sizes.values()))
            durable.replace(store.root / USAGE, orjson.dumps(asdict(usage)))


def usage_of(root: Path) -> Usage | None:
    """What was written down last; None before the first look."""
    try:
        return Usage(**orjson.loads((root / USAGE).read_bytes()))
    except FileNotFoundError:
        return None


def due(store: Store, settings: Settings, sizes: dict[str, int]) -> Iterator[tuple[Record, str]]:
    """Final jobs that are not pinned and too old, or whose room is wanted; oldest first.

    sizes : of all jobs, oldest first [bytes].
    """
    left = sum(sizes.values())
    most = left if settings.keep_bytes is None else settings.keep_bytes
    earliest = datetime.min.replace(tzinfo=UTC)
    if settings.keep_days is not None:
        earliest = datetime.now(UTC) - timedelta(days=settings.keep_days)
    for job_id, size in sizes.items():
        # A job has not ended before it was accepted, so that younger ones need not be opened.
        if left <= most and time_of(job_id) >= earliest:
            return
        if not (record := _removable(store, job_id)):
            continue
        if record.ended is not None and record.ended < timestamp(earliest):
            yield record, f"older than {settings.keep_days:g} days"
            left -= size
        elif left > most:
            yield record, f"the store holds more than {most} bytes"
            left -= size


def oldest_first(store: Store) -> list[str]:
    """Ids of all jobs."""
    return sorted(store.jobs.newest_first())


def disk_usage(folder: Path) -> int:
    """What a folder and everything in it take on the disk [bytes]; what vanishes counts as zero."""
    total, waiting = 0, [folder]
    while waiting:
        try:
            with os.scandir(waiting.pop()) as entries:
                for entry in entries:
                    total += entry.stat(follow_symlinks=False).st_blocks * BLOCK
                    if entry.is_dir(follow_symlinks=False):
                        waiting.append(Path(entry.path))
        except FileNotFoundError:
            continue
    return total


def _removable(store: Store, job_id: str) -> Record | None:
    try:
        record = store.record(job_id)
    except StoreError:  # removed meanwhile, or damaged: not ours to judge
        return None
    return record if record.is_final and not record.pinned else None


def _remove(store: Store, record: Record, why: str) -> bool:
    try:
        store.remove(record.id)
    except StoreError as error:  # pinned or removed meanwhile
        log.info("job %s is not removed: %s", record.id, error)
        return False
    Audit(store.root).note(
        EXPIRED,
        job=record.id,
        workspace=record.workspace,
        title=record.title,
        who="housekeeping",
        reason=why,
    )
    return True

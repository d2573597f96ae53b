"""Files that survive a power cut, and locks that vanish with their process.

Everything here raises OSError as it comes; `store.py` turns it into words. Locks are BSD locks
(flock): they exclude threads as well as processes, and the kernel releases them when the holder
dies, however it dies, so no lease has to run out.
"""

import errno
import fcntl
import os
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from pathlib import Path

MOST_AT_ONCE = 32  # syncs


def sync(*paths: Path) -> None:
    """Make the content of files, and the names inside folders, durable; in any order.

    Together, because the disk then writes once: 18 files take 6 ms, one after the other 108 ms.
    """
    if len(paths) == 1:
        _sync(paths[0])
        return
    with ThreadPoolExecutor(min(len(paths), MOST_AT_ONCE)) as threads:
        for _ in threads.map(_sync, paths):
            pass  # raises what the thread has met


def _sync(path: Path) -> None:
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def sync_folder(folder: Path) -> None:
    """Make the names inside a folder durable."""
    _sync(folder)


def sync_tree(folder: Path) -> None:
    """Make every file and folder below `folder` durable."""
    tree = list(os.walk(folder))
    sync(
        *(Path(parent) for parent, _, _ in tree),
        *(Path(parent, name) for parent, _, names in tree for name in names),
    )


def make_folder(folder: Path) -> None:
    """Create a folder and whatever is missing above it, durably."""
    if folder.is_dir():
        return
    make_folder(folder.parent)
    folder.mkdir(exist_ok=True)
    sync_folder(folder.parent)


def write(path: Path, data: bytes, mode: int = 0o666) -> None:
    """Write a file and its content durably; its name becomes durable with `sync_folder`."""
    descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_TRUNC, mode)
    with os.fdopen(descriptor, "wb") as file:
        file.write(data)
        file.flush()
        os.fsync(file.fileno())


def replace(path: Path, data: bytes, mode: int = 0o666) -> None:
    """Replace a file at once: a reader sees the old or the new content, never a part."""
    scratch = path.with_name(path.name + ".new")
    try:
        write(scratch, data, mode)
        scratch.replace(path)
    except OSError:
        scratch.unlink(missing_ok=True)
        raise
    sync_folder(path.parent)


def append(path: Path, line: bytes) -> None:
    """Add a line to a file, whole and durably, whoever else adds to it at the same time."""
    with lock(path), path.open("r+b", buffering=0) as file:
        end = file.seek(0, os.SEEK_END)
        try:
            if file.write(line) < len(line):
                raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
            os.fsync(file.fileno())
        except OSError:
            file.truncate(end)
            raise
    if not end:
        sync_folder(path.parent)


def move(source: Path, target: Path) -> None:
    """Rename durably; both must be on one file system."""
    source.rename(target)
    sync(*{target.parent, source.parent})


@contextmanager
def lock(path: Path, *, wait: bool = True, shared: bool = False) -> Iterator[bool]:
    """Hold the lock of `path` (created when missing); yields False when taken and wait is off.

    shared : together with others that hold it shared.
    """
    kind = fcntl.LOCK_SH if shared else fcntl.LOCK_EX
    descriptor = _locked_descriptor(path, kind | (0 if wait else fcntl.LOCK_NB))
    try:
        yield descriptor is not None
    finally:
        if descriptor is not None:
            os.close(descriptor)


def _locked_descriptor(path: Path, operation: int) -> int | None:
    while True:
        descriptor = os.open(path, os.O_RDWR | os.O_CREAT, 0o600)
        try:
            fcntl.flock(descriptor, operation)
            # Whoever held it may have removed the file: then the lock is on nothing, try again.
            if path.exists() and os.path.samestat(os.fstat(descriptor), path.stat()):
                return descriptor
        except BlockingIOError:
            os.close(descriptor)
            return None
        except FileNotFoundError:
            pass
        except BaseException:
            os.close(descriptor)
            raise
        os.close(descriptor)

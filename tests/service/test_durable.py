"""Locks exclude, and vanish with their holder; a replaced file is never seen half."""

import os
import signal
import subprocess
import sys
import threading
from pathlib import Path

import pytest

from workers import durable

HOLD = """
import sys, time
from pathlib import Path
from workers import durable
with durable.lock(Path(sys.argv[1])):
    print("held", flush=True)
    time.sleep(60)
"""


def is_free(path: Path) -> bool:
    with durable.lock(path, wait=False) as mine:
        return mine


def test_a_lock_ends_with_a_killed_holder(tmp_path: Path) -> None:
    path = tmp_path / "lock"
    with subprocess.Popen(
        [sys.executable, "-c", HOLD, str(path)], stdout=subprocess.PIPE
    ) as holder:
        assert holder.stdout is not None
        assert holder.stdout.readline() == b"held\n"
        assert not is_free(path)
        holder.send_signal(signal.SIGKILL)
        holder.wait()
        assert is_free(path)


def test_a_lock_excludes_threads_of_one_process(tmp_path: Path) -> None:
    with durable.lock(tmp_path / "lock"):
        seen: list[bool] = []
        thread = threading.Thread(target=lambda: seen.append(is_free(tmp_path / "lock")))
        thread.start()
        thread.join()
        assert seen == [False]
    assert is_free(tmp_path / "lock")


def test_whoever_waits_for_a_removed_lock_gets_a_lock_that_excludes(tmp_path: Path) -> None:
    """The file is removed and made anew while somebody waits: that one must lock the new file."""
    path = tmp_path / "lock"
    waiting, got, leave = threading.Event(), threading.Event(), threading.Event()

    def wait_for_it() -> None:
        waiting.set()
        with durable.lock(path):
            got.set()
            leave.wait(10)

    thread = threading.Thread(target=wait_for_it)
    with durable.lock(path):
        thread.start()
        waiting.wait(10)
        path.unlink()
        path.touch()
    assert got.wait(10)
    assert not is_free(path)
    leave.set()
    thread.join()


def test_a_refused_replacement_leaves_the_old_file_and_nothing_else(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "record.json"
    durable.replace(path, b"old")

    def refuse(_descriptor: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", refuse)
    with pytest.raises(OSError, match="No space left"):
        durable.replace(path, b"new")
    assert path.read_bytes() == b"old"
    assert list(tmp_path.iterdir()) == [path]

"""A whole installation that is killed piece by piece and comes up again: pool, Redis, API, disk.

What systemd would do is done here: whatever has ended is started again. The private Redis server is
kept alive by the pool, as in an installation on one machine.
"""

import os
import random
import shutil
import signal
import socket
import subprocess
import sys
import time
from collections import Counter
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Protocol

import psutil

from tests.service_pool import children, eventually
from workers.lineage import die_with_parent
from workers.settings import Settings

FULL_FOR = 2.0  # that the disk stays full [s]
DISK_BYTES = 128 * 1024**2  # of the disk that is mounted; the store of 300 small jobs takes 20 MB
LOOK_FOR = 8.0  # a process to kill; there is none when all jobs have ended [s]
PATIENCE = 60.0  # s

# What happens, and how often; in random order.
MUST = {
    "work-horse": 8,
    "worker": 4,
    "API process": 2,
    "one of the API's processes": 2,
    "Redis": 2,
    "Redis and its data": 2,
    "pool": 1,
    "everything": 1,
    "disk full": 1,
}


class Disk(Protocol):
    """The disk of the store."""

    name: str

    def fill(self) -> None: ...

    def empty(self) -> None: ...


class Site:
    """Pool, Redis and API on one store."""

    def __init__(self, settings: Settings, log: Path) -> None:
        self.settings = settings
        self.kills: Counter[str] = Counter()
        self._log = log.open("ab")
        # Held here and handed on, as socket activation does: a killed API keeps its address.
        self._listener = socket.create_server(("127.0.0.1", 0), backlog=256)
        self.address: tuple[str, int] = self._listener.getsockname()
        self.pool = self._start_pool()
        self.api = self._start_api()
        self.disk: Disk = LimitedDisk(self)

    # --- keeping up ------------------------------------------------------------------------------

    def _start_pool(self) -> "subprocess.Popen[bytes]":
        return self._start("workers.pool")

    def _start_api(self) -> "subprocess.Popen[bytes]":
        return self._start(
            "gunicorn",
            "api.app:create_app()",
            "--no-control-socket",
            f"--bind=fd://{self._listener.fileno()}",
            "--workers=2",
            "--worker-class=gthread",
            f"--threads={self.settings.api_threads}",
            "--config=python:api.gunicorn_config",
        )

    def _start(self, module: str, *arguments: str) -> "subprocess.Popen[bytes]":
        return subprocess.Popen(
            [sys.executable, "-m", module, *arguments],
            env={**os.environ, **self.settings.as_environment()},
            stdout=self._log,
            stderr=self._log,
            pass_fds=(self._listener.fileno(),),
            start_new_session=True,
            preexec_fn=lambda: die_with_parent(signal.SIGKILL),  # noqa: PLW1509
        )

    def keep_up(self) -> None:
        """Start again whatever has ended."""
        if self.pool.poll() is not None:
            self.pool = self._start_pool()
        if self.api.poll() is not None:
            self.api = self._start_api()

    def close(self) -> None:
        everything = self.processes()
        _kill(*everything)
        for process in (self.pool, self.api):
            process.wait()
        psutil.wait_procs(everything, timeout=PATIENCE)
        self._listener.close()
        self._log.close()

    # --- who there is ----------------------------------------------------------------------------

    def redis(self) -> list[psutil.Process]:
        return [c for c in children(self.pool.pid) if "redis-server" in c.name()]

    def workers(self) -> list[psutil.Process]:
        return [c for c in children(self.pool.pid) if "redis-server" not in c.name()]

    def horses(self) -> list[psutil.Process]:
        return [horse for worker in self.workers() for horse in children(worker.pid)]

    def processes(self) -> list[psutil.Process]:
        """All of them, parents before children."""
        found = []
        for process in (self.pool, self.api):
            with suppress(psutil.NoSuchProcess):
                parent = psutil.Process(process.pid)
                found += [parent, *parent.children(recursive=True)]
        return found

    # --- what happens to it ----------------------------------------------------------------------

    def happen(self, what: str, chance: random.Random) -> None:
        """Let one of `MUST` happen, if there is what it happens to."""
        happens: dict[str, Callable[[random.Random], bool]] = {
            "work-horse": lambda chance: _kill_one(self.horses, chance),
            "worker": lambda chance: _kill_one(self.workers, chance),
            "API process": lambda _: _kill(*self._tree(self.api)),
            "one of the API's processes": lambda chance: _kill_one(
                lambda: children(self.api.pid), chance
            ),
            "Redis": lambda _: _kill(*self.redis()),
            "Redis and its data": lambda _: self._lose_redis(),
            "pool": lambda _: _kill(psutil.Process(self.pool.pid)),
            "everything": lambda _: _kill(*self.processes()),
            "disk full": lambda _: self._fill_disk(),
        }
        self.kills[what] += happens[what](chance)

    def _tree(self, process: "subprocess.Popen[bytes]") -> list[psutil.Process]:
        parent = psutil.Process(process.pid)
        return [parent, *parent.children(recursive=True)]

    def _lose_redis(self) -> bool:
        data = self.settings.store / "redis" / "appendonlydir"
        victims = eventually(self.redis, patience=PATIENCE)
        shutil.rmtree(data, ignore_errors=True)
        _kill(*victims)
        shutil.rmtree(data, ignore_errors=True)
        return True

    def _fill_disk(self) -> bool:
        self.disk.fill()
        until = time.monotonic() + FULL_FOR
        while time.monotonic() < until:
            self.keep_up()
            time.sleep(0.1)
        self.disk.empty()
        return True


def _kill_one(who: Callable[[], list[psutil.Process]], chance: random.Random) -> bool:
    until = time.monotonic() + LOOK_FOR
    while time.monotonic() < until:
        if (there := who()) and _kill(chance.choice(there)):
            return True
        time.sleep(0.002)
    return False


def _kill(*victims: psutil.Process) -> bool:
    """SIGKILL; True if one of them was there for it."""
    met = False
    for victim in victims:
        with suppress(psutil.NoSuchProcess):
            victim.kill()
            met = True
    return met


# --- disks -------------------------------------------------------------------------------------


class MountedDisk:
    """A small file system of its own, on which nothing has room once it is full: ENOSPC."""

    name = "a file system without room"

    def __init__(self, folder: Path) -> None:
        self._filler = folder / "filler"

    def fill(self) -> None:
        with suppress(OSError), self._filler.open("wb", buffering=0) as file:
            while True:
                file.write(bytes(4096))

    def empty(self) -> None:
        self._filler.unlink()


class LimitedDisk:
    """Without privileges: the kernel lets no process but Redis write into a file (EFBIG)."""

    name = "no process may write into a file"

    def __init__(self, site: Site) -> None:
        self._site = site

    def fill(self) -> None:
        self._limit(0)

    def empty(self) -> None:
        self._limit(psutil.RLIM_INFINITY)

    def _limit(self, size: int) -> None:
        for _ in range(2):  # what was forked meanwhile has the limit of before
            for process in self._site.processes():
                with suppress(psutil.NoSuchProcess):
                    if "redis-server" not in process.name():  # would die of the signal
                        process.rlimit(psutil.RLIMIT_FSIZE, (size, psutil.RLIM_INFINITY))


@contextmanager
def mounted(folder: Path) -> Iterator[bool]:
    """A small file system at the folder; False where we may not mount one."""
    folder.mkdir()
    command = ["mount", "-t", "tmpfs", "-o", f"size={DISK_BYTES}", "fishplate", folder]
    program = shutil.which("mount")
    done = program is not None and subprocess.run(command, capture_output=True, check=False)
    if not done or done.returncode != 0:
        yield False
        return
    try:
        yield True
    finally:
        subprocess.run(["umount", "--lazy", folder], check=True)


@contextmanager
def running_site(folder: Path, settings: Settings, disk: str) -> Iterator[Site]:
    """An installation in a folder; disk: "mount", "limit", or "" for whichever is possible."""
    with mounted(folder / "disk") if disk != "limit" else _not_mounted(folder / "disk") as real:
        assert real or disk != "mount", "no file system could be mounted"
        site = Site(settings, folder / "log")
        if real:
            site.disk = MountedDisk(folder / "disk")
        try:
            yield site
        finally:
            site.close()


@contextmanager
def _not_mounted(folder: Path) -> Iterator[bool]:
    folder.mkdir()
    yield False

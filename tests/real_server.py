"""Real Fishplate servers for tests: Redis, workers and HTTP server in processes of their own."""

import os
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from workers.private_redis import PrivateRedis
from workers.queue import Queue
from workers.settings import Settings

FISHPLATE = Path(sys.executable).with_name("fishplate")
PATIENCE = 120.0  # s, for starting and for jobs; on a busy machine


@dataclass(frozen=True)
class Server:
    """urls, processes : one of each, or several where API and workers are apart

    workers : how many jobs are worked on at a time
    """

    urls: tuple[str, ...]
    processes: tuple["subprocess.Popen[bytes]", ...]
    store: Path
    workers: int

    @property
    def url(self) -> str:
        return self.urls[0]


@contextmanager
def real_server(folder: Path, **settings: str) -> Iterator[Server]:
    """`fishplate serve` with one worker, whose store and logs are in the folder.

    settings : further environment variables
    """
    environment = {
        "FISHPLATE_STORE": str(folder / "store"), "FISHPLATE_WORKERS": "1", **settings
    }  # fmt: skip
    with ExitStack() as parts:
        process, url = parts.enter_context(serving(folder / "serve", environment))
        yield Server((url,), (process,), folder / "store", 1)


@contextmanager
def real_services(folder: Path) -> Iterator[Server]:
    """Two API servers and two workers beside a Redis, as an office with more machines has them."""
    store = folder / "store"
    with ExitStack() as parts:
        redis_url = parts.enter_context(PrivateRedis(folder / "redis")).url
        environment = {"FISHPLATE_STORE": str(store), "FISHPLATE_REDIS_URL": redis_url}
        workers = [
            parts.enter_context(
                _running([FISHPLATE, "work", "--workers", "1"], folder / f"work-{n}", environment)
            )
            for n in range(2)
        ]
        served = [
            parts.enter_context(
                serving(folder / f"serve-{n}", {**environment, "FISHPLATE_WORKERS": "0"})
            )
            for n in range(2)
        ]
        queue = Queue(Settings(store=store, redis_url=redis_url))
        parts.callback(queue.connection.close)
        _await(lambda: queue.workers_alive() == len(workers), workers, folder / "work-0")
        urls, servers = zip(*((url, process) for process, url in served), strict=True)
        yield Server(urls, (*servers, *workers), store, len(workers))


@contextmanager
def serving(place: Path, environment: dict[str, str], *options: Any) -> Iterator[tuple[Any, str]]:
    """`fishplate serve` on a free port: process and address; its log is beside `place`."""
    address = place.with_suffix(".address")
    address.unlink(missing_ok=True)  # of an earlier server at this place
    command = [FISHPLATE, "serve", "--port", "0", "--address-file", address, *options]
    with _running(command, place, environment) as process:
        _await(address.exists, [process], place)
        yield process, address.read_text().strip()


@contextmanager
def _running(command: list[Any], place: Path, environment: dict[str, str]) -> Iterator[Any]:
    """A process that is stopped in the end; its log is beside `place`."""
    with place.with_suffix(".log").open("wb") as log:
        process = subprocess.Popen(command, env={**os.environ, **environment}, stderr=log)
    try:
        yield process
    finally:
        process.terminate()
        process.wait(PATIENCE)


def _await(what: Callable[[], bool], processes: list[Any], place: Path) -> None:
    until = time.monotonic() + PATIENCE
    while not what():
        log = place.with_suffix(".log").read_text()
        assert all(process.poll() is None for process in processes), log
        assert time.monotonic() < until, log
        time.sleep(0.05)

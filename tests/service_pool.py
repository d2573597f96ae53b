"""A real pool with real forking workers on a real Redis, for the tests of the service."""

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import psutil

from workers.queue import Queue
from workers.record import Event, Record
from workers.settings import Settings
from workers.store import Store

# What the stand-in pipeline writes (tests/standin_pipeline.py).
RESULTS = ("results.json", "fields/lift.vtu", "previews/lift/von_mises.png")
ROOT = Path(__file__).parent.parent
PATIENCE = 30.0  # far beyond what anything here takes; only a failing test waits that long [s]


def eventually(what: Callable[[], Any], patience: float = PATIENCE) -> Any:
    """What the function gives as soon as that is true."""
    until = time.monotonic() + patience
    while not (found := what()):
        assert time.monotonic() < until, "it did not happen"
        time.sleep(0.02)
    return found


@dataclass
class Service:
    """A pool under test, with the client's side of its store and queue."""

    settings: Settings
    store: Store
    queue: Queue
    process: "subprocess.Popen[bytes]"

    def submit(self, do: str, **order: Any) -> str:
        job_id = accept(self.store, do, **order)
        self.queue.submit(job_id)
        return job_id

    def ended(self, job_id: str) -> Record:
        """The record of a job once it is final."""
        return eventually(lambda: (r := self.store.record(job_id)).is_final and r)

    def begun(self, job_id: str) -> None:
        """Wait until the pipeline works on the job."""
        eventually(lambda: attempts_in(self.store, job_id))

    def workers(self) -> list[psutil.Process]:
        return [c for c in children(self.process.pid) if "redis-server" not in c.name()]

    def horses(self) -> list[psutil.Process]:
        return [horse for worker in self.workers() for horse in children(worker.pid)]

    def stop(self, number: signal.Signals = signal.SIGTERM) -> int:
        self.process.send_signal(number)
        return self.process.wait(timeout=PATIENCE)


def children(pid: int) -> list[psutil.Process]:
    """Living children of a process; none where it has just ended itself."""
    try:
        found = psutil.Process(pid).children()
        return [c for c in found if c.is_running() and c.status() != psutil.STATUS_ZOMBIE]
    except psutil.NoSuchProcess:
        return []


def accept(
    store: Store, do: str, priority: str = "bulk", model: str | None = None, **order: Any
) -> str:
    document = json.dumps({"do": do, **order}).encode()
    return store.accept(document, title=do, priority=priority, model=model).record.id


def final_events(record: Record) -> list[Event]:
    return [e for e in record.history if e.state in ("finished", "failed", "cancelled")]


def check_one_end(service: Service, job_id: str) -> None:
    """One final state, the last one; results if and only if finished; nothing left over."""
    record = service.store.record(job_id)
    assert len(final_events(record)) == 1
    assert record.history[-1] == final_events(record)[0]
    folder = service.store.jobs.path(job_id)
    assert (folder / "results").is_dir() == (record.state == "finished")
    eventually(lambda: not (folder / "staging").exists())
    eventually(lambda: job_id not in service.store.unfinished())


def attempts_in(store: Store, job_id: str) -> int:
    """How often the stand-in pipeline was entered for a job."""
    return len(list(store.jobs.path(job_id).glob("begun-*")))


@contextmanager
def running_pool(settings: Settings, module: str = "tests.standin_pipeline") -> Iterator[Service]:
    settings.store.mkdir(parents=True, exist_ok=True)
    with (settings.store / "pool.log").open("ab") as output:  # kept with the test's files
        process = subprocess.Popen(
            [sys.executable, "-m", module],
            cwd=ROOT,
            env={**os.environ, **settings.as_environment()},
            stdout=output,
            stderr=output,
        )
    queue = Queue(settings)
    try:
        yield Service(settings, queue.store, queue, process)
    finally:
        workers = children(process.pid)
        process.kill()
        process.wait()
        for worker in workers:  # would finish their jobs first; work-horses end with them
            with suppress(psutil.NoSuchProcess):
                worker.kill()
        queue.connection.close()

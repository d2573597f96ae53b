"""Small jobs through HTTP, Redis and workers, against rq jobs that do nothing.

Wall times, in turns: waiting is what is measured here. The rq workers fork for each job, as ours
do, get the same document and have a Redis server of the same kind.
"""

import json
import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from http.client import HTTPConnection
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import pytest
import redis
import rq

from tests.measuring import CHILD_ENVIRONMENT, ROUNDS, at_least, at_most
from tests.panels import cells_for, panel
from workers import pipeline
from workers.private_redis import PrivateRedis

pytestmark = pytest.mark.benchmark

FISHPLATE = Path(sys.executable).with_name("fishplate")
RQ_WORKER = """
import sys, redis, rq
rq.Worker(["noop"], connection=redis.Redis.from_url(sys.argv[1])).work(logging_level="ERROR")
"""
NOTHING = "operator.truth"  # a function that an rq job can name and that does nothing
PATIENCE = 120.0  # [s]
DOFS = 2000
WORKERS = 2
BURST = 30  # jobs at a time for the throughput
LATENCY_GOAL, THROUGHPUT_GOAL = 1.0, 0.5


def document(thickness: float = 10.0) -> bytes:
    """Jobs of different thickness have nothing in common that workers could share."""
    job = panel(cells_for(DOFS), cases=1)
    job["plate"]["thickness"] = thickness
    return json.dumps(job).encode()


@dataclass
class Fishplate:
    """A client of a running server."""

    connection: HTTPConnection

    def ask(self, method: str, path: str, body: bytes | None = None, **headers: str) -> Any:
        sent = {"Content-Type": "application/json", **headers}
        self.connection.close()  # the server does not keep an idle one for long
        self.connection.request(method, path, body, sent)
        answer = self.connection.getresponse()
        found = json.loads(answer.read())
        assert answer.status < 300, found
        return found

    def submit(self, body: bytes) -> str:
        return str(self.ask("POST", "/v1/jobs?priority=bulk", body)["links"]["self"])

    def wait(self, path: str) -> None:
        until = time.monotonic() + PATIENCE
        while (state := self.ask("GET", path, Prefer="wait=30")["state"]) != "finished":
            assert state in ("queued", "running"), state
            assert time.monotonic() < until


@contextmanager
def fishplate(folder: Path) -> Iterator[Fishplate]:
    address = folder / "address"
    settings = {
        "FISHPLATE_STORE": str(folder / "store"),
        "FISHPLATE_WORKERS": str(WORKERS),
        "FISHPLATE_PICTURES": "0",
        "FISHPLATE_REQUEST_RATE": "off",
        "FISHPLATE_SUBMIT_RATE": "off",
    }
    with (folder / "log").open("wb") as log:
        process = subprocess.Popen(
            [FISHPLATE, "serve", "--port", "0", "--address-file", address],
            env={**os.environ, **settings},
            stderr=log,
        )
    try:
        until = time.monotonic() + PATIENCE
        while not address.exists():
            assert process.poll() is None, (folder / "log").read_text()
            assert time.monotonic() < until
            time.sleep(0.05)
        where = urlsplit(address.read_text().strip())
        yield Fishplate(HTTPConnection(where.hostname or "", where.port, timeout=PATIENCE))
    finally:
        process.terminate()
        process.wait(PATIENCE)


@contextmanager
def noop_queue(folder: Path) -> Iterator[rq.Queue]:
    with PrivateRedis(folder) as server, ExitStack() as running:
        for _ in range(WORKERS):
            command = [sys.executable, "-c", RQ_WORKER, server.url]
            worker = running.enter_context(subprocess.Popen(command, env=CHILD_ENVIRONMENT))
            running.callback(worker.terminate)
        connection = running.enter_context(redis.Redis.from_url(server.url))
        yield rq.Queue("noop", connection=connection)


def _noops(queue: rq.Queue, payloads: list[bytes]) -> None:
    for job in [queue.enqueue(NOTHING, payload.decode()) for payload in payloads]:
        assert job.latest_result(timeout=int(PATIENCE)) is not None


def _jobs(server: Fishplate, payloads: list[bytes]) -> None:
    for path in [server.submit(payload) for payload in payloads]:
        server.wait(path)


def _in_process(payload: bytes) -> None:
    with tempfile.TemporaryDirectory() as folder:
        pipeline.run(payload, Path(folder), pictures=0)


def _seconds(work: Any, *arguments: Any) -> float:
    start = time.perf_counter()
    work(*arguments)
    return time.perf_counter() - start


def test_small_jobs_against_jobs_that_do_nothing(tmp_path: Path) -> None:
    (tmp_path / "served").mkdir()
    with fishplate(tmp_path / "served") as server, noop_queue(tmp_path / "redis") as queue:
        for work in (lambda p: _jobs(server, p), lambda p: _noops(queue, p)):
            work([document()] * WORKERS)  # every worker has begun
        _in_process(document())
        ratios, analyses, noops, ours = [], [], [], []
        for number in range(3 * ROUNDS):
            payload = document(10.0 + 0.01 * number)
            noops.append(_seconds(_noops, queue, [payload]))
            analyses.append(_seconds(_in_process, payload))
            ours.append(_seconds(_jobs, server, [payload]))
            ratios.append(ours[-1] / (noops[-1] + 1.5 * analyses[-1]))
        seen = ", ".join(f"{1e3 * statistics.median(t):.0f} ms" for t in (ours, noops, analyses))
        at_most(
            f"small job of {DOFS} unknowns, accepted to finished / (rq no-op + 1.5 x the analysis "
            f"in process), medians {seen}",
            statistics.median(ratios),
            LATENCY_GOAL,
        )
        ratios, rates = [], []
        for number in range(ROUNDS):
            payloads = [document(20.0 + number + 0.01 * i) for i in range(BURST)]
            nothing = _seconds(_noops, queue, payloads)
            taken = _seconds(_jobs, server, payloads)
            ratios.append(nothing / taken)
            rates.append((BURST / taken, BURST / nothing))
        ours_rate, rq_rate = (statistics.median(rate) for rate in zip(*rates, strict=True))
        at_least(
            f"small jobs per second, {WORKERS} workers / rq no-op jobs per second "
            f"({ours_rate:.3g}/s, {rq_rate:.3g}/s)",
            statistics.median(ratios),
            THROUGHPUT_GOAL,
        )

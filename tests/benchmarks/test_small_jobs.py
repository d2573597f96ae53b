"""Jobs through HTTP, Redis and workers: against rq jobs that do nothing, and many against one.

In turns. The rq workers fork for each job, as ours do, get the same document and have a Redis
server of the same kind. Time is taken twice: on the clock, which says what a person waits on a
quiet machine, and of the processors by this process and all that it has started, client, Redis
and workers of either side; that is held against the goal.
"""

import json
import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import ExitStack, closing, contextmanager
from dataclasses import dataclass
from http.client import HTTPConnection
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import psutil
import pytest
import redis
import rq

from tests.measuring import CHILD_ENVIRONMENT, LONG, ROUNDS, at_least, at_most
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
PATIENCE = 600.0  # for hundreds of jobs on a busy machine [s]
DOFS = 2000
WORKERS = 2
BURST = 30 if LONG else 12  # jobs at a time for the throughput
LATENCY_GOAL, THROUGHPUT_GOAL = 1.0, 0.5
MANY, MANY_DOFS = (300, 20_000) if LONG else (30, DOFS)
MANY_GOAL = 4.0  # times one job with all the cases
# A job that does nothing takes a few milliseconds: the smallest job with a review, a sheet, tables
# and fields takes ten times as long by its nature.
THROUGHPUT_ROOM = 10.0
# Every job of a batch is accepted, reviewed, written and synced on its own, which no sharing of
# the factor spares.
MANY_ROOM = 8.0


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

    def wait_for_batch(self, label: str) -> None:
        until = time.monotonic() + PATIENCE
        while (batch := self.ask("GET", f"/v1/batches/{label}"))["progress"] < 1.0:
            assert time.monotonic() < until
            time.sleep(0.5)
        assert batch["jobs"]["finished"] == sum(batch["jobs"].values()), batch["jobs"]

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
        connection = HTTPConnection(where.hostname or "", where.port, timeout=PATIENCE)
        with closing(connection):
            yield Fishplate(connection)
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


@dataclass(frozen=True)
class Spent:
    """Seconds on the clock, and of the processors."""

    clock: float
    processor: float


def _spent(work: Any, *arguments: Any) -> Spent:
    clock, processor = time.perf_counter(), processor_time()
    work(*arguments)
    return Spent(time.perf_counter() - clock, processor_time() - processor)


def processor_time() -> float:
    """Of this process and everything below it, ended or not [s]."""
    this = psutil.Process()
    while True:
        try:
            times = [p.cpu_times() for p in (this, *this.children(recursive=True))]
        except psutil.NoSuchProcess:  # ended just now: then it is in the times of its parent
            continue
        return sum(t.user + t.system + t.children_user + t.children_system for t in times)


Ratio = Callable[..., float]


def _compare(sides: Sequence[Sequence[Spent]], ratio: Ratio) -> tuple[float, float]:
    """Medians of the ratio of paired runs: of processor time, and on the clock."""
    assert len(sides[0]) >= ROUNDS
    rounds = list(zip(*sides, strict=True))
    return (
        statistics.median(ratio(*(spent.processor for spent in one)) for one in rounds),
        statistics.median(ratio(*(spent.clock for spent in one)) for one in rounds),
    )


def _on_the_clock(sides: Sequence[Sequence[Spent]]) -> str:
    return ", ".join(f"{statistics.median(s.clock for s in side):.2g} s" for side in sides)


def test_small_job_against_a_job_that_does_nothing(tmp_path: Path) -> None:
    (tmp_path / "served").mkdir()
    with fishplate(tmp_path / "served") as server, noop_queue(tmp_path / "redis") as queue:
        _warm_up(server, queue)
        ours, noops, analyses = sides = [], [], []
        for number in range((3 if LONG else 1) * ROUNDS):
            payload = document(10.0 + 0.01 * number)
            noops.append(_spent(_noops, queue, [payload]))
            analyses.append(_spent(_in_process, payload))
            ours.append(_spent(_jobs, server, [payload]))
    processor, clock = _compare(sides, lambda job, noop, alone: job / (noop + 1.5 * alone))
    at_most(
        f"small job, {DOFS} unknowns, accepted to finished / (rq no-op + 1.5 x the analysis in "
        f"process); {clock:.2f} times on the clock ({_on_the_clock(sides)})",
        processor,
        LATENCY_GOAL,
    )


def test_small_jobs_a_second_against_jobs_that_do_nothing(tmp_path: Path) -> None:
    (tmp_path / "served").mkdir()
    with fishplate(tmp_path / "served") as server, noop_queue(tmp_path / "redis") as queue:
        _warm_up(server, queue)
        noops, ours = sides = [], []
        for number in range(ROUNDS):
            payloads = [document(20.0 + number + 0.01 * i) for i in range(BURST)]
            noops.append(_spent(_noops, queue, payloads))
            ours.append(_spent(_jobs, server, payloads))
    processor, clock = _compare(sides, lambda nothing, job: nothing / job)
    at_least(
        f"small jobs a second, {DOFS} unknowns, {WORKERS} workers / rq no-op jobs; {clock:.2f} "
        f"times on the clock ({_on_the_clock(sides)} for {BURST})",
        processor,
        THROUGHPUT_GOAL,
        room=THROUGHPUT_ROOM,
    )


def _warm_up(server: Fishplate, queue: rq.Queue) -> None:
    """Every worker has begun."""
    _jobs(server, [document()] * WORKERS)
    _noops(queue, [document()] * WORKERS)
    _in_process(document())


def test_jobs_of_one_model_against_one_job_with_all_their_cases(tmp_path: Path) -> None:
    """All queued together, as a script queues them."""
    with fishplate(tmp_path) as server:
        many, one = sides = [], []
        for number in range(-1, ROUNDS):  # the first round warms up
            whole = panel(cells_for(MANY_DOFS), cases=MANY)
            whole["plate"]["thickness"] = 10.0 + 0.01 * number  # a model of its own
            label = f"round-{number}"
            single = [
                json.dumps({**whole, "label": label, "load_cases": {name: loads}}).encode()
                for name, loads in whole["load_cases"].items()
            ]
            one.append(_spent(_jobs, server, [json.dumps(whole).encode()]))
            many.append(_spent(_batch, server, label, single))
        (found,) = server.ask("GET", f"/v1/batches/{label}")["envelopes"]
    assert found["jobs"] == MANY
    processor, clock = _compare([side[1:] for side in sides], lambda jobs, job: jobs / job)
    at_most(
        f"{MANY} jobs of one model, {WORKERS} workers / one job with {MANY} cases, Q8, "
        f"{MANY_DOFS} unknowns; {clock:.2f} times on the clock ({_on_the_clock(sides)})",
        processor,
        MANY_GOAL,
        room=MANY_ROOM,
    )


def _batch(server: Fishplate, label: str, payloads: list[bytes]) -> None:
    for payload in payloads:
        server.submit(payload)
    server.wait_for_batch(label)

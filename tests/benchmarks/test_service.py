"""The service under load: answers while the workers are saturated, lists of many jobs.

Ratios within the same run decide; the absolute figures beside them are for reading.
"""

import json
import os
import statistics
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from flask.testing import FlaskClient

from api.app import create_app
from api.services import KEY
from tests.chaos_clients import Watched
from tests.chaos_site import running_site
from tests.job_documents import strip
from tests.measuring import at_most
from tests.service_pool import PATIENCE, eventually
from workers.settings import Settings
from workers.store import Store

pytestmark = pytest.mark.benchmark

# --- answers while the workers are saturated -----------------------------------------------------

CLIENTS, JOBS_EACH = 8, 3
ANSWER_GROWTH_GOAL = 30.0  # times the wait of a single request while the workers are idle


def document(force: float, divisions: tuple[int, int]) -> bytes:
    found = strip(force=force)
    found["geometry"]["patches"][0]["divisions"] = divisions
    return json.dumps(found).encode()


def test_jobs_are_accepted_at_once_while_all_workers_are_busy(tmp_path: Path) -> None:
    """24 jobs of 8 clients: all are answered before a worker is free for the first of them."""
    settings = Settings(
        store=tmp_path / "disk" / "store",
        workers=len(os.sched_getaffinity(0)),
        pictures=0,
        shutdown_grace=1.0,
        log_level="warning",
    )
    with running_site(tmp_path, settings, "limit") as site:
        watched, store = Watched(site.address), Store(settings.store)
        eventually(lambda: ready(watched), patience=4 * PATIENCE)

        def submit(body: bytes) -> float:
            began = time.monotonic()
            status, answer, _ = watched.ask(
                "POST", "/v1/jobs", body, Content_Type="application/json"
            )
            assert status == 202, answer
            return time.monotonic() - began

        small = (12, 5)
        idle = []
        for n in range(5):
            idle.append(submit(document(1000.0 + n, small)))
            eventually(lambda: not store.unfinished())
        for n in range(settings.workers):
            submit(document(2000.0 + n, (500, 200)))  # 600 000 unknowns: half a minute
        running = store.indexes.of_state("running")
        eventually(lambda: running.count() == settings.workers)

        waits: list[float] = []
        clients = [
            threading.Thread(
                target=lambda first=first: waits.extend(
                    submit(document(first + n, small)) for n in range(JOBS_EACH)
                )
            )
            for first in range(3000, 3000 + 10 * CLIENTS, 10)
        ]
        for client in clients:
            client.start()
        for client in clients:
            client.join()
        assert watched.wrong == []
        assert len(waits) == CLIENTS * JOBS_EACH
        # Nobody has been at any of the 24: the workers still have the large ones.
        assert running.count() == settings.workers
        assert len(store.unfinished()) == len(waits) + settings.workers
    usual = statistics.median(idle)
    print(
        f"\n{len(waits)} jobs of {CLIENTS} clients, {settings.workers} workers saturated: the "
        f"slowest 202 after {max(waits):.3f} s, the median after {statistics.median(waits):.3f} s "
        f"(goal: 1 s); alone, workers idle, after {usual:.3f} s"
    )
    at_most("slowest 202, workers saturated / idle", max(waits) / usual, ANSWER_GROWTH_GOAL)


def ready(watched: Watched) -> bool:
    try:
        return watched.ask("GET", "/health/ready")[0] == 200
    except OSError:
        return False


# --- lists of many jobs --------------------------------------------------------------------------

MANY, FEW = 10_000, 100
PAGE_GROWTH_GOAL = 10.0  # times a page of the list of few; the jobs are a hundred times as many


@pytest.fixture
def jobs_page(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> Iterator[Callable[[int], FlaskClient]]:
    """A client of a store with so many jobs, all of one day: the worst case for a list."""
    apps = []

    def make(count: int) -> FlaskClient:
        store = Store(tmp_path / f"{count}")
        with monkeypatch.context() as patch:
            patch.setattr(os, "fsync", lambda _: None)  # the disk is not what is measured
            for number in range(count):
                label = ("rare" if number % 100 == 0 else "often") if number % 2 == 0 else None
                job_id = store.accept(b"{}", title=f"Tie {number}", label=label).record.id
                if number % 3 == 0:
                    store.transition(job_id, "cancelled")
        app = create_app(Settings(store=store.root, redis_url=f"unix://{tmp_path}/nothing.sock"))
        apps.append(app)
        return app.test_client()

    yield make
    for app in apps:
        app.extensions[KEY].queue.connection.close()


QUERIES = {
    "all": "limit=50",
    "by label": "limit=50&label=often",
    "by rare label": "limit=50&label=rare",
    "by state": "limit=50&state=queued",
    "by label and state": "limit=50&label=often&state=cancelled",
}


def test_a_page_of_many_jobs_takes_little_longer_than_one_of_few(
    jobs_page: Callable[[int], FlaskClient],
) -> None:
    """First and last full page, of all jobs and filtered."""
    many = jobs_page(MANY)
    usual = timed(jobs_page(FEW), "/v1/jobs?limit=50")
    for name, query in QUERIES.items():
        pages = pages_of(many, query)
        for where, page in (("first", pages[0]), ("last", pages[-2] if pages[1:] else pages[0])):
            took = timed(many, page)
            what = f"{where} page of {MANY} jobs, {name} ({1000 * took:.1f} ms, goal 50) / of {FEW}"
            at_most(what, took / usual, PAGE_GROWTH_GOAL)  # as many records on the page


def pages_of(client: FlaskClient, query: str) -> list[str]:
    pages = [f"/v1/jobs?{query}"]
    while following := client.get(pages[-1]).get_json()["next"]:
        pages.append(following)
    return pages


def timed(client: FlaskClient, path: str) -> float:
    """Median of several requests [s]."""
    took = []
    for _ in range(9):
        began = time.perf_counter()
        assert client.get(path).status_code == 200
        took.append(time.perf_counter() - began)
    return statistics.median(took)


# --- growth --------------------------------------------------------------------------------------

POSTS = 50
POST_GROWTH_GOAL = 2.0  # times the processor time of accepting a job into an empty store


def test_accepting_a_job_takes_no_longer_when_many_wait(
    jobs_page: Callable[[int], FlaskClient],
) -> None:
    """5000 jobs in line, as many as a workspace may have, against none: nothing is quadratic."""
    clients = {"empty": jobs_page(0), "full": jobs_page(7_000)}  # a third of them is cancelled
    seconds = {}
    for name, client in clients.items():
        began = time.process_time()
        for number in range(POSTS):
            answer = client.post("/v1/jobs", json=strip(force=1000.0 + number))
            assert answer.status_code == 202
        seconds[name] = time.process_time() - began
    took = seconds["full"] / seconds["empty"]
    each = 1000 * seconds["full"] / POSTS
    at_most(f"accepting a job while 4700 wait ({each:.1f} ms) / none", took, POST_GROWTH_GOAL)

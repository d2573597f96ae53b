"""Clients that submit through whatever happens to the server, and readers that watch over it.

The plates are strips under tension: the stress is force / area, and every job has its own force.
"""

import http.client
import io
import json
import random
import threading
import time
from collections.abc import Callable
from typing import Any
from urllib.parse import urlencode
from zipfile import ZipFile

import pytest

from tests.job_documents import strip

# Q8 represents the strip exactly, so that only rounding is left.
EXACT = 1e-9
HEIGHT = 40.0  # of every strip [mm]
FINAL = ("finished", "failed", "cancelled")
TIMEOUT = 60.0  # of a request [s]
AGAIN = 0.2  # share of the jobs that are sent again although they were answered
TROUBLE = (OSError, http.client.HTTPException)  # the server was killed meanwhile


def force_of(number: int) -> float:
    return 1000.0 + 100.0 * number


def thickness_of(number: int) -> float:
    """Every fourth job has a plate of its own; the others share their model."""
    return 8.0 if number % 4 else 9.0 + number / 100


def document_of(number: int) -> dict[str, Any]:
    document = strip(height=HEIGHT, thickness=thickness_of(number), force=force_of(number))
    document["title"] = f"Tie {number}"
    if number % 2:
        document["label"] = "slipway"
    return document


def check_results(results: dict[str, Any], number: int) -> None:
    """Stress = force / area, reaction = -force; and it is this job's answer, whole."""
    state = results["cases"]["pull"]
    stress = force_of(number) / (HEIGHT * thickness_of(number))
    assert results["job"]["title"] == f"Tie {number}"
    assert state["von_mises"]["value"] == pytest.approx(stress, rel=EXACT)
    assert state["reactions"]["left"]["force"][0] == pytest.approx(-force_of(number), rel=EXACT)
    assert results["cautions"]


class Watched:
    """What all clients and readers know together."""

    def __init__(self, address: tuple[str, int]) -> None:
        self.address = address
        self.over = threading.Event()
        self.ids: dict[int, str] = {}  # of the answered jobs, by number
        self.wrong: list[str] = []  # what must not have happened
        self.reads = self.pages = self.repeats = self.refused = 0

    def ask(
        self, method: str, path: str, body: bytes | None = None, **headers: str
    ) -> tuple[int, bytes, Any]:
        """Status, body and headers of an answer.

        Raises
        ------
        one of TROUBLE   there was none, or not the whole of it.
        """
        connection = http.client.HTTPConnection(*self.address, timeout=TIMEOUT)
        try:
            sent = {name.replace("_", "-"): value for name, value in headers.items()}
            connection.request(method, path, body, sent)
            answer = connection.getresponse()
            found = answer.read()
        finally:
            connection.close()
        if answer.status >= 500 and answer.status != 503:
            self.wrong.append(f"{method} {path}: {answer.status} {found[:300]!r}")
        return answer.status, found, answer.headers

    def threads(self, what: Callable[..., None], orders: list[Any]) -> list[threading.Thread]:
        """One started thread for each order; what it raises is wrong."""

        def guarded(order: Any) -> None:
            try:
                what(self, order)
            except Exception as error:  # noqa: BLE001  told by the test
                self.wrong.append(f"{what.__name__} {order}: {error!r}")

        threads = [threading.Thread(target=guarded, args=(o,), daemon=True) for o in orders]
        for thread in threads:
            thread.start()
        return threads


# --- clients -----------------------------------------------------------------------------------


def submit_all(watched: Watched, order: tuple[list[int], random.Random, float]) -> None:
    """Submit the jobs of one client, each until it is answered; some again, later."""
    numbers, chance, pause = order
    for number in numbers:
        _submit(watched, number, chance)
        while chance.random() < AGAIN:
            _submit(watched, chance.choice([n for n in numbers if n in watched.ids]), chance)
            watched.repeats += 1
        time.sleep(chance.uniform(0.0, 2 * pause))


def _submit(watched: Watched, number: int, chance: random.Random) -> None:
    """Send a job with its key until it is answered; never may there be a second one."""
    body = json.dumps(document_of(number)).encode()
    query = {"priority": "interactive"} if number % 3 == 0 else {}
    path = f"/v1/jobs?{urlencode(query)}"
    headers = {"Content_Type": "application/json", "Idempotency_Key": f"tie {number}"}
    while not watched.over.is_set():
        try:
            status, found, _ = watched.ask("POST", path, body, **headers)
        except TROUBLE:
            time.sleep(chance.uniform(0.05, 0.3))
            continue
        if status not in (200, 202):
            watched.refused += 1
            assert status == 503, (status, found)
            time.sleep(chance.uniform(0.05, 0.3))
            continue
        job_id = json.loads(found)["id"]
        earlier = watched.ids.setdefault(number, job_id)
        assert job_id == earlier, f"job {number} is {earlier} and {job_id}"
        return


# --- readers -----------------------------------------------------------------------------------


def read_on(watched: Watched, chance: random.Random) -> None:
    """Look at jobs, files and lists; whatever is served must be whole and right."""
    ended: dict[str, str] = {}
    while not watched.over.is_set():
        time.sleep(0.1)
        known = list(watched.ids.items())
        if not known:
            continue
        number, job_id = chance.choice(known)
        try:
            if chance.random() < 0.05:
                walk_pages(watched, {i for _, i in known})
                continue
            state = _state_of(watched, job_id)
            assert ended.setdefault(job_id, state) == state or ended[job_id] not in FINAL, job_id
            ended[job_id] = state
            if state == "finished":
                _read_file(watched, number, job_id, chance)
            elif chance.random() < 0.2:
                status, _, _ = watched.ask("GET", f"/v1/jobs/{job_id}/results")
                assert status != 200 or _state_of(watched, job_id) == "finished"
            watched.reads += 1
        except TROUBLE:
            continue


def walk_pages(watched: Watched, expected: set[str]) -> set[str]:
    """Ids on all pages of the list; those expected must be among them, none may come twice."""
    found: list[str] = []
    path = "/v1/jobs?limit=100"
    while path:
        status, body, _ = watched.ask("GET", path)
        assert status == 200, body
        page = json.loads(body)
        found += [job["id"] for job in page["jobs"]]
        path = page["next"]
    assert len(set(found)) == len(found)
    assert expected <= set(found)
    watched.pages += 1
    return set(found)


def _state_of(watched: Watched, job_id: str) -> str:
    status, body, _ = watched.ask("GET", f"/v1/jobs/{job_id}")
    assert status == 200, body
    state: str = json.loads(body)["state"]
    return state


def _read_file(watched: Watched, number: int, job_id: str, chance: random.Random) -> None:
    kind = chance.choice(["results", "results", "fields/pull.vtu", "tables/peaks.csv", "sheet",
                          "archive.zip"])  # fmt: skip
    status, body, headers = watched.ask("GET", f"/v1/jobs/{job_id}/{kind}")
    assert status == 200, (kind, status, body[:300])
    if kind == "results":
        check_results(json.loads(body), number)
        return
    assert 'rel="describedby"' in headers["Link"]
    if kind == "fields/pull.vtu":
        assert body.rstrip().endswith(b"</VTKFile>")
    elif kind == "sheet":
        assert body.rstrip().endswith(b"</html>")
        assert f"Tie {number}".encode() in body
    elif kind == "archive.zip":
        with ZipFile(io.BytesIO(body)) as archive:
            assert archive.testzip() is None
            check_results(json.loads(archive.read("results.json")), number)

"""Damaged job documents, sent to the real server: the answers stay right, and its memory small."""

from collections import Counter
from contextlib import closing
from http.client import HTTPConnection
from pathlib import Path
from random import Random
from typing import Any, NamedTuple
from urllib.parse import urlsplit

import orjson
import psutil
import pytest
from hypothesis import HealthCheck, Phase, given, seed, settings
from hypothesis import strategies as st

import api
from tests.good_documents import KINDS, good
from tests.hostile.amount import count
from tests.hostile.conftest import Site
from tests.hostile.damage import damaged, packed
from tests.hostile.odd_jobs import odd_job
from tests.hostile.promises import Described, keeps
from tests.job_strategies import JOBS
from workers.document.read import to_document
from workers.job import Job

pytestmark = pytest.mark.server

DOCUMENTS = count(700)
DRAWN = 100  # of them from the strategies of all jobs, which take long to make
WARM = 0.4  # of the requests
GROWTH = 1.1  # of the memory of the server afterwards; what never is given back would be far more
HANG = 60  # for an answer that takes milliseconds [s]
HERE = Path(api.__file__).parent.parent


class Answer(NamedTuple):
    status: int
    headers: dict[str, str]
    body: bytes


class Sender:
    """Sends documents and judges the answers."""

    def __init__(self, site: Site) -> None:
        self.site = site
        self.described = Described(orjson.loads(self._ask("GET", "/openapi.json", b"", {}).body))
        self.seen: Counter[int] = Counter()

    def send(self, rng: Random, document: Any) -> None:
        data, headers = packed(rng, damaged(rng, document))
        answer = self._ask("POST", "/v1/jobs", data, headers)
        self.seen[answer.status] += 1
        keeps(answer.status, answer.headers, answer.body, (self.site.store, HERE))
        media = answer.headers["Content-Type"].partition(";")[0]
        self.described.judge("POST", "/v1/jobs", answer.status, media, answer.body)

    def memory(self) -> int:
        """Of all processes of the server [bytes]."""
        server = psutil.Process(self.site.pid)
        return sum(p.memory_info().rss for p in server.children(recursive=True))

    def _ask(self, method: str, path: str, data: bytes, headers: dict[str, str]) -> Answer:
        # A new one each time: the server closes those that are idle for two seconds.
        with closing(HTTPConnection(urlsplit(self.site.url).netloc, timeout=HANG)) as connection:
            connection.request(method, path, data, headers)
            answer = connection.getresponse()
            return Answer(answer.status, dict(answer.headers), answer.read())


def test_damaged_documents_are_answered_as_declared_in_bounded_memory(site: Site) -> None:
    sender = Sender(site)
    few = settings(
        max_examples=DRAWN, database=None, phases=[Phase.generate],
        suppress_health_check=list(HealthCheck),
    )  # fmt: skip

    @seed(1)
    @few
    @given(JOBS, st.randoms(use_true_random=False))
    def of_any_kind(job: Job, rng: Random) -> None:
        sender.send(rng, to_document(job))

    of_any_kind()
    rng = Random(1)
    warm = 0
    for number in range(DOCUMENTS - DRAWN):
        if number == int(WARM * DOCUMENTS):
            warm = sender.memory()
        kind = rng.choice((*KINDS, "odd", "odd"))
        sender.send(rng, odd_job(rng) if kind == "odd" else good(kind))
    growth = sender.memory() / warm
    print(f"documents: {sender.seen.total()} sent, {dict(sorted(sender.seen.items()))}, memory "
          f"{warm / 1e6:.0f} MB when warm, {growth:.3f} of it at the end")  # fmt: skip
    assert sender.seen.total() >= DOCUMENTS
    assert {202, 413, 415, 422} <= sender.seen.keys()
    assert growth <= GROWTH

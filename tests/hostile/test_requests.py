"""Requests that schemathesis makes of the OpenAPI document: right ones, and wrong ones.

Source of the requests and of the judgement: schemathesis, an outside tool. Half of the addresses
get the ids and names of things that are there, so that not every request ends with a 404.
"""

import re
from collections import Counter
from collections.abc import Iterator
from pathlib import Path
from random import Random
from typing import Any

import pytest
import schemathesis
from flask import Flask
from hypothesis import HealthCheck, Phase, given, reject, seed, settings
from hypothesis import strategies as st
from schemathesis import GenerationMode
from schemathesis.core.errors import InvalidSchema
from schemathesis.specs.openapi.checks import (
    content_type_conformance,
    response_headers_conformance,
    response_schema_conformance,
    status_code_conformance,
)

import api
from api.services import KEY
from tests.hostile.amount import count
from tests.hostile.conftest import Site
from tests.hostile.promises import PART, keeps
from tests.hostile.site import MADE, NAMES, Names, checked, fill, ready_app
from workers.record import FINISHED
from workers.store import Store

CHECKS = [
    status_code_conformance,
    content_type_conformance,
    response_headers_conformance,
    response_schema_conformance,
]
REQUESTS, BY_HTTP = count(500), count(80)
SEED = 1
PATIENCE = 60  # for an answer that takes milliseconds [s]
# Not for a server without workers: it would wait for them.
ASKS_WORKERS = re.compile(r"/v1/(checks|batches/.*/envelope)")
HERE = Path(api.__file__).parent.parent
KNOWN = 0.6  # of the addresses
REPEATS = 14  # requests of one operation, one after the other
BODIES = 5  # of those with a document, which takes long to make
HEADERS = {
    "Accept": ["text/html", "application/xml", "*/*;q=0"],
    "Accept-Encoding": ["gzip;q=0, br", "identity;q=0", "x" * 300],
    "Range": ["bytes=0-3", "bytes=-1", "bytes=9-1", "bytes=0-1,5-", "bytes=99999999999999999999-"],
    "If-None-Match": ["*", '"x"', "W/"],
    "If-Range": ['"x"', "Tue, 01 Jan 2030 00:00:00 GMT"],
    "If-Modified-Since": ["yesterday", "Tue, 01 Jan 2030 00:00:00 GMT"],
    "Prefer": ["wait=0", 'wait="1', "wait=-1, wait=99999999999999"],
    "Cookie": ["a=b"],
    "X-Request-Id": ["a" * 64, "a" * 65, "<b>"],
}


@pytest.fixture(scope="module")
def app(redis_url: str, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Flask]:
    with (
        pytest.MonkeyPatch.context() as patch,
        ready_app(tmp_path_factory.mktemp("store"), redis_url, patch) as found,
    ):
        yield found


class Maker:
    """Turns some of the made-up ids and names into those of things that are there."""

    def __init__(self, store: Store, names: Names = NAMES, encoding: str = "identity") -> None:
        self.store, self.names, self.encoding = store, names, encoding
        self.random = Random(1)
        self.ids: dict[str, str] = {}
        self.check = checked(store.root)

    def adapt(self, case: Any) -> None:
        # The test client does not unpack; packed answers are for the real server.
        case.headers.setdefault("Accept-Encoding", self.encoding)
        given = case.path_parameters or {}
        for name in given:
            if self.random.random() < KNOWN:
                given[name] = self._known(name, case.method)
        for name, values in HEADERS.items():
            if self.random.random() < 0.15:
                case.headers[name] = self.random.choice(values)

    def _known(self, name: str, method: str) -> str:
        if name == "check_id":
            return self.check
        if name == "job_id":
            if method == "DELETE" or not self.ids:
                self.ids = fill(self.store)  # some of the last ones may be gone
            return self.random.choice([*self.ids.values(), *[self.ids[FINISHED]] * 3])
        return self.random.choice(self.names[name])


@st.composite
def cases(draw: st.DrawFn, operation: Any, mode: GenerationMode) -> Any:
    """Requests of one operation, without those that the tool itself fails to make."""
    try:
        return draw(operation.as_strategy(generation_mode=mode))
    except InvalidSchema:
        reject()


def bombard(
    schema: Any,
    maker: Maker,
    amount: int,
    repeats: int = REPEATS,
    without: re.Pattern[str] | None = None,
    **options: Any,
) -> Counter[str]:
    """Send so many requests at least; how often each status was seen."""
    seen: Counter[str] = Counter()
    operations = [
        operation
        for operation in (found.ok() for found in schema.get_all_operations())
        if without is None or not without.match(operation.path)
    ]
    number = SEED
    while seen.total() < amount:
        for operation in operations:
            if seen.total() >= amount and number > SEED:
                break
            for mode in GenerationMode:
                # Nothing can be wrong with a path alone: every text may stand in it.
                if mode.is_positive or operation.body or operation.query:
                    most = min(BODIES, repeats) if operation.body else repeats
                    ask_for(cases(operation, mode), most, number, maker, options, seen)
        number += 1
    return seen


def ask_for(
    requests: st.SearchStrategy[Any],
    most: int,
    number: int,
    maker: Maker,
    options: Any,
    seen: Counter[str],
) -> None:
    """Some requests of one kind."""

    @seed(number)
    @settings(
        max_examples=most,
        database=None,
        phases=[Phase.generate],
        suppress_health_check=list(HealthCheck),
    )
    @given(requests)
    def ask(case: Any) -> None:
        maker.adapt(case)
        answer = case.call(**options)
        seen[str(answer.status_code)] += 1
        headers = {name: values[0] for name, values in answer.headers.items()}
        keeps(answer.status_code, headers, answer.content, (maker.store.root, HERE))
        if answer.status_code != PART:  # the tool would read it as a whole
            case.validate_response(answer, checks=CHECKS)

    ask()


# The tool does not close the answers of a test client.
@pytest.mark.filterwarnings("ignore::pytest.PytestUnraisableExceptionWarning")
@pytest.mark.slow
def test_every_operation_answers_as_declared(app: Flask) -> None:
    schema = schemathesis.openapi.from_wsgi("/openapi.json", app)
    seen = bombard(schema, Maker(app.extensions[KEY].store), REQUESTS)
    print(f"schemathesis in process: {seen.total()} requests, {dict(sorted(seen.items()))}")
    assert seen.total() >= REQUESTS
    assert {"200", "202", "206", "304", "400", "404", "409", "416", "422"} <= seen.keys()


@pytest.mark.server
def test_the_real_server_answers_as_declared(site: Site) -> None:
    """Behind gunicorn, whose own refusals count as well."""
    schema = schemathesis.openapi.from_url(f"{site.url}/openapi.json")
    maker = Maker(Store(site.store), MADE, "gzip")
    seen = bombard(schema, maker, BY_HTTP, repeats=3, without=ASKS_WORKERS, timeout=PATIENCE)
    print(f"schemathesis by HTTP: {seen.total()} requests, {dict(sorted(seen.items()))}")
    assert seen.total() >= BY_HTTP

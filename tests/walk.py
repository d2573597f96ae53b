"""Visits every address of the application with its methods, jobs in every state and faults too.

The addresses come from the application's own URL map, so a new route is visited without being
named here; one that cannot be reached with the values below makes `visit_all` fail.
"""

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from itertools import product
from typing import Any

import orjson
from flask import Flask
from werkzeug.routing import Rule
from werkzeug.test import TestResponse

from api.services import KEY, Services
from tests.job_documents import strip
from tests.small_check import answer_check
from workers.batch import read_batch
from workers.checks import Checks
from workers.errors import Fault
from workers.queue import Answer
from workers.record import CANCELLED, FAILED, RUNNING

# Values for the variable parts of addresses, good and bad ones.
VALUES: dict[str, tuple[str, ...]] = {
    "case": ("pull", "pull, factored", "no such case"),
    "line": ("axis", "no such line"),
    "measure": ("von_mises", "shear_max", "colour"),
    "quantity": ("model", "von_mises", "colour"),
    "name": ("peaks", "lines", "no such table"),
}
# What a method needs to succeed where its address alone is not enough.
REQUESTS: dict[tuple[str, str], list[dict[str, Any]]] = {
    ("POST", "/v1/jobs"): [
        {"json": strip()},
        {"json": strip(), "query_string": {"priority": "interactive"}},
        {"json": strip(), "query_string": {"priority": "highest"}},
        {"json": strip(), "headers": {"Idempotency-Key": "a"}},
        {"json": strip(), "headers": {"Idempotency-Key": "a"}},
        {"json": strip(length=50.0), "headers": {"Idempotency-Key": "a"}},
        {"json": strip(), "headers": {"Idempotency-Key": "x" * 1000}},
        {"json": {}},
        {"data": b"{"},
        {"data": b"{}", "content_type": "text/plain"},
        {"data": b" " * 200_000, "content_type": "application/json"},
    ],
    ("POST", "/v1/checks"): [
        {"json": strip()},
        {"json": strip(length=60.0)},
        {"json": strip(length=70.0)},
        {"json": {}},
        {"data": b"{}", "content_type": "text/plain"},
        {"data": b" " * 200_000, "content_type": "application/json"},
    ],
    ("GET", "/jobs"): [
        {},
        {"query_string": {"limit": 1, "state": "", "label": "", "hold": "true"}},
        {"query_string": {"state": "lost", "colour": "red"}},
    ],
    ("GET", "/v1/jobs"): [
        {},
        {"query_string": {"limit": 1}},
        {"query_string": {"limit": 0, "state": "lost", "colour": "red"}},
    ],
}
ANSWERS = {  # of the workers, when a file must be made; by quantity, None for a field
    "von_mises": Answer("failed", reason="no libEGL", error="PicturesUnavailableError"),
    "model": Answer("pending"),
    None: Answer("failed", reason="the worker process ended before it had an answer"),
}
# Of the workers, to checks of strips of other lengths than the usual one, which they answer.
CHECKED = {
    60.0: Answer("done", value={"ok": False, "error": "MeshError", "reason": "held too little",
                                "faults": [{"pointer": "/supports", "message": "it can turn"}]}),
    70.0: Answer("done", value={"ok": False, "error": "MemoryError", "reason": "too large"}),
}  # fmt: skip
AUTOMATIC = {"HEAD", "OPTIONS"}  # answered by the framework, and without a body
Finish = Callable[[str], None]


@dataclass(frozen=True)
class Visit:
    rule: Rule
    method: str
    answer: TestResponse


def visit_all(
    app: Flask, finish: Finish, monkeypatch: Any, bearers: Sequence[str | None] = (None,)
) -> list[Visit]:
    """One visit for every combination; the application must accept 100 kB bodies at most.

    bearers : tokens that each visit is made with, one after the other; None is no token.
    """
    services: Services = app.extensions[KEY]

    def make_artefact(job_id: str, kind: str, case: str, quantity: str | None = None,
                      *, wait: float) -> Answer:  # fmt: skip
        return ANSWERS[quantity]

    def ask(function: str, *arguments: str, wait: float) -> Answer:
        check_id = arguments[0]
        document = orjson.loads(Checks(services.settings.store).document(check_id))
        length = document["geometry"]["patches"][0]["corners"][1][0]
        if length not in CHECKED:
            answer_check(services.settings.store, *arguments)
        return CHECKED.get(length, Answer("done", value={"ok": True}))

    def make_batch_file(label: str, workspace: str | None, digest: str, kind: str,
                        *, wait: float) -> Answer:  # fmt: skip
        if kind == "shear_max":
            return Answer("failed", reason="no libEGL", error="PicturesUnavailableError")
        if label == "broken":
            return Answer("failed", reason="the worker process ended before it had an answer")
        path = read_batch(services.store, label, workspace).file(services.store.root, kind)
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(kind.encode())
        return Answer("done", value={"ok": True})

    monkeypatch.setattr(services.queue, "make_artefact", make_artefact)
    monkeypatch.setattr(services.queue, "make_batch_file", make_batch_file)
    monkeypatch.setattr(services.queue, "ask", ask)
    monkeypatch.setattr(services.queue, "workers_alive", lambda: 1)
    visits = []
    for rule in app.url_map.iter_rules():
        for method in sorted((rule.methods or set()) - AUTOMATIC):
            for address in addresses(app, rule, finish):
                for request, bearer in product(REQUESTS.get((method, rule.rule), [{}]), bearers):
                    sent = with_token(request, bearer)
                    answer = app.test_client().open(address, method=method, buffered=True, **sent)
                    visits.append(Visit(rule, method, answer))
    return visits


def with_token(request: dict[str, Any], bearer: str | None) -> dict[str, Any]:
    if bearer is None:
        return request
    headers = {"Authorization": f"Bearer {bearer}", **request.get("headers", {})}
    return {**request, "headers": headers}


def addresses(app: Flask, rule: Rule, finish: Finish) -> Iterator[str]:
    """The address of a rule with all combinations of values, and fresh jobs in all states."""
    partial: list[dict[str, str]] = [{}]
    for name in sorted(rule.arguments):
        made = {
            "job_id": lambda: jobs(app, finish),
            "check_id": lambda: checks(app),
            "label": lambda: labels(app, finish),
        }
        values = made[name]() if name in made else VALUES[name]
        partial = [{**given, name: value} for given in partial for value in values]
    for values in partial:
        yield app.url_map.bind("localhost").build(rule.endpoint, values)


def jobs(app: Flask, finish: Finish) -> tuple[str, ...]:
    """Ids of new jobs in every state, and one that belongs to no job."""
    services: Services = app.extensions[KEY]
    queued, running, finished, failed, cancelled = (
        services.store.accept(b"{}", title=str(n)).record.id for n in range(5)
    )
    services.store.transition(running, RUNNING)
    services.queue.set_progress(running, "solving", 0.5)
    finish(finished)
    services.store.transition(failed, RUNNING)
    services.store.transition(failed, FAILED, reason="why", faults=(Fault("/plate", "thin"),))
    services.store.transition(cancelled, CANCELLED)
    pinned = services.store.accept(b"{}", title="pinned").record.id
    services.store.transition(pinned, CANCELLED)
    services.store.pin(pinned, True)
    return (queued, running, finished, failed, cancelled, pinned, "unknown")


def labels(app: Flask, finish: Finish) -> tuple[str, ...]:
    """Of a batch with a joint envelope, one whose cannot be made, one without, and no batch."""
    store = app.extensions[KEY].store
    for label in ("ropes 2031/04", "broken"):
        finish(store.accept(b"{}", label=label, title=label).record.id)
    store.accept(b"{}", label="waiting", title="waiting")
    return ("ropes 2031/04", "broken", "waiting", "no such label")


def checks(app: Flask) -> tuple[str, ...]:
    """Ids of checks: of one that is answered, one that is not, and one that is not there."""
    store = app.extensions[KEY].settings.store
    answered, waiting = (
        Checks(store).file(orjson.dumps(strip(length=length))) for length in (100.0, 60.0)
    )
    answer_check(store, answered)
    return (answered, waiting, "0" * 32)

"""A store with jobs in every state, and an application on it whose workers answer at once."""

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import orjson
from flask import Flask

from api.app import create_app
from api.services import KEY, Services
from tests.job_documents import strip
from tests.small_check import answer_check
from tests.small_results import RESULTS
from workers.checks import Checks
from workers.queue import Answer
from workers.record import CANCELLED, FAILED, FINISHED, QUEUED, RUNNING
from workers.settings import Settings
from workers.store import Store

BATCH = "berth 4"
THREADS = 8  # of each process of the server
PATIENCE = 3.0  # of the server with slow clients [s]
FILES = ("fields/pull.vtu", "previews/pull/model.png", "lines/axis.png", "envelope/fields.vtu",
         "envelope/nodes.csv", "envelope/von_mises.png", "sheet.html",
         "convergence.png")  # fmt: skip
Names = Mapping[str, Sequence[str]]
# Names of which there is something, by the variable parts of addresses.
NAMES: Names = {
    "case": ("pull", "pull, factored"),
    "line": ("axis",),
    "measure": ("von_mises", "displacement"),
    "quantity": ("model", "von_mises"),
    "name": ("peaks", "lines", "cuts"),
    "label": (BATCH,),
}
# Those of the files that need no worker.
MADE: Names = {**NAMES, "case": ("pull",), "measure": ("von_mises",), "quantity": ("model",)}
LATE = Answer("pending")  # of workers that are busy with something else


def settings_of(folder: Path, redis_url: str, **changes: Any) -> Settings:
    """For small documents and short waits, with as many jobs as a fuzzer may send."""
    return Settings(
        store=folder, redis_url=redis_url, body_bytes=100_000, longest_wait=1,
        queue_length=10**6, most_nodes=20_000, pictures=0,
        api_threads=THREADS, client_patience=PATIENCE, port=0, log_level="warning", **changes,
    )  # fmt: skip


def fill(store: Store) -> dict[str, str]:
    """Jobs in every state; their ids by state."""
    document = orjson.dumps(strip())
    states = (QUEUED, RUNNING, FINISHED, FAILED, CANCELLED)
    ids = {s: store.accept(document, title=s, label=BATCH).record.id for s in states}
    store.transition(ids[RUNNING], RUNNING)
    publish(store, ids[FINISHED])
    store.transition(ids[FAILED], RUNNING)
    store.transition(ids[FAILED], FAILED, reason="it was told to")
    store.transition(ids[CANCELLED], CANCELLED)
    return ids


def publish(store: Store, job_id: str) -> None:
    """Do to a queued job what a worker does, with small results."""
    store.transition(job_id, RUNNING)
    with store.working(job_id) as staging:
        assert staging is not None
        (staging / "results.json").write_bytes(orjson.dumps(RESULTS))
        for name in FILES:
            (staging / name).parent.mkdir(parents=True, exist_ok=True)
            (staging / name).write_bytes(name.encode())
        store.publish(job_id, staging, RESULTS["cautions"])


@contextmanager
def ready_app(folder: Path, redis_url: str, patch: Any) -> Iterator[Flask]:
    """The application; what only a worker can do is answered late, and checks are answered.

    patch : pytest's MonkeyPatch
    """
    app = create_app(settings_of(folder, redis_url))
    services: Services = app.extensions[KEY]

    def ask(function: str, check_id: str, *_: str, wait: float) -> Answer:
        if function.endswith("run_check"):
            answer_check(services.settings.store, check_id)
            return Answer("done", value={"ok": True})
        return LATE

    patch.setattr(services.queue, "make_artefact", lambda *_, **__: LATE)
    patch.setattr(services.queue, "ask", ask)
    patch.setattr(services.queue, "workers_alive", lambda: 1)
    try:
        yield app
    finally:
        services.queue.connection.flushall()
        services.queue.connection.close()


def checked(store: Path) -> str:
    """Id of a check that is answered."""
    check_id = Checks(store).file(orjson.dumps(strip()))
    answer_check(store, check_id)
    return check_id

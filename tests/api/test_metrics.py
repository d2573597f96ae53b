"""Measures, read back by the parser that Prometheus' own client library has."""

import json
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from flask.testing import FlaskClient
from prometheus_client.parser import text_string_to_metric_families

from api.app import create_app
from api.services import KEY, Services
from tests.job_documents import strip
from workers.backup import back_up
from workers.housekeeping import USAGE
from workers.record import FAILED, RUNNING, TIME
from workers.settings import Settings

Samples = dict[tuple[str, frozenset[tuple[str, str]]], float]


def read(client: FlaskClient, **headers: str) -> Samples:
    answer = client.get("/metrics", headers=headers)
    assert answer.status_code == 200
    assert answer.mimetype == "text/plain"
    return {
        (sample.name, frozenset(sample.labels.items())): sample.value
        for family in text_string_to_metric_families(answer.text)
        for sample in family.samples
    }


def value(samples: Samples, name: str, **labels: str) -> float:
    return samples[f"fishplate_{name}", frozenset(labels.items())]


def test_lines_states_and_the_oldest_are_measured(client: FlaskClient, services: Services) -> None:
    began = time.monotonic()
    for document in (strip(), {**strip(), "label": "week"}, {**strip(), "label": "week"}):
        client.post("/v1/jobs", json=document)
    samples = read(client)
    assert value(samples, "queue_depth", line="interactive") == 1
    assert value(samples, "queue_depth", line="bulk") == 2
    assert value(samples, "queue_depth", line="questions") == 0
    assert value(samples, "jobs", state="queued") == 3
    # However long this took: no younger than nothing, no older than the test (clocks to 1 s).
    elapsed = time.monotonic() - began
    assert 0.0 < value(samples, "oldest_waiting_seconds") < elapsed + 1.0
    assert value(samples, "workers_alive") == 0
    assert value(samples, "redis_up") == 1
    assert value(samples, "store_free_bytes") > 0


def test_the_age_of_the_last_whole_back_up_is_measured(
    client: FlaskClient, services: Services, post: Callable[..., Any], tmp_path: Path
) -> None:
    """One in which a job is missing does not count."""
    root = services.store.root
    job_id = post().get_json()["id"]
    assert ("fishplate_backup_age_seconds", frozenset()) not in read(client)
    path = services.store.jobs.path(job_id) / "record.json"
    record = path.read_bytes()
    path.write_bytes(b"{")
    back_up(root, tmp_path / "back-ups")
    assert ("fishplate_backup_age_seconds", frozenset()) not in read(client)
    path.write_bytes(record)
    began = time.monotonic()
    back_up(root, tmp_path / "back-ups")
    age = value(read(client), "backup_age_seconds")
    assert 0.0 <= age < time.monotonic() - began + 1.0


def test_ends_are_counted_by_cause_and_stages_by_duration(
    client: FlaskClient, services: Services, post: Callable[..., Any]
) -> None:
    job_id = post().get_json()["id"]
    services.store.transition(job_id, RUNNING)
    record = services.store.transition(job_id, FAILED, reason="slow", cause=TIME)
    services.queue.tallies.add_end(record, {"solving": 2.0})
    samples = read(client)
    assert value(samples, "jobs_ended_total", state="failed", cause="time") == 1
    assert value(samples, "jobs", state="failed") == 1
    assert value(samples, "oldest_waiting_seconds") == 0
    stage = {"stage": "solving"}
    counts = [value(samples, "stage_seconds_bucket", le=le, **stage) for le in ("1.0", "3.0")]
    assert counts == [0, 1]
    assert value(samples, "stage_seconds_bucket", le="+Inf", **stage) == 1
    assert value(samples, "stage_seconds_sum", **stage) == 2.0
    assert value(samples, "stage_seconds_count", **stage) == 1


def test_the_size_of_the_store_is_what_housekeeping_found(
    client: FlaskClient, services: Services
) -> None:
    assert ("fishplate_store_bytes", frozenset()) not in read(client)
    services.store.root.mkdir(parents=True, exist_ok=True)
    usage = {"at": "2031-04-05T06:07:08.000Z", "jobs": 1, "bytes": 4096}
    (services.store.root / USAGE).write_text(json.dumps(usage))
    assert value(read(client), "store_bytes") == 4096


def test_two_processes_measure_the_same(
    client: FlaskClient, settings: Settings, services: Services
) -> None:
    """Nothing is counted in the process that answers."""
    client.post("/v1/jobs", json=strip())
    services.queue.cancel(client.get("/v1/jobs").get_json()["jobs"][0]["id"])
    second = create_app(settings)
    changing = "fishplate_store_free_bytes"
    mine, other = (
        {k: v for k, v in read(c).items() if k[0] != changing}
        for c in (client, second.test_client())
    )
    assert mine == other
    assert value(mine, "jobs_ended_total", state="cancelled", cause="") == 1
    second.extensions[KEY].queue.connection.close()


def test_the_store_is_measured_while_redis_is_away(settings: Settings, tmp_path: Path) -> None:
    app = create_app(replace(settings, redis_url=f"unix://{tmp_path}/nothing.sock"))
    samples = read(app.test_client())
    assert value(samples, "redis_up") == 0
    assert value(samples, "jobs", state="queued") == 0
    assert not any(name.startswith("fishplate_queue") for name, _ in samples)
    app.extensions[KEY].queue.connection.close()


def test_whoever_may_look_may_look_here_and_nobody_else(
    client: FlaskClient, services: Services
) -> None:
    _, text = services.tokens.add("prometheus", "read", "monitoring")
    assert client.get("/metrics").status_code == 401
    read(client, Authorization=f"Bearer {text}")


@pytest.mark.parametrize("secret", ["Slipway tie strip", "dock", "ana"])
def test_no_name_of_a_job_a_workspace_or_a_person_is_in_it(
    client: FlaskClient, services: Services, secret: str
) -> None:
    _, text = services.tokens.add("ana", "submit", "dock")
    headers = {"Authorization": f"Bearer {text}"}
    client.post("/v1/jobs", json=strip(), headers=headers)
    assert secret not in client.get("/metrics", headers=headers).text

"""What is answered while Redis is away or the disk refuses."""

import errno
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from flask import Flask
from flask.testing import FlaskClient

from api.app import create_app
from api.services import KEY
from tests.job_documents import strip
from workers.errors import StoreError
from workers.record import CANCELLED, QUEUED
from workers.settings import Settings


@pytest.fixture
def lonely(tmp_path: Path) -> Iterator[Flask]:
    """An application whose Redis does not exist."""
    url = f"unix://{tmp_path}/nothing.sock"
    app = create_app(Settings(store=tmp_path / "store", redis_url=url))
    yield app
    app.extensions[KEY].queue.connection.close()


@pytest.fixture
def client(lonely: Flask) -> FlaskClient:
    return lonely.test_client()


def test_a_job_is_accepted_while_redis_is_away(client: FlaskClient, lonely: Flask) -> None:
    """The store has it; the reconciler queues it when Redis is back."""
    answer = client.post("/v1/jobs", json=strip())
    assert answer.status_code == 202
    assert lonely.extensions[KEY].store.unfinished() == (answer.get_json()["id"],)


def test_jobs_are_shown_and_cancelled_while_redis_is_away(client: FlaskClient) -> None:
    address = client.post("/v1/jobs", json=strip()).headers["Location"]
    assert client.get(address).get_json()["state"] == QUEUED
    client.delete(address)
    assert client.get(address).get_json()["state"] == CANCELLED


def test_readiness_names_what_is_missing(client: FlaskClient) -> None:
    answer = client.get("/health/ready")
    assert answer.status_code == 503
    ok = {check["name"]: check["ok"] for check in answer.get_json()["checks"]}
    assert ok == {"queue": False, "store": True, "workers": False}
    assert client.get("/health/live").status_code == 200


def test_readiness_writes_to_the_store(
    client: FlaskClient, lonely: Flask, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full() -> None:
        raise StoreError(errno.ENOSPC, "the job store cannot be written: No space left on device")

    monkeypatch.setattr(lonely.extensions[KEY].store, "probe", full)
    checks = client.get("/health/ready").get_json()["checks"]
    assert "No space left" in next(c["detail"] for c in checks if c["name"] == "store")


def test_nothing_is_accepted_when_the_disk_is_full(
    client: FlaskClient, lonely: Flask, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(*_: Any, **__: Any) -> None:
        raise StoreError(errno.ENOSPC, "the job could not be filed: No space left on device")

    monkeypatch.setattr(lonely.extensions[KEY].store, "accept", full)
    answer = client.post("/v1/jobs", json=strip())
    assert answer.status_code == 503
    assert answer.get_json()["detail"] == "the job could not be filed: No space left on device"
    assert "Retry-After" in answer.headers

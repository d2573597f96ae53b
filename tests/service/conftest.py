"""A store of its own for each test, and where wanted an empty Redis and a pool."""

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from tests.service_pool import Service, running_pool
from workers.private_redis import PrivateRedis
from workers.queue import Queue
from workers.settings import Settings
from workers.store import Store


@pytest.fixture
def store(tmp_path: Path) -> Store:
    return Store(tmp_path / "store")


@pytest.fixture
def settings(store: Store, tmp_path: Path) -> Iterator[Settings]:
    """Settings with an empty Redis of the test's own."""
    with PrivateRedis(tmp_path / "server") as server:
        yield Settings(
            store=store.root,
            redis_url=server.url,
            workers=1,
            time_limit=20,
            memory_limit=1024**3,
            reconcile_every=0.5,
            shutdown_grace=20.0,
        )


@pytest.fixture
def queue(settings: Settings) -> Iterator[Queue]:
    queue = Queue(settings)
    yield queue
    queue.connection.close()


@pytest.fixture
def service(settings: Settings) -> Iterator[Service]:
    """A pool with one worker."""
    with running_pool(settings) as service:
        yield service


@pytest.fixture
def patient_service(settings: Settings) -> Iterator[Service]:
    """A pool whose reconciler looks round once, at the start, and then not again."""
    with running_pool(replace(settings, reconcile_every=1e5)) as service:
        yield service

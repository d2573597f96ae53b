"""A real Redis, and a real HTTP server on a store with jobs in every state; no workers."""

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import pytest

from api.commands.http_server import http_server
from tests.hostile.site import fill, settings_of
from workers.private_redis import PrivateRedis
from workers.store import Store


@dataclass(frozen=True)
class Site:
    """Address of a running server, the process id of gunicorn, ids of jobs by state."""

    url: str
    pid: int
    store: Path
    ids: dict[str, str]


@pytest.fixture(scope="session")
def redis_url(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    with PrivateRedis(tmp_path_factory.mktemp("redis")) as server:
        yield server.url


@pytest.fixture(scope="session")
def site(redis_url: str, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Site]:
    settings = settings_of(tmp_path_factory.mktemp("site"), redis_url)
    with http_server(settings) as (url, process):
        yield Site(url, process.pid, settings.store, fill(Store(settings.store)))

"""An application with a real store and a real, empty Redis; and jobs in every state."""

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import orjson
import pytest
from flask import Flask
from flask.testing import FlaskClient

from api.app import create_app
from api.services import KEY, Services
from tests.job_documents import strip
from tests.small_results import RESULTS
from workers.batch import outcome_of
from workers.private_redis import PrivateRedis
from workers.record import RUNNING
from workers.settings import Settings
from workers.tokens import ROLES


@pytest.fixture(scope="session")
def redis_url(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    with PrivateRedis(tmp_path_factory.mktemp("redis")) as server:
        yield server.url


@pytest.fixture
def settings(redis_url: str, tmp_path: Path) -> Settings:
    return Settings(store=tmp_path / "store", redis_url=redis_url, body_bytes=100_000)


@pytest.fixture
def app(settings: Settings) -> Iterator[Flask]:
    app = create_app(settings)
    connection = app.extensions[KEY].queue.connection
    connection.flushall()  # whatever an application that a test made by itself has left
    yield app
    connection.flushall()
    connection.close()


@pytest.fixture
def tokens(app: Flask) -> dict[str, str]:
    """Tokens of every role, with which the application becomes guarded; "other" is elsewhere."""
    made = app.extensions[KEY].tokens
    return {
        **{role: made.add(role, role)[1] for role in ROLES},
        "other": made.add("other", "submit", "elsewhere")[1],
    }


@pytest.fixture
def services(app: Flask) -> Services:
    found: Services = app.extensions[KEY]
    return found


@pytest.fixture
def client(app: Flask) -> FlaskClient:
    return app.test_client()


@pytest.fixture
def post(client: FlaskClient) -> Callable[..., Any]:
    """Post a document, the strip unless another is given."""

    def send(document: dict[str, Any] | None = None, **headers: str) -> Any:
        named = {name.replace("_", "-"): value for name, value in headers.items()}
        return client.post("/v1/jobs", json=document or strip(), headers=named)

    return send


@pytest.fixture
def finish(services: Services) -> Callable[[str], None]:
    """Do to a queued job what a worker does, with small results."""

    def publish(job_id: str) -> None:
        services.store.transition(job_id, RUNNING)
        with services.store.working(job_id) as staging:
            assert staging is not None
            (staging / "results.json").write_bytes(orjson.dumps(RESULTS))
            for name in (
                "fields/pull.vtu", "previews/pull/model.png", "lines/axis.png",
                "envelope/fields.vtu", "envelope/nodes.csv", "envelope/von_mises.png", "sheet.html",
                "convergence.png",
            ):  # fmt: skip
                path = staging / name
                path.parent.mkdir(parents=True, exist_ok=True)
                path.write_bytes(name.encode())
            services.store.publish(job_id, staging, RESULTS["cautions"], outcome_of(RESULTS))

    return publish

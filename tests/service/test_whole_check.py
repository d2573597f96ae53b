"""A real check through a real worker: its answer, its pictures, and what it refuses."""

from collections.abc import Iterator

import orjson
import pytest

from tests.job_documents import strip
from tests.service_pool import Service, running_pool
from workers.checks import Checks
from workers.outputs import preview
from workers.private_redis import PrivateRedis
from workers.queue import Answer
from workers.settings import Settings

pytestmark = [pytest.mark.server, pytest.mark.slow]


@pytest.fixture(scope="module")
def service(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Service]:
    root = tmp_path_factory.mktemp("whole")
    with PrivateRedis(root / "server") as server:
        settings = Settings(
            store=root / "store", redis_url=server.url, workers=1, pictures=0, most_dofs=1000
        )
        with running_pool(settings, "workers.pool") as service:
            yield service


@pytest.fixture(scope="module")
def checks(service: Service) -> Checks:
    return Checks(service.settings.store)


def ask(service: Service, name: str, *arguments: str) -> Answer:
    return service.queue.ask(f"workers.check_tasks.{name}", *arguments, wait=60.0)


def file(checks: Checks, **changes: object) -> str:
    return checks.file(orjson.dumps({**strip(), **changes}))


def test_a_worker_answers_a_check(service: Service, checks: Checks) -> None:
    check_id = file(checks)
    answer = ask(service, "run_check", check_id)
    assert (answer.state, answer.value) == ("done", {"ok": True})
    folder = checks.answer(check_id)
    assert folder is not None
    found = orjson.loads((folder / "check.json").read_bytes())
    assert found["cases"]["pull"]["force"] == pytest.approx([32_000, 0])
    assert (folder / "previews" / "pull.png").is_file() == found["pictures"]["available"]


def test_a_check_is_answered_ahead_of_the_jobs_in_line(service: Service, checks: Checks) -> None:
    """One worker and a dozen jobs: when the check is answered, most of them still wait."""
    jobs = [
        service.store.accept(orjson.dumps(strip(length=length)), title="strip").record.id
        for length in range(100, 112)
    ]
    for job_id in jobs:
        service.queue.submit(job_id)
    assert ask(service, "run_check", file(checks, title="Urgent")).state == "done"
    assert len(service.queue.waiting()) >= len(jobs) // 2
    for job_id in jobs:
        assert service.ended(job_id).state == "finished"


def test_faults_that_the_mesh_shows_come_back(service: Service, checks: Checks) -> None:
    supports = [{"on": {"segment": [[0, 3], [9, 3]]}, "ux": 0}, {"on": "left", "ux": 0}]
    answer = ask(service, "run_check", file(checks, supports=supports))
    assert answer.value["error"] == "MeshError"
    assert [fault["pointer"] for fault in answer.value["faults"]] == ["/supports/0/on"]


def test_a_mesh_beyond_the_limit_comes_back(service: Service, checks: Checks) -> None:
    geometry = strip()["geometry"]
    geometry["patches"][0]["divisions"] = [20, 20]
    answer = ask(service, "run_check", file(checks, geometry=geometry))
    assert answer.value["error"] == "LimitError"
    assert "1000" in answer.value["faults"][0]["message"]


def test_a_check_that_is_gone_says_what_to_do(service: Service) -> None:
    for name, *case in (("run_check",), ("draw_check", "pull")):
        answer = ask(service, name, "0" * 32, *case)
        assert answer.value["error"] == "StoreError"
        assert "send its document again" in answer.value["reason"]


def test_another_picture_is_drawn_or_refused_with_the_reason(
    service: Service, checks: Checks
) -> None:
    check_id = file(checks, combinations={"pull twice": {"pull": 2}})
    ask(service, "run_check", check_id)
    folder = checks.answer(check_id)
    assert folder is not None
    path = folder / "previews" / "pull twice.png"
    path.unlink(missing_ok=True)
    answer = ask(service, "draw_check", check_id, "pull twice")
    if preview.probe() is None:
        assert answer.value == {"ok": True}
        assert path.read_bytes().startswith(b"\x89PNG")  # ISO/IEC 15948, 5.2
    else:
        assert answer.value["error"] == "PicturesUnavailableError"
    assert ask(service, "draw_check", check_id, "push").value["error"] == "KeyError"

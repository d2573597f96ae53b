"""A real job through the real pipeline in a real worker, and files made from it afterwards."""

from collections.abc import Iterator
from pathlib import Path

import orjson
import pytest

from tests.job_documents import strip
from tests.service_pool import Service, running_pool
from workers.private_redis import PrivateRedis
from workers.record import Record
from workers.settings import Settings

pytestmark = [pytest.mark.server, pytest.mark.slow]


@pytest.fixture(scope="module")
def service(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Service]:
    root = tmp_path_factory.mktemp("whole")
    with PrivateRedis(root / "server") as server:
        settings = Settings(store=root / "store", redis_url=server.url, workers=1, pictures=1)
        with running_pool(settings, "workers.pool") as service:
            yield service


def send(service: Service, document: dict) -> Record:
    job_id = service.store.accept(orjson.dumps(document), title=document["title"]).record.id
    service.queue.submit(job_id)
    return service.ended(job_id)


@pytest.fixture(scope="module")
def finished(service: Service) -> Record:
    record = send(service, strip(length=100.0, height=40.0, thickness=8.0, force=32_000.0))
    assert record.state == "finished", record.reason
    return record


@pytest.fixture(scope="module")
def folder(service: Service, finished: Record) -> Path:
    return service.store.results_path(finished.id)


def test_the_published_results_are_those_of_the_bar(folder: Path) -> None:
    # A bar in tension: 32 000 N over 40 mm x 8 mm is 100 MPa; 100 MPa / 210 000 MPa x 100 mm.
    pull = orjson.loads((folder / "results.json").read_bytes())["cases"]["pull"]
    assert pull["von_mises"]["value"] == pytest.approx(100.0, rel=1e-9)
    # The end also contracts: v = -nu sigma/E height on the upper edge, 0.3 x 100/210 000 x 40.
    u, v = 100.0 / 210_000 * 100.0, 0.3 * 100.0 / 210_000 * 40.0
    assert pull["displacement"]["value"] == pytest.approx((u**2 + v**2) ** 0.5, rel=1e-9)


def test_the_record_carries_the_cautions_of_the_results(finished: Record, folder: Path) -> None:
    results = orjson.loads((folder / "results.json").read_bytes())
    assert list(finished.cautions) == results["cautions"]
    assert {c["code"] for c in finished.cautions} >= {"linear-plane-stress", "engineer-review"}


def test_a_field_file_is_made_again_from_what_is_stored(
    service: Service, finished: Record, folder: Path
) -> None:
    path = folder / "fields" / "pull.vtu"
    first = path.read_bytes()
    path.unlink()
    assert service.queue.make_artefact(finished.id, "field", "pull", wait=60.0).state == "done"
    assert path.read_bytes() == first


def test_the_sheet_is_made_again_from_what_is_stored(
    service: Service, finished: Record, folder: Path
) -> None:
    path = folder / "sheet.html"
    first = path.read_bytes()
    assert b"100 <span" in first  # MPa, as above
    path.unlink()
    assert service.queue.make_artefact(finished.id, "sheet", "", wait=60.0).state == "done"
    assert path.read_bytes() == first


def test_a_picture_is_made_when_asked_for_or_refused_with_the_reason(
    service: Service, finished: Record, folder: Path
) -> None:
    answer = service.queue.make_artefact(finished.id, "preview", "pull", "principal_min", wait=60.0)
    path = folder / "previews" / "pull" / "principal_min.png"
    if orjson.loads((folder / "results.json").read_bytes())["pictures"]["available"]:
        assert answer.state == "done"
        assert path.read_bytes().startswith(b"\x89PNG")  # ISO/IEC 15948, 5.2
    else:
        assert answer.state == "failed"
        assert answer.error == "PicturesUnavailableError"


@pytest.mark.parametrize(("kind", "case"), [("field", "no such case"), ("film", "pull")])
def test_what_the_job_does_not_have_is_refused(
    service: Service, finished: Record, kind: str, case: str
) -> None:
    answer = service.queue.make_artefact(finished.id, kind, case, wait=60.0)
    assert answer.state == "failed"
    assert answer.error == "KeyError"


def test_a_wrong_document_fails_with_its_faults(service: Service) -> None:
    document = strip()
    document["supports"] = [{"on": "left", "ux": 0}, {"on": "nowhere", "uy": 0}]
    record = send(service, document)
    assert record.state == "failed"
    assert [fault.pointer for fault in record.faults] == ["/supports/1/on"]
    assert "nowhere" in record.reason

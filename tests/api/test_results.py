"""Results, fields, pictures and tables over HTTP."""

import csv
import importlib
import io
from collections.abc import Callable
from typing import Any

import pytest
from flask.testing import FlaskClient
from werkzeug.test import TestResponse

from api.results import QUANTITIES
from api.services import Services
from tests.small_results import CAUTION, RESULTS
from workers.errors import Fault
from workers.queue import Answer
from workers.record import FAILED, RUNNING

Get = Callable[..., TestResponse]


@pytest.fixture
def job_id(post: Callable[..., Any], finish: Callable[[str], None]) -> str:
    """A finished job."""
    found: str = post().get_json()["id"]
    finish(found)
    return found


@pytest.fixture
def get(client: FlaskClient, job_id: str) -> Get:
    """Ask for something of the finished job."""

    def fetch(path: str, **headers: str) -> TestResponse:
        named = {name.replace("_", "-"): value for name, value in headers.items()}
        return client.get(f"/v1/jobs/{job_id}/{path}", headers=named, buffered=True)

    return fetch


def test_results_are_those_that_the_worker_published(get: Get) -> None:
    answer = get("results")
    assert answer.get_json() == RESULTS
    assert answer.mimetype == "application/json"


def test_a_finished_job_shows_its_own_cautions_first(client: FlaskClient, job_id: str) -> None:
    assert client.get(f"/v1/jobs/{job_id}").get_json()["cautions"][0] == CAUTION


@pytest.mark.parametrize(
    "path",
    [
        "results",
        "fields/pull.vtu",
        "previews/pull/model.png",
        "lines/axis.png",
        "convergence.png",
        "envelope/fields.vtu",
        "envelope/nodes.csv",
        "envelope/von_mises.png",
    ],
)
def test_an_unchanged_file_is_not_sent_again(get: Get, path: str) -> None:
    """RFC 9110 section 13.1.2: If-None-Match with the current ETag gives 304 and no body."""
    etag = get(path).headers["ETag"]
    again = get(path, If_None_Match=etag)
    assert (again.status_code, again.data) == (304, b"")
    assert "describedby" in again.headers["Link"]


def test_a_part_of_a_file_can_be_asked_for(get: Get) -> None:
    """RFC 9110 section 14.2; the file holds its own path."""
    part = get("fields/pull.vtu", Range="bytes=7-10")
    assert (part.status_code, part.data) == (206, b"pull")


def test_names_are_not_paths(get: Get) -> None:
    for path in ("fields/..%2F..%2Fjob.vtu", "previews/..%2F..%2F..%2Fjob/model.png"):
        assert get(path).status_code == 404


@pytest.mark.parametrize(
    ("path", "kind"),
    [("fields/push.vtu", "case or combination"), ("previews/push/model.png", "case or combination"),
     ("previews/pull/colour.png", "quantity"), ("envelope/colour.png", "measure"),
     ("lines/push.png", "line"),
     ("tables/push.csv", "table")],
)  # fmt: skip
def test_an_unknown_name_is_answered_with_those_there_are(get: Get, path: str, kind: str) -> None:
    problem = get(path).get_json()
    assert problem["status"] == 404
    assert kind in problem["detail"]
    assert problem["available"]


@pytest.fixture
def workers_answer(services: Services, monkeypatch: pytest.MonkeyPatch) -> Callable[[Answer], None]:
    """Say what becomes of the next request for a file."""

    def set_answer(answer: Answer) -> None:
        monkeypatch.setattr(services.queue, "make_artefact", lambda *_, **__: answer)

    return set_answer


@pytest.mark.slow
def test_pictures_are_offered_of_exactly_what_can_be_drawn() -> None:
    """The API names the quantities without importing the renderer."""
    assert importlib.import_module("workers.outputs.preview").QUANTITIES == QUANTITIES


# --- files that a worker makes on request --------------------------------------------------------


def test_a_missing_file_is_made_by_a_worker_and_served(
    get: Get, services: Services, monkeypatch: pytest.MonkeyPatch
) -> None:
    def make(job: str, kind: str, case: str, quantity: str | None, *, wait: float) -> Answer:
        folder = services.store.results_path(job) / "previews" / "pull, factored"
        folder.mkdir(parents=True)
        (folder / f"{quantity}.png").write_bytes(b"a picture")
        return Answer("done", value={"ok": True})

    monkeypatch.setattr(services.queue, "make_artefact", make)
    answer = get("previews/pull, factored/von_mises.png")
    assert (answer.data, answer.mimetype) == (b"a picture", "image/png")


@pytest.mark.parametrize(
    ("made", "status", "kind"),
    [
        (Answer("pending"), 503, "not-made-yet"),
        (Answer("failed", reason="killed"), 500, "file-not-made"),
        (Answer("failed", reason="too large", error="MemoryError"), 500, "file-not-made"),
        (
            Answer("failed", reason="no libEGL", error="PicturesUnavailableError"),
            503,
            "pictures-unavailable",
        ),
    ],
)
def test_a_file_that_is_not_made_is_a_problem_with_the_reason(
    get: Get, workers_answer: Callable[[Answer], None], made: Answer, status: int, kind: str
) -> None:
    workers_answer(made)
    problem = get("previews/pull/von_mises.png").get_json()
    assert (problem["status"], problem["type"]) == (status, f"/docs#problem-{kind}")
    assert made.reason is None or problem["detail"] == made.reason


def test_a_request_never_waits_without_a_seat(
    get: Get, services: Services, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Otherwise requests for pictures could take every thread of the server."""
    waits = []

    def make(*_: Any, wait: float) -> Answer:
        waits.append(wait)
        return Answer("pending")

    monkeypatch.setattr(services.queue, "make_artefact", make)
    seats = services.settings.api_threads // 2
    taken = [services.waiting_room.seat() for _ in range(seats)]
    for seat in taken:
        seat.__enter__()
    get("previews/pull/von_mises.png")
    for seat in taken:
        seat.__exit__(None, None, None)
    get("previews/pull/von_mises.png")
    assert waits[0] == 0.0
    assert waits[1] > 0.0


# --- jobs without results ------------------------------------------------------------------------


def test_results_of_an_unfinished_job_say_when_to_ask_again(
    client: FlaskClient, post: Callable[..., Any]
) -> None:
    answer = client.get(post().headers["Location"] + "/results")
    assert answer.status_code == 409
    assert answer.get_json()["type"].endswith("#problem-not-finished")
    assert int(answer.headers["Retry-After"]) > 0


def test_results_of_a_failed_job_say_why_it_failed(
    client: FlaskClient, post: Callable[..., Any], services: Services
) -> None:
    job_id = post().get_json()["id"]
    services.store.transition(job_id, RUNNING)
    fault = Fault("/supports", "part 1 can rotate")
    services.store.transition(job_id, FAILED, reason="free to move", faults=(fault,))
    paths = ("results", "fields/pull.vtu", "previews/pull/model.png", "lines/axis.png",
             "tables/peaks.csv")  # fmt: skip
    for path in paths:
        problem = client.get(f"/v1/jobs/{job_id}/{path}").get_json()
        assert (problem["status"], problem["detail"]) == (409, "free to move")
        assert problem["errors"] == [fault.as_json()]
    assert client.get(f"/v1/jobs/{job_id}").get_json()["errors"] == [fault.as_json()]


# --- tables --------------------------------------------------------------------------------------


def read(answer: TestResponse) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(answer.text)))


def test_tables_read_back_as_the_numbers_of_the_results(get: Get) -> None:
    """Read with the standard library's CSV reader; floats survive exactly."""
    state = RESULTS["cases"]["pull"]
    peaks = {(row["case"], row["quantity"]): row for row in read(get("tables/peaks.csv"))}
    assert float(peaks["pull", "von_mises"]["x [mm]"]) == state["von_mises"]["at"][0]
    assert ("pull, factored", "shear_max") in peaks
    reaction = read(get("tables/reactions.csv"))[0]
    assert float(reaction["fx [N]"]) == state["reactions"]["left"]["force"][0]
    balance = read(get("tables/equilibrium.csv"))[0]
    assert float(balance["relative residual"]) == state["equilibrium"]["residual"]
    probe = read(get("tables/probes.csv"))[0]
    assert float(probe["von Mises [MPa]"]) == 100.0
    cut = read(get("tables/cuts.csv"))[0]
    assert float(cut["normal [N]"]) == RESULTS["cuts"]["root"]["pull"]["normal"]
    spot = read(get("tables/hot_spots.csv"))[0]
    assert float(spot["hot-spot stress [MPa]"]) == 103.35
    line = read(get("tables/lines.csv"))
    assert [float(row["xy [MPa]"]) for row in line] == [0.0, 0.25]
    assert [float(row["distance [mm]"]) for row in line] == RESULTS["lines"]["axis"]["distance"]

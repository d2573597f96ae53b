"""Checks over HTTP: what the worker found, what it refuses, and whose it is."""

from collections.abc import Callable
from typing import Any

import orjson
import pytest
from flask.testing import FlaskClient
from werkzeug.test import TestResponse

from api.services import Services
from tests.job_documents import strip
from tests.small_check import CHECK, answer_check
from workers.checks import Checks
from workers.queue import Answer

Ask = Callable[..., Answer]
DONE = Answer("done", value={"ok": True})


@pytest.fixture
def asked() -> list[tuple[str, ...]]:
    """What the workers were asked: function and arguments."""
    return []


@pytest.fixture(autouse=True)
def worker(
    services: Services, asked: list[tuple[str, ...]], monkeypatch: pytest.MonkeyPatch
) -> Callable[[Answer], None]:
    """Workers that do what they are asked, until they are told to give another answer."""
    refusals: list[Answer] = []

    def ask(function: str, *arguments: str, wait: float) -> Answer:
        asked.append((function.rsplit(".", 1)[1], *arguments))
        if refusals:
            return refusals[-1]
        answer_check(services.settings.store, *arguments)
        return DONE

    monkeypatch.setattr(services.queue, "ask", ask)
    return refusals.append


@pytest.fixture
def post(client: FlaskClient) -> Callable[..., TestResponse]:
    def send(document: dict[str, Any] | None = None, **options: Any) -> TestResponse:
        return client.post("/v1/checks", json=document or strip(), **options)

    return send


Post = Callable[..., TestResponse]


def test_a_check_is_what_the_worker_found_with_addresses(post: Post, client: FlaskClient) -> None:
    answer = post()
    assert answer.status_code == 200
    found = answer.get_json()
    here = answer.headers["Content-Location"]
    assert {key: found[key] for key in CHECK if key != "previews"} == {
        key: value for key, value in CHECK.items() if key != "previews"
    }
    assert found["links"] == {"self": here, "preview": f"{here}/previews/{{case}}.png"}
    assert found["previews"] == {"pull": f"{here}/previews/pull.png"}
    assert client.get(here).get_json() == found


def test_the_worker_gets_the_document_as_it_was_sent(
    client: FlaskClient, services: Services, asked: list[tuple[str, ...]]
) -> None:
    body = orjson.dumps(strip(), option=orjson.OPT_INDENT_2)
    client.post("/v1/checks", data=body, content_type="application/json")
    ((function, check_id),) = asked
    assert function == "run_check"
    assert Checks(services.settings.store).document(check_id) == body


def test_the_same_document_is_the_same_check_and_is_made_once(
    post: Post, asked: list[tuple[str, ...]]
) -> None:
    first, second = post().get_json(), post().get_json()
    assert first["id"] == second["id"] != post(strip(length=60.0)).get_json()["id"]
    assert len(asked) == 2


def test_nothing_becomes_a_job(post: Post, client: FlaskClient, services: Services) -> None:
    post()
    assert client.get("/v1/jobs").get_json()["jobs"] == []
    assert services.store.unfinished() == ()


# --- pictures ------------------------------------------------------------------------------------


def test_a_picture_leads_to_the_cautions_of_its_check(post: Post, client: FlaskClient) -> None:
    found = post().get_json()
    answer = client.get(found["previews"]["pull"], buffered=True)
    assert (answer.data, answer.mimetype) == (b"a picture of pull", "image/png")
    assert answer.headers["Link"] == f'<{found["links"]["self"]}>; rel="describedby"'
    etag = {"If-None-Match": answer.headers["ETag"]}
    again = client.get(found["previews"]["pull"], headers=etag, buffered=True)
    assert (again.status_code, again.data) == (304, b"")


def test_a_picture_of_another_case_is_drawn_when_asked_for(
    post: Post, client: FlaskClient, asked: list[tuple[str, ...]]
) -> None:
    found = post().get_json()
    address = found["links"]["preview"].replace("{case}", "pull, factored")
    for _ in range(2):
        answer = client.get(address, buffered=True)
        assert (answer.status_code, answer.data) == (200, b"a picture of pull, factored")
    assert asked[1:] == [("draw_check", found["id"], "pull, factored")]


def test_a_case_that_is_not_there_is_not_drawn(
    post: Post, client: FlaskClient, asked: list[tuple[str, ...]]
) -> None:
    here = post().headers["Content-Location"]
    answer = client.get(f"{here}/previews/push.png")
    assert answer.status_code == 404
    assert answer.get_json()["available"] == ["pull", "pull, factored"]
    assert client.get(f"{here}/previews/..%2F..%2Fjob.png").status_code == 404
    assert len(asked) == 1


# --- refusals ------------------------------------------------------------------------------------


def test_faults_of_the_document_are_answered_without_a_worker(
    post: Post, asked: list[tuple[str, ...]]
) -> None:
    document = strip()
    document["plate"]["thickness"] = 0
    document["load_cases"]["pull"][0]["on"] = "nowhere"
    answer = post(document)
    assert answer.status_code == 422
    pointers = {error["pointer"] for error in answer.get_json()["errors"]}
    assert pointers == {"/plate/thickness", "/load_cases/pull/0/on"}
    assert asked == []


@pytest.mark.parametrize(
    ("error", "status", "kind"),
    [("MeshError", 422, "invalid-document"), ("LimitError", 413, "job-too-large")],
)
def test_faults_that_only_the_mesh_shows_are_answered_all_at_once(
    post: Post, worker: Callable[[Answer], None], error: str, status: int, kind: str
) -> None:
    faults = [{"pointer": f"/supports/{n}/on", "message": "nothing is there"} for n in range(3)]
    value = {"ok": False, "error": error, "reason": "three", "faults": faults}
    worker(Answer("done", value=value))
    answer = post()
    assert answer.status_code == status
    assert answer.get_json()["type"].endswith(f"#problem-{kind}")
    assert answer.get_json()["errors"] == faults


@pytest.mark.parametrize(
    ("answer", "status", "kind"),
    [
        (Answer("pending"), 503, "not-checked-yet"),
        (Answer("failed", reason="it was killed"), 500, "check-failed"),
        (
            Answer("done", value={"ok": False, "error": "MemoryError", "reason": "too large"}),
            500, "check-failed",
        ),
    ],
)  # fmt: skip
def test_a_check_without_an_answer_is_a_problem_with_the_reason(
    post: Post, worker: Callable[[Answer], None], answer: Answer, status: int, kind: str
) -> None:
    worker(answer)
    problem = post()
    assert problem.status_code == status
    assert problem.get_json()["type"].endswith(f"#problem-{kind}")
    assert problem.get_json()["cautions"]
    if status == 503:
        assert int(problem.headers["Retry-After"]) > 0
    worker(DONE)


def test_a_machine_that_cannot_draw_says_so(
    post: Post, client: FlaskClient, worker: Callable[[Answer], None]
) -> None:
    here = post().headers["Content-Location"]
    value = {"ok": False, "error": "PicturesUnavailableError", "reason": "no libEGL"}
    worker(Answer("done", value=value))
    problem = client.get(f"{here}/previews/pull, factored.png")
    assert problem.status_code == 503
    assert problem.get_json()["type"].endswith("#problem-pictures-unavailable")
    assert problem.get_json()["detail"] == "no libEGL"


def test_a_late_answer_is_there_when_asked_again(
    post: Post, client: FlaskClient, services: Services, worker: Callable[[Answer], None]
) -> None:
    worker(Answer("pending"))
    assert post().status_code == 503
    check_id = next(Checks(services.settings.store).root.iterdir()).name
    answer_check(services.settings.store, check_id)
    assert post().status_code == 200
    assert client.get(f"/v1/checks/{check_id}").status_code == 200


def test_a_request_never_waits_without_a_seat(
    post: Post, services: Services, monkeypatch: pytest.MonkeyPatch
) -> None:
    waits = []

    def ask(*_: str, wait: float) -> Answer:
        waits.append(wait)
        return Answer("pending")

    monkeypatch.setattr(services.queue, "ask", ask)
    taken = [services.waiting_room.seat() for _ in range(services.settings.api_threads // 2)]
    for seat in taken:
        seat.__enter__()
    post()
    for seat in taken:
        seat.__exit__(None, None, None)
    post()
    assert waits[0] == 0.0
    assert waits[1] > 0.0


def test_checks_of_another_workspace_are_not_there(
    post: Post, client: FlaskClient, services: Services
) -> None:
    here = post().headers["Content-Location"]
    tokens = {
        name: services.tokens.add(name, role, workspace=workspace)[1]
        for name, role, workspace in (
            ("yard", "submit", "yard"), ("office", "submit", "office"), ("chief", "admin", "yard"),
        )
    }  # fmt: skip
    headers = {name: {"Authorization": f"Bearer {token}"} for name, token in tokens.items()}
    here = post(headers=headers["yard"]).headers["Content-Location"]
    for name, status in (("yard", 200), ("office", 404), ("chief", 200)):
        for path in (here, f"{here}/previews/pull.png"):
            answer = client.get(path, headers=headers[name], buffered=True)
            assert answer.status_code == status, (name, path)
    other = post(headers=headers["office"]).headers["Content-Location"]
    assert other != here

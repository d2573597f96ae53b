"""Batches over HTTP: jobs that share a label."""

from collections.abc import Callable
from typing import Any

import pytest
from flask.testing import FlaskClient

from api.services import Services
from tests.job_documents import strip
from tests.small_results import CAUTION, GOVERNING, RESULTS
from workers.batch import outcome_of, read_batch
from workers.queue import Answer
from workers.record import CANCELLED, FAILED, RUNNING
from workers.store import Store

LABEL = "ropes 2031/04"
HERE = "/v1/batches/ropes%202031%2F04"
Post = Callable[..., Any]


@pytest.fixture
def send(post: Post) -> Callable[[], str]:
    """Send a job of the batch; its id."""

    def sent() -> str:
        found: str = post({**strip(), "label": LABEL}).get_json()["id"]
        return found

    return sent


@pytest.fixture
def make(services: Services, monkeypatch: pytest.MonkeyPatch) -> list[str]:
    """Stands in for the workers: makes files that hold their kind; lists what was made."""
    made: list[str] = []

    def make_batch_file(
        label: str, workspace: str | None, digest: str, kind: str, *, wait: float
    ) -> Answer:
        made.append(kind)
        path = read_batch(services.store, label, workspace).file(services.store.root, kind)
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(kind.encode())
        return Answer("done", value={"ok": True})

    monkeypatch.setattr(services.queue, "make_batch_file", make_batch_file)
    return made


def test_progress_counts_every_job_of_the_label(
    client: FlaskClient, send: Callable[[], str], post: Post, services: Services,
    finish: Callable[[str], None],
) -> None:  # fmt: skip
    """Of five jobs three have come to their end."""
    finish(send())
    failed, cancelled, running = send(), send(), send()
    send()
    post()  # without a label
    services.store.transition(failed, RUNNING)
    services.store.transition(failed, FAILED, reason="why")
    services.store.transition(cancelled, CANCELLED)
    services.store.transition(running, RUNNING)
    found = client.get(HERE).get_json()
    assert found["label"] == LABEL
    assert found["jobs"] == {
        "queued": 1, "running": 1, "finished": 1, "failed": 1, "cancelled": 1
    }  # fmt: skip
    assert found["progress"] == pytest.approx(3 / 5)


def test_the_worst_of_the_finished_jobs_leads_to_its_job(
    client: FlaskClient, send: Callable[[], str], finish: Callable[[str], None]
) -> None:
    first = send()
    send()
    finish(first)
    found = client.get(HERE).get_json()
    (envelope,) = found["envelopes"]
    assert envelope["von_mises"] == {
        "value": GOVERNING["value"], "at": GOVERNING["at"], "region": GOVERNING["region"],
        "governs": {"job": first, "title": strip()["title"], "case": GOVERNING["governs"]},
    }  # fmt: skip
    assert found["cautions"][0]["code"] == CAUTION["code"]
    assert found["cautions"][0]["evidence"]["job"] == first
    jobs = client.get(found["links"]["jobs"]).get_json()["jobs"]
    assert len(jobs) == 2


def test_joint_files_are_made_once_and_again_when_a_job_has_finished(
    client: FlaskClient, send: Callable[[], str], finish: Callable[[str], None], make: list[str]
) -> None:
    finish(send())
    links = client.get(HERE).get_json()["links"]
    for _ in range(2):
        answer = client.get(links["fields"], buffered=True)
        assert (answer.status_code, answer.data) == (200, b"fields")
        assert f'<{HERE}>; rel="describedby"' in answer.headers["Link"]
    assert client.get(links["nodes"], buffered=True).mimetype == "text/csv"
    picture = links["picture"].replace("{measure}", "von_mises")
    assert client.get(picture, buffered=True).mimetype == "image/png"
    assert make == ["fields", "nodes", "von_mises"]
    finish(send())
    client.get(links["fields"], buffered=True)
    assert make[3:] == ["fields"]


def test_a_batch_on_different_meshes_has_peaks_but_no_joint_files(
    client: FlaskClient, send: Callable[[], str], finish: Callable[[str], None], services: Services
) -> None:
    finish(send())
    other = {**RESULTS, "mesh": {**RESULTS["mesh"], "digest": "another"}}
    publish(services.store, send(), other)
    found = client.get(HERE).get_json()
    assert found["meshes"] == 2
    assert found["envelopes"][0]["jobs"] == 2
    assert found["links"]["fields"] is None
    problem = client.get(f"{HERE}/envelope/fields.vtu").get_json()
    assert (problem["status"], problem["type"]) == (409, "/docs#problem-nothing-joint")
    assert "2 different meshes" in problem["detail"]


def publish(store: Store, job_id: str, results: dict[str, Any]) -> None:
    store.transition(job_id, RUNNING)
    with store.working(job_id) as staging:
        assert staging is not None
        (staging / "results.json").write_bytes(b"{}")
        store.publish(job_id, staging, results["cautions"], outcome_of(results))


def test_a_job_that_finishes_meanwhile_is_a_reason_to_ask_again(
    client: FlaskClient, send: Callable[[], str], finish: Callable[[str], None],
    services: Services, monkeypatch: pytest.MonkeyPatch,
) -> None:  # fmt: skip
    """The worker made the file for the jobs that were finished when it began."""
    finish(send())
    monkeypatch.setattr(
        services.queue, "make_batch_file", lambda *_, **__: Answer("done", value={"ok": True})
    )
    answer = client.get(f"{HERE}/envelope/fields.vtu")
    assert answer.status_code == 503
    assert int(answer.headers["Retry-After"]) >= 1


def test_batches_of_another_workspace_do_not_exist(
    client: FlaskClient, tokens: dict[str, str], finish: Callable[[str], None], make: list[str]
) -> None:
    """The same label in two workspaces is two batches; an administrator sees one of both."""

    def headers(name: str) -> dict[str, str]:
        return {"Authorization": f"Bearer {tokens[name]}"}

    document = {**strip(), "label": LABEL}
    ids = {
        name: client.post("/v1/jobs", json=document, headers=headers(name)).get_json()["id"]
        for name in ("submit", "other")
    }
    finish(ids["submit"])
    count = {
        name: sum(client.get(HERE, headers=headers(name)).get_json()["jobs"].values())
        for name in ("submit", "read", "other", "admin")
    }
    assert count == {"submit": 1, "read": 1, "other": 1, "admin": 2}
    fields = f"{HERE}/envelope/fields.vtu"
    assert client.get(fields, headers=headers("submit"), buffered=True).data == b"fields"
    assert client.get(fields, headers=headers("other")).status_code == 409  # none is finished
    unknown = client.get("/v1/batches/nobody's", headers=headers("submit"))
    assert unknown.get_json()["type"] == "/docs#problem-unknown-batch"

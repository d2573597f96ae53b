"""Limits of what one client may take: rates, lines, sizes, priorities."""

from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from flask import Flask
from flask.testing import FlaskClient

from api.app import create_app
from api.services import KEY, Services
from tests.job_documents import strip
from workers.record import BULK, CANCELLED, INTERACTIVE
from workers.settings import Settings

Guarded = Callable[..., tuple[FlaskClient, dict[str, dict[str, str]]]]


@pytest.fixture
def guarded(settings: Settings) -> Iterator[Guarded]:
    """An application with other settings, and the headers of two tokens."""
    apps: list[Flask] = []

    def make(**changes: Any) -> tuple[FlaskClient, dict[str, dict[str, str]]]:
        app = create_app(replace(settings, **changes))
        apps.append(app)
        tokens = app.extensions[KEY].tokens
        headers = {
            name: {"Authorization": f"Bearer {tokens.add(name, 'submit', name)[1]}"}
            for name in ("ana", "ben")
        }
        return app.test_client(), headers

    yield make
    for app in apps:
        app.extensions[KEY].queue.connection.flushall()
        app.extensions[KEY].queue.connection.close()


def send(client: FlaskClient, headers: dict[str, str] | None = None, **query: str) -> Any:
    return client.post("/v1/jobs", json=strip(), headers=headers, query_string=query)


# --- rates ---------------------------------------------------------------------------------------


def test_too_many_requests_of_one_token_do_not_touch_another(guarded: Guarded) -> None:
    """RFC 6585 section 4: 429, with Retry-After."""
    client, tokens = guarded(request_rate="3/hour")
    answers = [client.get("/v1/jobs", headers=tokens["ana"]) for _ in range(4)]
    assert [answer.status_code for answer in answers] == [200, 200, 200, 429]
    assert answers[-1].mimetype == "application/problem+json"
    assert answers[-1].get_json()["cautions"]
    assert 0 < int(answers[-1].headers["Retry-After"]) <= 3600
    assert client.get("/v1/jobs", headers=tokens["ben"]).status_code == 200


def test_the_same_token_is_counted_over_all_processes(guarded: Guarded, settings: Settings) -> None:
    client, tokens = guarded(request_rate="3/hour")
    second = create_app(replace(settings, request_rate="3/hour"))
    other = second.test_client()
    for asked in (client, other, client):
        assert asked.get("/v1/jobs", headers=tokens["ana"]).status_code == 200
    assert other.get("/v1/jobs", headers=tokens["ana"]).status_code == 429
    second.extensions[KEY].queue.connection.close()


def test_guessing_tokens_is_limited_by_address(guarded: Guarded) -> None:
    client, tokens = guarded(request_rate="3/hour")
    wrong = {"Authorization": "Bearer fishplate_00000000_" + "0" * 64}
    statuses = [client.get("/v1/jobs", headers=wrong).status_code for _ in range(4)]
    assert statuses == [401, 401, 401, 429]
    assert client.get("/v1/jobs", headers=tokens["ana"]).status_code == 200
    assert client.get("/health/live").status_code == 200


def test_submissions_have_a_rate_of_their_own(guarded: Guarded) -> None:
    client, tokens = guarded(submit_rate="2/hour")
    statuses = [send(client, tokens["ana"]).status_code for _ in range(3)]
    assert statuses == [202, 202, 429]
    assert client.get("/v1/jobs", headers=tokens["ana"]).status_code == 200


def test_limits_can_be_switched_off(guarded: Guarded) -> None:
    client, tokens = guarded(request_rate="off", submit_rate="off")
    assert {send(client, tokens["ana"]).status_code for _ in range(5)} == {202}


def test_the_one_person_on_the_machine_is_not_counted(settings: Settings) -> None:
    app = create_app(replace(settings, request_rate="1/hour", submit_rate="1/hour"))
    assert {send(app.test_client()).status_code for _ in range(3)} == {202}
    app.extensions[KEY].queue.connection.flushall()
    app.extensions[KEY].queue.connection.close()


def test_while_redis_is_away_jobs_are_accepted_and_each_process_counts(tmp_path: Path) -> None:
    url = f"unix://{tmp_path}/nothing.sock"
    settings = Settings(store=tmp_path / "store", redis_url=url, submit_rate="2/hour")
    app = create_app(settings)
    headers = {"Authorization": f"Bearer {app.extensions[KEY].tokens.add('ana', 'submit')[1]}"}
    statuses = [send(app.test_client(), headers).status_code for _ in range(3)]
    assert statuses == [202, 202, 429]
    app.extensions[KEY].queue.connection.close()


# --- the line ------------------------------------------------------------------------------------


def test_a_full_line_is_refused_for_that_workspace_only(guarded: Guarded) -> None:
    client, tokens = guarded(queue_length=2)
    first = send(client, tokens["ana"])
    assert send(client, tokens["ana"]).status_code == 202
    full = send(client, tokens["ana"])
    assert full.status_code == 429
    assert full.get_json()["type"].endswith("#problem-line-full")
    assert int(full.headers["Retry-After"]) > 0
    assert send(client, tokens["ben"]).status_code == 202
    client.delete(first.headers["Location"], headers=tokens["ana"])
    assert send(client, tokens["ana"]).status_code == 202


# --- priorities ----------------------------------------------------------------------------------


def test_a_small_single_job_is_interactive_and_one_of_a_batch_is_not(client: FlaskClient) -> None:
    assert send(client).get_json()["priority"] == INTERACTIVE
    labelled = client.post("/v1/jobs", json={**strip(), "label": "week 3"})
    assert labelled.get_json()["priority"] == BULK


def test_a_job_with_many_cases_is_not_interactive(client: FlaskClient) -> None:
    document = strip()
    document["combinations"] = {f"c{n}": {"pull": n} for n in range(1, 60)}
    assert client.post("/v1/jobs", json=document).get_json()["priority"] == BULK


@pytest.mark.parametrize("priority", [INTERACTIVE, BULK])
def test_a_client_may_say_which_line_it_wants(
    client: FlaskClient, services: Services, priority: str
) -> None:
    job = send(client, priority=priority).get_json()
    assert job["priority"] == priority
    assert services.queue.depths()[priority] == 1


def test_an_unknown_priority_is_refused(client: FlaskClient) -> None:
    answer = send(client, priority="highest")
    assert answer.status_code == 400
    assert answer.get_json()["errors"][0]["parameter"] == "priority"


def test_hundreds_of_jobs_leave_the_interactive_line_to_others(guarded: Guarded) -> None:
    """Also when they ask for it: only a few of one token stand there at a time."""
    client, tokens = guarded(interactive_jobs=2)
    jobs = [send(client, tokens["ana"], priority=INTERACTIVE).get_json() for _ in range(5)]
    assert [job["priority"] for job in jobs] == [INTERACTIVE] * 2 + [BULK] * 3
    assert send(client, tokens["ben"]).get_json()["priority"] == INTERACTIVE
    client.delete(jobs[0]["links"]["self"], headers=tokens["ana"])
    assert send(client, tokens["ana"]).get_json()["priority"] == INTERACTIVE


def test_colleagues_in_one_workspace_have_places_of_their_own(
    guarded: Guarded, settings: Settings
) -> None:
    client, tokens = guarded(interactive_jobs=1)
    service: Services = client.application.extensions[KEY]
    text = service.tokens.add("eve", "submit", "ana")[1]
    assert send(client, tokens["ana"]).get_json()["priority"] == INTERACTIVE
    assert send(client, tokens["ana"]).get_json()["priority"] == BULK
    eve = send(client, {"Authorization": f"Bearer {text}"}).get_json()
    assert (eve["priority"], eve["workspace"]) == (INTERACTIVE, "ana")


def test_a_finished_job_frees_its_place(
    client: FlaskClient, services: Services, finish: Callable[[str], None]
) -> None:
    most = services.settings.interactive_jobs
    jobs = [send(client).get_json() for _ in range(most + 1)]
    assert [job["priority"] for job in jobs] == [INTERACTIVE] * most + [BULK]
    finish(jobs[0]["id"])
    services.store.transition(jobs[1]["id"], CANCELLED)
    again = [send(client).get_json()["priority"] for _ in range(3)]
    assert again == [INTERACTIVE, INTERACTIVE, BULK]


# --- sizes ---------------------------------------------------------------------------------------


def test_a_job_that_is_too_large_is_refused_before_it_is_meshed(guarded: Guarded) -> None:
    """5 x 2 Q8 have 11 x 5 - 10 = 45 nodes; a patch may ask for a hundred million."""
    client, tokens = guarded(most_nodes=45, most_cases=1, most_dofs=90)
    assert send(client, tokens["ana"]).status_code == 202
    document = strip()
    document["geometry"]["patches"][0]["divisions"] = [10_000, 2_000]
    document["combinations"] = {"twice": {"pull": 2}}
    answer = client.post("/v1/jobs", json=document, headers=tokens["ana"])
    assert answer.status_code == 413
    errors = {e["pointer"]: e["message"] for e in answer.get_json()["errors"]}
    assert "60024001 nodes" in errors["/geometry/patches"]  # 20001 x 4001 - 10000 x 2000
    assert "FISHPLATE_MOST_NODES" in errors["/geometry/patches"]
    assert "2 load cases" in errors["/load_cases"]


def test_degrees_of_freedom_are_limited_too(guarded: Guarded) -> None:
    client, tokens = guarded(most_dofs=89)
    answer = send(client, tokens["ana"])
    assert answer.status_code == 413
    assert "90 degrees of freedom" in answer.get_json()["errors"][0]["message"]

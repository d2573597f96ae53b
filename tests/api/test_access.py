"""Who may do what: with tokens, and without any on one's own machine."""

import base64
import json
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest
from flask import Flask
from flask.testing import FlaskClient

from api.access import OPEN
from api.app import create_app
from api.exposure import is_loopback
from api.services import Services
from tests.job_documents import strip
from workers.errors import SettingsError
from workers.record import CANCELLED
from workers.settings import Settings

Ask = Callable[..., Any]
Tokens = dict[str, str]


@pytest.fixture
def ask(client: FlaskClient, tokens: Tokens) -> Ask:
    """A request with the token of a name."""

    def send(who: str, method: str, path: str, **options: Any) -> Any:
        headers = {"Authorization": f"Bearer {tokens[who]}", **options.pop("headers", {})}
        return client.open(path, method=method, headers=headers, buffered=True, **options)

    return send


@pytest.fixture
def job(ask: Ask) -> str:
    """Address of a job that the token "submit" brought, in the workspace "default"."""
    address: str = ask("submit", "POST", "/v1/jobs", json=strip()).headers["Location"]
    return address


# --- without tokens ------------------------------------------------------------------------------


@pytest.mark.parametrize("host", ["localhost", "127.0.0.1:8470", "[::1]:8470", "LOCALHOST"])
def test_without_tokens_whoever_is_on_this_machine_may_do_everything(
    client: FlaskClient, host: str
) -> None:
    address = client.post("/v1/jobs", json=strip(), headers={"Host": host}).headers["Location"]
    assert client.delete(address, headers={"Host": host}).status_code == 200


@pytest.mark.parametrize(
    "request_of",
    [
        {"environ_base": {"REMOTE_ADDR": "192.0.2.7"}},
        {"headers": {"X-Forwarded-For": "192.0.2.7"}},
        {"headers": {"Forwarded": "for=192.0.2.7"}},
        # A page in a browser on this machine, whose own name now leads here (DNS rebinding).
        {"headers": {"Host": "slipway.example"}},
        {"headers": {"Host": "localhost.slipway.example"}},
        {"headers": {"Host": "["}},
    ],
    ids=["from elsewhere", "forwarded", "forwarded by RFC 7239", "rebound", "similar", "no name"],
)
def test_without_tokens_nobody_else_gets_in(
    client: FlaskClient, request_of: dict[str, Any]
) -> None:
    answer = client.get("/v1/jobs", **request_of)
    assert answer.status_code == 401
    assert "fishplate tokens add" in answer.get_json()["detail"]
    assert answer.headers["WWW-Authenticate"].startswith("Bearer ")
    assert client.get("/health/live", **request_of).status_code == 200


@pytest.mark.parametrize("host", ["0.0.0.0", "::", "", "192.0.2.7"])
def test_listening_beyond_this_machine_needs_a_token_first(
    settings: Settings, services: Services, host: str
) -> None:
    public = replace(settings, host=host)
    with pytest.raises(SettingsError, match="fishplate tokens add"):
        create_app(public)
    services.tokens.add("ana", "submit")
    create_app(public)
    services.tokens.revoke("ana")
    with pytest.raises(SettingsError, match="there is no token"):
        create_app(public)


def test_loopback_is_told_from_other_addresses() -> None:
    """RFC 1122 section 3.2.1.3: all of 127/8; RFC 4291 section 2.5.3: ::1."""
    assert all(map(is_loopback, ("127.0.0.1", "127.8.9.1", "::1", "localhost")))
    assert not any(map(is_loopback, ("0.0.0.0", "::", "", "10.0.0.1", "no.such.host.invalid")))


# --- with tokens ---------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "header",
    [None, "", "Bearer", "Bearer ", "Basic", "Basic !", "Digest x", "Basic YTpi",
     "Bearer nonsense", "Bearer fishplate_0_0", "Bearer fishplate_00000000_" + "0" * 64],
)  # fmt: skip
def test_a_guarded_server_answers_401_to_whoever_has_no_good_token(
    client: FlaskClient, tokens: Tokens, header: str | None
) -> None:
    """RFC 6750 section 3: the challenge names an error only where a token was sent."""
    headers = {} if header is None else {"Authorization": header}
    answer = client.get("/v1/jobs", headers=headers)
    assert answer.status_code == 401
    challenge = answer.headers["WWW-Authenticate"]
    assert challenge.startswith('Bearer realm="fishplate"')
    was_sent = header not in (None, "", "Bearer", "Bearer ", "Basic", "Basic !", "Digest x")
    assert ('error="invalid_token"' in challenge) == was_sent


def test_the_scheme_is_read_in_any_case(client: FlaskClient, tokens: Tokens) -> None:
    """RFC 9110 section 11.1: the name of the scheme is case-insensitive."""
    for scheme in ("Bearer", "bearer", "BEARER"):
        headers = {"Authorization": f"{scheme} {tokens['read']}"}
        assert client.get("/v1/jobs", headers=headers).status_code == 200


def test_a_person_with_a_browser_is_asked_and_gives_the_token_as_the_password(
    client: FlaskClient, tokens: Tokens
) -> None:
    """RFC 7617: the browser asks by itself, and sends user name and password joined by a colon."""
    browser = {"Accept": "text/html,application/xhtml+xml,*/*;q=0.8"}
    asked = client.get("/", headers=browser)
    assert asked.status_code == 401
    assert asked.headers["WWW-Authenticate"].startswith("Basic realm=")
    for name, status in (("read", 200), ("wrong", 401)):
        secret = base64.b64encode(f"ana:{tokens.get(name, name)}".encode()).decode()
        answer = client.get("/", headers={**browser, "Authorization": f"Basic {secret}"})
        assert answer.status_code == status


def test_a_token_in_the_address_is_not_taken(client: FlaskClient, tokens: Tokens) -> None:
    """RFC 6750 section 2.3 advises against it: addresses end up in logs."""
    assert client.get(f"/v1/jobs?access_token={tokens['read']}").status_code == 401


def test_a_reader_looks_and_changes_nothing(ask: Ask, job: str) -> None:
    assert ask("read", "GET", job).status_code == 200
    for method, path in (("DELETE", job), ("PUT", f"{job}/pin"), ("POST", "/v1/jobs")):
        answer = ask("read", method, path)
        assert answer.status_code == 403
        challenge = answer.headers["WWW-Authenticate"]
        assert 'error="insufficient_scope", scope="submit"' in challenge
    assert ask("read", "GET", job).get_json()["state"] == "queued"


def test_jobs_of_another_workspace_do_not_exist(ask: Ask, job: str) -> None:
    """Answered as an id that no job has, so that nobody learns that it is one."""
    unknown = job[:-1] + ("0" if job[-1] != "0" else "1")
    for method, tail in (("GET", ""), ("DELETE", ""), ("PUT", "/pin"), ("GET", "/results")):
        there = ask("other", method, job + tail)
        nowhere = ask("other", method, unknown + tail)
        assert there.status_code == nowhere.status_code == 404
        texts = [a.text.replace(p, "JOB") for a, p in ((there, job), (nowhere, unknown))]
        ids = (job.rsplit("/", 1)[1], unknown.rsplit("/", 1)[1])
        assert texts[0].replace(ids[0], "ID") == texts[1].replace(ids[1], "ID")
    assert ask("other", "GET", "/v1/jobs").get_json()["jobs"] == []
    assert len(ask("read", "GET", "/v1/jobs").get_json()["jobs"]) == 1


def test_an_admin_sees_and_cancels_the_jobs_of_every_workspace(
    ask: Ask, job: str, services: Services
) -> None:
    elsewhere = ask("other", "POST", "/v1/jobs", json=strip()).headers["Location"]
    listed = ask("admin", "GET", "/v1/jobs").get_json()["jobs"]
    assert {j["workspace"] for j in listed} == {"default", "elsewhere"}
    assert ask("admin", "DELETE", elsewhere).status_code == 200
    assert services.store.record(elsewhere.rsplit("/", 1)[1]).state == CANCELLED


def test_a_key_used_in_another_workspace_tells_nothing(ask: Ask) -> None:
    first = ask("submit", "POST", "/v1/jobs", json=strip(), headers={"Idempotency-Key": "one"})
    other = ask(
        "other", "POST", "/v1/jobs", json=strip(force=1.0), headers={"Idempotency-Key": "one"}
    )
    assert (first.status_code, other.status_code) == (202, 202)


def test_a_job_says_whose_it_is(ask: Ask, job: str) -> None:
    shown = ask("read", "GET", job).get_json()
    assert (shown["owner"], shown["workspace"]) == ("submit", "default")


def test_a_revoked_token_is_refused_with_the_next_request(
    ask: Ask, job: str, services: Services
) -> None:
    services.tokens.revoke("submit")
    assert ask("submit", "GET", job).status_code == 401


def test_the_server_stays_guarded_when_the_last_token_is_revoked(
    client: FlaskClient, services: Services
) -> None:
    services.tokens.add("ana", "submit")
    services.tokens.revoke("ana")
    assert client.get("/v1/jobs").status_code == 401


def test_a_damaged_token_file_lets_nobody_in(client: FlaskClient, services: Services) -> None:
    services.tokens.add("ana", "submit")
    services.tokens.path.write_text("{")
    answer = client.get("/v1/jobs")
    assert answer.status_code == 503
    assert "nobody is let in" in answer.get_json()["detail"]


def test_what_needs_no_token_holds_nothing_of_any_job(app: Flask, tokens: Tokens) -> None:
    addresses = {rule.rule for rule in app.url_map.iter_rules() if rule.endpoint in OPEN}
    assert addresses == {"/health/live", "/openapi.json", "/docs"}
    for address in addresses:
        assert app.test_client().get(address).status_code == 200


# --- the audit log -------------------------------------------------------------------------------


def test_the_audit_log_says_who_submitted_pinned_cancelled_and_removed(
    ask: Ask, job: str, services: Services
) -> None:
    for method, path in (
        ("PUT", f"{job}/pin"), ("PUT", f"{job}/pin"), ("DELETE", f"{job}/pin"), ("DELETE", job)
    ):  # fmt: skip
        assert ask("submit", method, path).status_code == 200
    assert ask("other", "DELETE", job).status_code == 404
    assert ask("admin", "DELETE", job, headers={"X-Request-Id": "r-1"}).status_code == 200
    (path,) = services.audit.folder.iterdir()
    entries = [json.loads(line) for line in path.read_text().splitlines()]
    done = [(entry["who"], entry["action"]) for entry in entries]
    assert done == [
        ("submit", "submitted"),
        ("submit", "pinned"),
        ("submit", "unpinned"),
        ("submit", "cancelled"),
        ("admin", "removed"),
    ]
    assert {entry["job"] for entry in entries} == {job.rsplit("/", 1)[1]}
    assert entries[0]["address"] == "127.0.0.1"
    assert entries[-1]["request"] == "r-1"


def test_a_repeated_submission_is_in_the_audit_log_once(ask: Ask, services: Services) -> None:
    for _ in range(2):
        ask("submit", "POST", "/v1/jobs", json=strip(), headers={"Idempotency-Key": "one"})
    (path,) = services.audit.folder.iterdir()
    assert len(path.read_text().splitlines()) == 1


# --- pins ----------------------------------------------------------------------------------------


def test_a_pinned_job_is_cancelled_but_not_removed(client: FlaskClient, post: Ask) -> None:
    address = post().headers["Location"]
    pin = post().get_json()["links"]["pin"]
    assert pin.endswith("/pin")
    assert client.put(f"{address}/pin").get_json()["pinned"] is True
    assert client.delete(address).get_json()["done"] == "cancelled"
    answer = client.delete(address)
    assert answer.status_code == 409
    assert answer.get_json()["type"].endswith("#problem-pinned")
    assert client.delete(f"{address}/pin").get_json()["pinned"] is False
    assert client.delete(address).get_json()["done"] == "removed"

"""Every request has a name, which comes back and stands in the log."""

import logging
import re
from collections.abc import Callable
from typing import Any

import pytest
from flask.testing import FlaskClient

from api.services import Services

HEADER = "X-Request-Id"


def test_the_name_that_a_client_gives_comes_back(client: FlaskClient) -> None:
    for path in ("/health/live", "/v1/jobs/unknown", "/nowhere"):
        answer = client.get(path, headers={HEADER: "Order-17.b_2"})
        assert answer.headers[HEADER] == "Order-17.b_2"


@pytest.mark.parametrize("given", [None, "", "a b", "x" * 65, "é", '{"a":1}', "<b>"])
def test_a_name_that_is_none_is_replaced(client: FlaskClient, given: str | None) -> None:
    """What comes from outside must be harmless in a header, a log and an audit line."""
    answer = client.get("/health/live", headers={} if given is None else {HEADER: given})
    assert re.fullmatch("[0-9a-f]{16}", answer.headers[HEADER])


def test_each_request_is_logged_with_its_name_and_what_became_of_it(
    client: FlaskClient, post: Callable[..., Any], caplog: pytest.LogCaptureFixture
) -> None:
    job_id = post().get_json()["id"]
    with caplog.at_level(logging.INFO, "api.access"):
        client.get(f"/v1/jobs/{job_id}/results", headers={HEADER: "r-1"})
        client.get("/health/live")
    (record,) = caplog.records
    facts = record.facts  # type: ignore[attr-defined]
    assert (facts["method"], facts["status"], facts["job"]) == ("GET", 409, job_id)
    assert facts["path"] == f"/v1/jobs/{job_id}/results"
    assert facts["milliseconds"] > 0.0


def test_a_refused_request_is_logged_without_its_token(
    client: FlaskClient, services: Services, caplog: pytest.LogCaptureFixture
) -> None:
    services.tokens.add("ana", "read")
    with caplog.at_level(logging.DEBUG):
        client.get("/v1/jobs", headers={"Authorization": "Bearer secret-text"})
    assert any(getattr(r, "facts", {}).get("status") == 401 for r in caplog.records)
    assert "secret-text" not in "".join(f"{r.getMessage()}{r.__dict__}" for r in caplog.records)

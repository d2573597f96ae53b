"""The review sheet and the archive over HTTP."""

import io
from collections.abc import Callable
from typing import Any
from zipfile import ZipFile

import pytest
from flask.testing import FlaskClient
from werkzeug.test import TestResponse

from api.services import Services
from tests.small_results import RESULTS
from workers.outputs.archive import MANIFEST
from workers.queue import Answer
from workers.record import FAILED, RUNNING

Get = Callable[..., TestResponse]


@pytest.fixture
def get(client: FlaskClient, post: Callable[..., Any], finish: Callable[[str], None]) -> Get:
    """Ask for something of a finished job, by the links that its description gives."""
    job = post().get_json()
    finish(job["id"])

    def fetch(link: str, **headers: str) -> TestResponse:
        named = {name.replace("_", "-"): value for name, value in headers.items()}
        return client.get(job["links"][link], headers=named, buffered=True)

    return fetch


def test_the_sheet_is_the_page_that_the_worker_wrote(get: Get) -> None:
    answer = get("sheet")
    assert (answer.data, answer.mimetype) == (b"sheet.html", "text/html")
    assert 'rel="describedby"' in answer.headers["Link"]


def test_a_browser_is_told_that_the_sheet_needs_nothing_and_runs_nothing(get: Get) -> None:
    """W3C, Content Security Policy 3: no directive allows scripts, forms, frames or the network."""
    policy = dict(
        part.split(None, 1) for part in get("sheet").headers["Content-Security-Policy"].split(";")
    )
    assert policy["default-src"] == "'none'"
    assert policy["img-src"] == "data:"
    assert "script-src" not in policy
    assert policy["frame-ancestors"] == policy["form-action"] == "'none'"


def test_a_sheet_that_is_not_there_is_made_by_a_worker(
    get: Get, services: Services, monkeypatch: pytest.MonkeyPatch
) -> None:
    def make(job: str, kind: str, case: str, quantity: str | None, *, wait: float) -> Answer:
        assert kind == "sheet"
        (services.store.results_path(job) / "sheet.html").write_bytes(b"made anew")
        return Answer("done", value={"ok": True})

    (record,) = services.store.list().records
    (services.store.results_path(record.id) / "sheet.html").unlink()
    monkeypatch.setattr(services.queue, "make_artefact", make)
    assert get("sheet").data == b"made anew"


def test_the_archive_holds_what_was_published(get: Get) -> None:
    answer = get("archive")
    assert answer.mimetype == "application/zip"
    assert "attachment" in answer.headers["Content-Disposition"]
    with ZipFile(io.BytesIO(answer.data)) as archive:
        assert archive.testzip() is None
        assert {MANIFEST, "results.json", "sheet.html", "fields/pull.vtu"} <= {*archive.namelist()}


def test_an_unchanged_archive_is_not_sent_again(get: Get, services: Services) -> None:
    """RFC 9110 section 13.1.2; a file that was made meanwhile is a change."""
    etag = get("archive").headers["ETag"]
    assert get("archive", If_None_Match=etag).status_code == 304
    (record,) = services.store.list().records
    (services.store.results_path(record.id) / "fields" / "new.vtu").write_bytes(b"new")
    assert get("archive", If_None_Match=etag).status_code == 200


@pytest.mark.parametrize("path", ["sheet", "archive.zip"])
def test_a_job_without_results_has_neither(
    client: FlaskClient, post: Callable[..., Any], services: Services, path: str
) -> None:
    here = post().headers["Location"]
    assert client.get(f"{here}/{path}").status_code == 409
    services.store.transition(here.rsplit("/", 1)[1], RUNNING)
    services.store.transition(here.rsplit("/", 1)[1], FAILED, reason="free to move")
    assert client.get(f"{here}/{path}").get_json()["detail"] == "free to move"


def test_results_name_the_sheet_and_the_tables(get: Get) -> None:
    files = get("results").get_json()["files"]
    assert files["sheet"] == RESULTS["files"]["sheet"]
    assert files["tables"]

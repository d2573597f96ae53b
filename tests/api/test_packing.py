"""Answers packed with gzip: the same content, fewer bytes, and only for who asks."""

import gzip
from collections.abc import Callable
from typing import Any

import pytest
from flask import Flask, Response
from flask.testing import FlaskClient

from api.packing import pack
from tests.small_results import RESULTS

GZIP = {"Accept-Encoding": "gzip"}


@pytest.fixture
def finished(post: Callable[..., Any], finish: Callable[[str], None]) -> str:
    """Address of a finished job."""
    job = post().get_json()
    finish(job["id"])
    address: str = job["links"]["self"]
    return address


def test_results_are_packed_for_who_asks(client: FlaskClient, finished: str) -> None:
    plain = client.get(f"{finished}/results", buffered=True)
    packed = client.get(f"{finished}/results", headers=GZIP, buffered=True)
    assert packed.headers["Content-Encoding"] == "gzip"
    assert gzip.decompress(packed.data) == plain.data
    assert len(packed.data) < len(plain.data)
    assert plain.get_json() == RESULTS
    assert "Content-Encoding" not in plain.headers
    for answer in (plain, packed):
        assert "Accept-Encoding" in answer.headers["Vary"]
        assert "describedby" in answer.headers["Link"]


@pytest.mark.parametrize("path", ["/openapi.json", "/docs", "/v1/cautions", "/metrics"])
def test_all_long_text_is_packed(client: FlaskClient, path: str) -> None:
    packed = client.get(path, headers=GZIP)
    assert packed.headers["Content-Encoding"] == "gzip"
    assert int(packed.headers["Content-Length"]) == len(packed.data)
    assert gzip.decompress(packed.data)[:1] in (b"{", b"<", b"#")


@pytest.mark.parametrize(
    "wish", [None, "identity", "br", "gzip;q=0", "deflate, gzip;q=0.0", "nonsense,,;;"]
)
def test_nobody_gets_what_he_did_not_ask_for(client: FlaskClient, wish: str | None) -> None:
    """RFC 9110 section 12.5.3: a weight of 0 is a refusal."""
    answer = client.get("/openapi.json", headers={} if wish is None else {"Accept-Encoding": wish})
    assert "Content-Encoding" not in answer.headers


def test_short_answers_and_binary_files_are_sent_as_they_are(
    client: FlaskClient, finished: str
) -> None:
    for path in ("fields/pull.vtu", "previews/pull/model.png"):
        answer = client.get(f"{finished}/{path}", headers=GZIP, buffered=True)
        assert "Content-Encoding" not in answer.headers
    with Flask("test").test_request_context(headers=GZIP):
        assert "Content-Encoding" not in pack(Response(b"{}", mimetype="application/json")).headers


def test_an_unchanged_answer_is_not_sent_again_packed_or_not(
    client: FlaskClient, finished: str
) -> None:
    """The tag of the packed one is weak (RFC 9110 section 8.8.1), and compared so (13.1.2)."""
    tag = client.get(f"{finished}/results", headers=GZIP, buffered=True).headers["ETag"]
    assert tag.startswith("W/")
    for headers in ({"If-None-Match": tag}, {"If-None-Match": tag, **GZIP}):
        again = client.get(f"{finished}/results", headers=headers, buffered=True)
        assert (again.status_code, again.data) == (304, b"")
        assert "Accept-Encoding" in again.headers["Vary"]


def test_a_part_of_the_results_is_a_part_of_the_file(client: FlaskClient, finished: str) -> None:
    """RFC 9110 section 14.2: also where the client would take gzip."""
    whole = client.get(f"{finished}/results", buffered=True)
    headers = {"Range": "bytes=10-29", "If-Range": whole.headers["ETag"], **GZIP}
    part = client.get(f"{finished}/results", headers=headers, buffered=True)
    assert (part.status_code, part.data) == (206, whole.data[10:30])
    assert part.headers["Content-Range"] == f"bytes 10-29/{len(whole.data)}"
    beyond = client.get(f"{finished}/results", headers={"Range": "bytes=999999-"}, buffered=True)
    assert beyond.status_code == 416


def test_the_file_is_closed_when_it_was_sent_or_given_up(app: Flask, tmp_path: Any) -> None:
    """Else every packed answer would leave a descriptor open."""
    closed = []

    class Body:
        def __iter__(self) -> Any:
            return iter([b"x" * 5000, b"y" * 5000])

        def close(self) -> None:
            closed.append(True)

    with app.test_request_context(headers=GZIP):
        answer = pack(Response(Body(), mimetype="application/json", direct_passthrough=True))
        assert gzip.decompress(b"".join(answer.iter_encoded())) == b"x" * 5000 + b"y" * 5000
        answer.close()
    assert closed == [True]

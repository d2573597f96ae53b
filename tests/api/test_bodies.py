"""Request bodies: encodings, media types and limits."""

import gzip
import random

import pytest
from flask import Flask, request
from flask.testing import FlaskClient

from api.bodies import gunzip, read_document_bytes
from api.problem_types import BODY_TOO_LARGE, MEDIA_TYPE_UNKNOWN
from api.problems import RefusalError

LIMIT = 1000


def read(data: bytes, **headers: str) -> bytes:
    named = {name.replace("_", "-"): value for name, value in headers.items()}
    with Flask("test").test_request_context("/", method="POST", data=data, headers=named):
        return read_document_bytes(request, LIMIT)


@pytest.mark.parametrize("size", [0, 1, LIMIT - 1, LIMIT])
def test_gzip_of_up_to_the_limit_is_unpacked(size: int) -> None:
    data = bytes(range(256)) * 4
    packed = gzip.compress(data[:size])
    assert read(packed, Content_Type="application/json", Content_Encoding="gzip") == data[:size]


@pytest.mark.parametrize("size", [65_535, 65_536, 300_000])
def test_what_does_not_pack_is_unpacked_piece_by_piece(size: int) -> None:
    """Noise: the packed data is longer than one piece, and cut at any place."""
    data = random.Random(size).randbytes(size)
    assert gunzip(gzip.compress(data), size) == data


def test_gzip_bomb_is_refused_before_it_unpacks() -> None:
    """100 MB of zeros pack into 100 kB; no more than limit + 1 bytes of them may ever exist."""
    bomb = gzip.compress(bytes(100_000_000), compresslevel=1)
    with pytest.raises(RefusalError, match=str(LIMIT)) as refusal:
        gunzip(bomb, LIMIT)
    assert refusal.value.kind is BODY_TOO_LARGE


@pytest.mark.parametrize(
    "data", [b"", b"{}", gzip.compress(b"{}")[:-1], gzip.compress(b"{}") + b"x"],
    ids=["empty", "plain", "cut short", "followed by a byte"],
)  # fmt: skip
def test_what_is_not_exactly_gzip_is_refused(data: bytes) -> None:
    with pytest.raises(RefusalError) as refusal:
        gunzip(data, LIMIT)
    assert refusal.value.kind is MEDIA_TYPE_UNKNOWN


def test_other_encodings_are_answered_with_those_allowed() -> None:
    """RFC 9110 section 12.5.3: a 415 because of the coding should carry Accept-Encoding."""
    with pytest.raises(RefusalError) as refusal:
        read(b"{}", Content_Type="application/json", Content_Encoding="br")
    assert refusal.value.headers == {"Accept-Encoding": "gzip, identity"}


@pytest.mark.parametrize("media", ["text/plain", "application/x-www-form-urlencoded", ""])
def test_other_media_types_are_refused(media: str) -> None:
    with pytest.raises(RefusalError) as refusal:
        read(b"{}", Content_Type=media)
    assert refusal.value.kind is MEDIA_TYPE_UNKNOWN


def test_a_charset_after_the_media_type_does_no_harm() -> None:
    assert read(b"{}", Content_Type="application/json; charset=utf-8") == b"{}"


@pytest.mark.parametrize("depth", [50, 1000, 15_000])  # the last fills what is allowed here
@pytest.mark.parametrize("opening", ["[", '{"a":'])
@pytest.mark.parametrize("place", ["", '{"supports": ', '{"geometry": {"mesh": {"nodes": '])
def test_a_deeply_nested_document_is_a_fault_and_nothing_more(
    client: FlaskClient, depth: int, opening: str, place: str
) -> None:
    """Neither the stack nor the time of the server is used up, closed or not."""
    closing = "]" if opening == "[" else "}"
    for text in (
        place + opening * depth,
        place + opening * depth + "1" + closing * depth + "}" * place.count("{"),
    ):
        answer = client.post("/v1/jobs", data=text, content_type="application/json")
        assert answer.status_code == 422
        assert answer.get_json()["errors"]

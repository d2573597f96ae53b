"""Bytes to JSON: what is not strict JSON is refused, and the fault says where."""

import json
from typing import Any

import pytest

from tests.good_documents import KINDS, good
from workers.document.parse import parse, parse_leniently
from workers.document.read import read_document
from workers.errors import DocumentError


def faults_of(data: bytes) -> list[tuple[str, str]]:
    with pytest.raises(DocumentError) as caught:
        parse(data)
    return [(fault.pointer, fault.message) for fault in caught.value.faults]


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("options", [{}, {"ensure_ascii": False}, {"indent": 3}])
def test_what_the_standard_library_writes_is_read_as_it_reads_it(kind: str, options: Any) -> None:
    """Oracle: json.loads of the standard library, an implementation of its own."""
    text = json.dumps(good(kind), **options)
    assert parse(text.encode()) == json.loads(text)


def test_a_byte_order_mark_is_passed_over() -> None:
    """RFC 8259, section 8.1, lets a parser ignore it."""
    assert parse(b'\xef\xbb\xbf{"title": "a"}') == {"title": "a"}


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"", "empty"),
        (b"{", "line 1 column"),
        (b'{"a": 1}\n{"b": 2}', "line 2 column 1"),
        (b"{'a': 1}", "line 1 column 2"),
        (b'{"a": 1,}', "line 1 column"),
        (b'{"a": 01}', "line 1 column"),
        (b'{"a": "\xff"}', "UTF-8"),
        (b'{"a": "\\ud800"}', "surrogate"),
        (b"[" * 5000 + b"]" * 5000, "depth"),
    ],
)
def test_what_is_no_json_is_one_fault_of_the_whole_document(data: bytes, words: str) -> None:
    ((pointer, message),) = faults_of(data)
    assert pointer == ""
    assert "not JSON" in message
    assert words in message


@pytest.mark.parametrize("literal", ["NaN", "Infinity", "-Infinity", "1e999", "-1.5e400"])
def test_numbers_that_are_none_are_found_in_their_places(literal: str) -> None:
    """RFC 8259, section 6: no NaN, no infinities; 1e999 is beyond IEEE double precision."""
    text = json.dumps(good("mesh")).replace("[2, 1.5]", f"[2, {literal}]")
    ((pointer, message),) = faults_of(text.encode())
    assert pointer == "/geometry/mesh/nodes/5/1"
    assert "finite" in message


def test_all_numbers_that_are_none_are_reported_once_beside_the_other_faults() -> None:
    document = good("mesh")
    document["plate"]["thickness"] = float("nan")
    document["geometry"]["mesh"]["nodes"][0][1] = float("inf")
    document["materials"]["steel"]["poissons_ratio"] = 2
    with pytest.raises(DocumentError) as caught:
        read_document(json.dumps(document).encode())
    assert [fault.pointer for fault in caught.value.faults] == [
        "/materials/steel/poissons_ratio",
        "/geometry/mesh/nodes/0/1",
        "/plate/thickness",
    ]


@pytest.mark.parametrize(
    ("data", "pointers"),
    [
        (b'{"a": 1, "a": 1}', ["/a"]),
        (b'{"a": {"b": 1, "c": [{"d": 1, "d": 2}], "b": 2}}', ["/a/b", "/a/c/0/d"]),
        (b'{"a": 1, "\\u0061": 2}', ["/a"]),
        (b'{"a/b": 1, "a/b": 2, "~": 3, "~": 4}', ["/a~1b", "/~0"]),
        (b'{"a": [[1, {"b": 1, "b": 2}]]}', ["/a/0/1/b"]),
    ],
)
def test_a_key_that_stands_twice_is_a_fault(data: bytes, pointers: list[str]) -> None:
    """RFC 8259, section 4: names should be unique; which one counts is not defined."""
    found = faults_of(data)
    assert sorted(pointer for pointer, _ in found) == pointers
    assert all("more than once" in message for _, message in found)


def test_text_that_looks_like_a_key_is_no_key() -> None:
    document = {"title": 'a ": b', "note": ['"x" : 1', {'odd": "name': 1}]}
    assert parse(json.dumps(document).encode()) == document


@pytest.mark.parametrize("opening", ["[", '{"a":'])
def test_levels_are_counted(opening: str) -> None:
    """Three objects or lists within each other are three levels; a number in them is none."""
    closing = "]" if opening == "[" else "}"
    data = (opening * 3 + "1" + closing * 3).encode()
    parse_leniently(data, 3)
    with pytest.raises(DocumentError, match="more than 2 levels"):
        parse_leniently(data, 2)


def test_levels_hidden_behind_wide_lists_are_found() -> None:
    data = b'{"nodes": [' + b"[0, 0]," * 1000 + b'[0, [[["]]]"]]]]]}'
    parse_leniently(data, 6)
    with pytest.raises(DocumentError, match="more than 5 levels"):
        parse_leniently(data, 5)


@pytest.mark.parametrize("kind", KINDS)
def test_good_documents_have_few_levels(kind: str) -> None:
    """A server may allow as few as eight (workers/settings.py)."""
    parse_leniently(json.dumps(good(kind)).encode(), 7)

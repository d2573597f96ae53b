"""Whatever is sent, the answer is a job or a list of faults, never another error."""

import json
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.good_documents import KINDS, good
from workers.document.read import load, read_document
from workers.errors import DocumentError
from workers.job import Job

BYTES = {kind: json.dumps(good(kind)).encode() for kind in KINDS}
SIGNS = b'{}[]",:0123456789.-+eE \\untrfalse/~NaN\x00\xff'

JSON = st.recursive(
    st.none() | st.booleans() | st.integers(-(10**40), 10**40) | st.floats()
    | st.text(max_size=8) | st.sampled_from(["5 mm", "2 kN", "pin", "_schema", "", "Q8", "nose"]),
    lambda inner: st.lists(inner, max_size=4)
    | st.dictionaries(st.sampled_from(["on", "from", "name", "_schema", "a/b", "~", "x"]), inner,
                      max_size=3),
    max_leaves=8,
)  # fmt: skip


def answer(read: Any, document: Any) -> None:
    """A job, or faults that can be sent: a pointer and words, both of printable Unicode."""
    try:
        outcome = read(document)
    except DocumentError as error:
        outcome = error
    if isinstance(outcome, Job):
        return
    assert outcome.faults
    for fault in outcome.faults:
        assert fault.pointer == "" or fault.pointer.startswith("/")
        assert fault.message
        json.dumps(fault.as_json(), ensure_ascii=False).encode("utf-8")


@st.composite
def mutated_bytes(draw: st.DrawFn) -> bytes:
    data = bytearray(BYTES[draw(st.sampled_from(KINDS))])
    for _ in range(draw(st.integers(1, 6))):
        start = draw(st.integers(0, len(data) - 1))
        end = draw(st.integers(start, min(start + 40, len(data))))
        other = draw(st.integers(0, len(data) - 1))
        change = draw(st.sampled_from(["cut", "set", "insert", "copy"]))
        if change == "cut":
            del data[start:end]
        elif change == "set":
            data[start] = draw(st.sampled_from(SIGNS))
        elif change == "insert":
            data[start:start] = draw(st.binary(max_size=4) | st.sampled_from([b"NaN", b'"on":1,']))
        else:
            data[other:other] = data[start:end]
    return bytes(data)


@given(mutated_bytes())
def test_damaged_bytes_give_a_job_or_faults(data: bytes) -> None:
    answer(read_document, data)


@given(st.binary(max_size=60))
def test_any_bytes_give_faults(data: bytes) -> None:
    with pytest.raises(DocumentError):
        read_document(data)


@st.composite
def mutated_documents(draw: st.DrawFn) -> Any:
    document: Any = good(draw(st.sampled_from(KINDS)))
    for _ in range(draw(st.integers(1, 3))):
        place = document
        while isinstance(place, dict | list) and place:
            key = draw(st.sampled_from(sorted(place) if isinstance(place, dict) else
                                       range(len(place))))  # fmt: skip
            if draw(st.integers(0, 3)) == 0 or not isinstance(place[key], dict | list):
                place[key] = draw(JSON)
                break
            place = place[key]
    return document


@given(mutated_documents())
def test_any_value_in_any_place_gives_a_job_or_faults(document: Any) -> None:
    answer(load, document)


@given(JSON)
def test_any_json_value_gives_faults(document: Any) -> None:
    with pytest.raises(DocumentError):
        load(document)

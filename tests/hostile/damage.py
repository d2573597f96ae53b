"""Damage to job documents: values that no reader expects, parts torn out, bytes at random."""

import copy
import gzip
import json
from collections.abc import Callable
from random import Random
from typing import Any

Json = Any

DEEP: Json = 1
for _ in range(60):
    DEEP = [DEEP] if _ % 2 else {"on": DEEP}

# Written as they stand, so that JSON can say what Python cannot.
VALUES = (
    "null", "true", "0", "-0", "-0.0", "1", "-1", "1.5", "1e308", "-1e308", "1e309", "1e-320",
    "5e-324", "NaN", "-Infinity", "9007199254740993", "18446744073709551616",
    "-9223372036854775809",
    "1" + "0" * 400, "0." + "0" * 400 + "1", '""', '" "', '"."', '".."', '"../../etc/passwd"',
    '"a/b"', r'"\u0000"', r'"\ud800"', r'"\u202e"', r'"\ufeff"', r'"\r\nSet-Cookie: a=b"',
    '"<script>alert(1)</script>"', '"{{7*7}}"', '"=1+1"', '"%n%s"', '"1 mm"', '"1e400 mm"',
    '"-1 GPa"', '"1 mm^99"', '"nan mm"', '"inf N"', '"' + "x" * 5000 + '"', '"' + "é" * 300 + '"',
    "[]", "{}",
    "[[]]", "[null]", "[" + "0," * 999 + "0]", '{"_schema": 1}', '{"": 0}', '{"a": 1, "a": 2}',
    '{"circle": {"centre": [0, 0], "radius": 1}}', '{"nodes": [0]}', '{"from": 0, "to": 1}',
    '"all"', '"Q8"', '"T3"', '"case,pull\\na,1\\n"', '"pull"', "[0, 0]", "[1e308, -1e308]",
    "[1e-308, 1e-308]", json.dumps(DEEP),
)  # fmt: skip
TOKENS = (b"NaN", b'"on":1,', b"\x00", b"\xff\xfe", b"\xc3", b"}", b"[", b'"', b"\\", b"\\u", b"-",
          b"1e", b"/*", b"\xef\xbb\xbf", b"\r\n")  # fmt: skip


class _Raw:
    """Stands in a document for text that is not changed."""

    def __init__(self, text: str) -> None:
        self.text = text


def damaged(rng: Random, document: Json) -> bytes:
    """The document as bytes, with one to four things wrong with it, now and then none."""
    document = copy.deepcopy(document)
    for _ in range(rng.choice((0, 1, 1, 1, 2, 4))):
        rng.choice(CHANGES)(rng, document)
    data = written(document)
    for _ in range(rng.choice((0, 0, 0, 1, 3))):
        data = _torn(rng, data)
    return data


def written(document: Json) -> bytes:
    """JSON, with the raw values as they are."""
    raw: list[str] = []

    def mark(value: Any) -> str:
        raw.append(value.text)
        return f"\x01{len(raw) - 1}\x01"

    text = json.dumps(document, default=mark)
    for number, value in enumerate(raw):
        text = text.replace(f'"\\u0001{number}\\u0001"', value)
    return text.encode("utf-8", "surrogatepass")


def _place(rng: Random, document: Json) -> tuple[Any, Any]:
    """A container of the document, and a key in it; deep ones are as likely as shallow ones."""
    place, key = document, rng.choice(sorted(document) or [""])
    while key in place if isinstance(place, dict) else True:
        inner = place[key]
        if isinstance(inner, dict) and inner and rng.random() < 0.8:
            place, key = inner, rng.choice(sorted(inner))
        elif isinstance(inner, list) and inner and rng.random() < 0.8:
            place, key = inner, rng.randrange(len(inner))
        else:
            break
    return place, key


def _put(rng: Random, document: Json) -> None:
    place, key = _place(rng, document)
    place[key] = _Raw(rng.choice(VALUES))


def _drop(rng: Random, document: Json) -> None:
    place, key = _place(rng, document)
    if isinstance(place, list) or key in place:
        del place[key]


def _add(rng: Random, document: Json) -> None:
    place, _ = _place(rng, document)
    value = _Raw(rng.choice(VALUES))
    if isinstance(place, list):
        place.insert(rng.randint(0, len(place)), value)
    else:
        place[rng.choice(("", "on", "a/b~", "x" * 90, "\x00", "name", "case", "é"))] = value


def _move(rng: Random, document: Json) -> None:
    """A part of the document into another place."""
    (one, a), (other, b) = _place(rng, document), _place(rng, document)
    if isinstance(one, list) or a in one:
        other[b] = copy.deepcopy(one[a])


def _scale(rng: Random, document: Json) -> None:
    place, key = _place(rng, document)
    value = place[key] if isinstance(place, list) else place.get(key)
    if isinstance(value, int | float) and not isinstance(value, bool):
        place[key] = value * rng.choice((-1, 0, 1e-9, 1e9, 1e150, 1e-150))


def _repeat(rng: Random, document: Json) -> None:
    place, key = _place(rng, document)
    if isinstance(place, list):
        place[key:key] = [copy.deepcopy(place[key]) for _ in range(rng.choice((1, 50)))]


CHANGES: tuple[Callable[[Random, Json], None], ...] = (
    _put, _put, _put, _drop, _add, _move, _scale, _repeat,
)  # fmt: skip


def _torn(rng: Random, data: bytes) -> bytes:
    if not data:
        return data
    start = rng.randrange(len(data))
    end = min(len(data), start + rng.randint(1, 40))
    other = rng.randrange(len(data))
    return rng.choice((
        data[:start] + data[end:],
        data[:start] + rng.choice(TOKENS) + data[start:],
        data[:start] + bytes([data[start] ^ 1 << rng.randrange(8)]) + data[start + 1 :],
        data[:other] + data[start:end] + data[other:],
        data[:start],
    ))  # fmt: skip


def packed(rng: Random, data: bytes) -> tuple[bytes, dict[str, str]]:
    """The data as it is sent, and its headers; most of them as they should be."""
    headers = {"Content-Type": "application/json"}
    chance = rng.random()
    if chance < 0.2:
        headers["Content-Encoding"] = "gzip"
        data = gzip.compress(data, 1)
        if rng.random() < 0.3:
            data = _torn(rng, data)
    elif chance < 0.25:
        headers["Content-Encoding"] = rng.choice(("gzip", "deflate", "gzip, gzip", "", "x" * 999))
    elif chance < 0.3:
        headers["Content-Type"] = rng.choice(
            ("text/plain", "application/json; charset=utf-16", "application/json;" * 50, "a", ";;",
             "application/JSON", "multipart/form-data; boundary=x")
        )  # fmt: skip
    if rng.random() < 0.1:
        headers["Idempotency-Key"] = rng.choice(("a", "x" * 200, "x" * 201, "\t", "\x7f", "é"))
    return data, headers

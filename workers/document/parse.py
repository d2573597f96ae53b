"""Bytes to JSON values, strictly: UTF-8, no repeated keys, no NaN, no infinities.

orjson reads the document. The standard library's slower reader is called only to say where a NaN or
a repeated key stands.
"""

import codecs
import json
import math
import re
from collections import Counter
from collections.abc import Iterator
from itertools import chain, islice
from typing import Any

import orjson

from workers.document.faults import MOST_FAULTS, Tokens, pointer, printable
from workers.errors import DocumentError, Fault

# A key is a string before a colon. Inside a string the same signs can stand too, so that this
# counts too many rather than too few, and a false alarm costs only the slower reader.
MOST_LEVELS = 1000  # about where the libraries give up anyway
_KEY = re.compile(rb'"\s*:')


def parse(data: bytes) -> Any:
    """The JSON value; DocumentError when it is not strict JSON."""
    document, faults = parse_leniently(data)
    if faults:
        raise DocumentError(faults)
    return document


def parse_leniently(data: bytes, most_levels: int = MOST_LEVELS) -> tuple[Any, list[Fault]]:
    """The JSON value with NaN and repeated keys let in, and the faults that they are.

    DocumentError when nothing can be read, or it has more levels of objects and lists.
    """
    document, faults = _read(bytes(data).removeprefix(codecs.BOM_UTF8))
    _require_levels(document, most_levels)
    return document, faults


def _read(data: bytes) -> tuple[Any, list[Fault]]:
    try:
        document = orjson.loads(data)
    except orjson.JSONDecodeError as error:
        found = _parse_slowly(data)
        if found is None or not found[1]:
            raise DocumentError([Fault("", f"is not JSON: {printable(str(error))}")]) from None
        return found
    if len(_KEY.findall(data)) == _count_keys(document):
        return document, []
    return _parse_slowly(data) or (document, [])


def _require_levels(document: Any, most: int) -> None:
    """All objects and lists of one level after the other, without recursion."""
    level = [document]
    for _ in range(most + 1):
        lists = [value for value in level if isinstance(value, list)]
        objects = [value.values() for value in level if isinstance(value, dict)]
        if not lists and not objects:
            return
        # A look at the types first: most of a large document are numbers, two or three to a list.
        kinds = set(map(type, chain.from_iterable(lists)))
        held = lists if any(issubclass(kind, dict | list) for kind in kinds) else []
        level = list(chain.from_iterable([*held, *objects]))
    text = f"has more than {most} levels of objects and lists within each other"
    raise DocumentError([Fault("", text)])


class _Repeating(dict[str, Any]):
    """An object with the keys that stood in it more than once."""

    repeated: frozenset[str] = frozenset()


def _object(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    plain = dict(pairs)
    if len(plain) == len(pairs):
        return plain
    found = _Repeating(plain)
    counts = Counter(key for key, _ in pairs)
    found.repeated = frozenset(key for key, count in counts.items() if count > 1)
    return found


def _parse_slowly(data: bytes) -> tuple[Any, list[Fault]] | None:
    """None where the library gives up: no JSON, or nested deeper than any job document."""
    try:
        document = json.loads(data, object_pairs_hook=_object)
    except (ValueError, RecursionError):
        return None
    return document, list(islice(_faults(document), MOST_FAULTS))


def _faults(document: Any) -> Iterator[Fault]:
    for place, value in _walk(document):
        if isinstance(value, float) and not math.isfinite(value):
            yield Fault(
                printable(pointer(*place)), "must be a finite number; JSON has no NaN or infinity"
            )
        elif isinstance(value, _Repeating):
            for key in sorted(value.repeated):
                yield Fault(printable(pointer(*place, key)), "this key stands here more than once")


def _walk(document: Any) -> Iterator[tuple[Tokens, Any]]:
    """Every value with its place, without recursion."""
    waiting: list[tuple[Tokens, Any]] = [((), document)]
    while waiting:
        place, value = waiting.pop()
        yield place, value
        if isinstance(value, dict):
            waiting.extend(((*place, key), inner) for key, inner in value.items())
        elif isinstance(value, list):
            waiting.extend(((*place, i), inner) for i, inner in enumerate(value))


def _count_keys(document: Any) -> int:
    """Keys of all objects, leaving out what stands in lists of anything but objects.

    That never counts too many, and does not walk the long arrays of a mesh.
    """
    count, waiting = 0, [document]
    while waiting:
        value = waiting.pop()
        if isinstance(value, dict):
            count += len(value)
            waiting.extend(value.values())
        elif isinstance(value, list) and value and isinstance(value[0], dict):
            waiting.extend(value)
    return count

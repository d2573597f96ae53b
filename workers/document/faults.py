"""Faults of a document: from marshmallow's nested messages to pointers, and the words in them."""

import json
from collections.abc import Collection, Iterable, Iterator, Mapping
from difflib import get_close_matches
from itertools import islice
from typing import Any

from marshmallow.exceptions import SCHEMA

from workers.errors import Fault

MOST_FAULTS = 1000  # of one document
MOST_COMPARED = 100

Tokens = tuple[str | int, ...]


def pointer(*tokens: str | int) -> str:
    """JSON pointer (RFC 6901) to a place."""
    return "".join("/" + str(t).replace("~", "~0").replace("/", "~1") for t in tokens)


def tokens(pointer: str) -> tuple[str, ...]:
    return tuple(t.replace("~1", "/").replace("~0", "~") for t in pointer.split("/")[1:])


def seen(value: Any) -> str:
    """A value as the client wrote it, cut short."""
    if isinstance(value, Mapping):
        return "an object"
    if isinstance(value, list | tuple):
        return f"a list of {len(value)}"
    if value is None or isinstance(value, bool | str):
        text = json.dumps(value if not isinstance(value, str) else value[:60], ensure_ascii=False)
        return text if not isinstance(value, str) or len(value) <= 60 else f'{text[:-1]}..."'
    if isinstance(value, int) and abs(value) >= 10**30:
        return "a number of more than 30 digits"
    return str(value) if isinstance(value, int | float) else f"a {type(value).__name__}"


def unknown(what: str, name: str, known: Collection[str]) -> str:
    """Message for a name that refers to nothing; the known names are in document order."""
    # Likeness to thousands of names would take seconds, and no reader would miss it.
    close = get_close_matches(name, known, n=1) if len(known) <= MOST_COMPARED else []
    hint = f"; did you mean {seen(close[0])}?" if close else ""
    listed = ", ".join(islice(known, 12)) + (
        f" and {len(known) - 12} more" if len(known) > 12 else ""
    )
    return f"there is no {what} named {seen(name)}{hint}; there is: {listed or 'none'}"


def flatten(messages: Any, place: Tokens = ()) -> Iterator[Fault]:
    """Faults of marshmallow's nested messages; "_schema" stands for the object itself."""
    if not isinstance(messages, Mapping):
        for message in messages if isinstance(messages, list) else [messages]:
            yield Fault(printable(pointer(*place)), printable(str(message)))
        return
    for key, inner in messages.items():
        itself = key == SCHEMA and not isinstance(inner, Mapping)
        yield from flatten(inner, place if itself else (*place, key))


def nest(faults: Iterable[Fault]) -> dict[str, Any]:
    """The reverse of `flatten`, for checks that look at the whole document."""
    root: dict[str, Any] = {}
    for fault in faults:
        level = root
        for token in tokens(fault.pointer):
            level = level.setdefault(token, {})
        level.setdefault(SCHEMA, []).append(fault.message)
    return root


def in_document_order(faults: Iterable[Fault], document: Any) -> list[Fault]:
    """Sorted by place as written, missing keys last; each fault once."""
    orders: dict[int, dict[str, int]] = {}  # of each object, by its id

    def rank(at: Any, token: str) -> int:
        if isinstance(at, dict):
            if id(at) not in orders:
                orders[id(at)] = {str(key): i for i, key in enumerate(at)}
            return orders[id(at)].get(token, len(at))
        return int(token) if token.isdecimal() else 0

    def inside(at: Any, token: str) -> Any:
        if isinstance(at, list):
            return at[int(token)] if token.isdecimal() and int(token) < len(at) else None
        return at.get(token) if isinstance(at, dict) else None

    def key(fault: Fault) -> list[tuple[int, str]]:
        at, position = document, []
        for token in tokens(fault.pointer):
            position.append((rank(at, token), token))
            at = inside(at, token)
        return position

    return sorted(dict.fromkeys(faults), key=key)


def printable(text: str) -> str:
    """Without lone surrogates, which no encoding can carry."""
    return text.encode("utf-8", "backslashreplace").decode("utf-8")

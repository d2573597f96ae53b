"""The document as it was written, when its form is not known to be right.

What is not of the right form is passed over: the schemas report it.
"""

from collections.abc import Iterator, Mapping
from typing import Any

from workers.document.faults import pointer
from workers.document.loads import KINDS


def table(value: Any) -> Mapping[str, Any]:
    """An object, empty where there is none."""
    return value if isinstance(value, Mapping) else {}


def rows(value: Any) -> Iterator[tuple[int, Mapping[str, Any]]]:
    """The objects in a list, with their positions."""
    for i, item in enumerate(value if isinstance(value, list | tuple) else ()):
        if isinstance(item, Mapping):
            yield i, item


def loads_of(document: Mapping[str, Any]) -> Iterator[tuple[str, str, Mapping[str, Any]]]:
    """Every load: its place, its key and itself."""
    for case, loads in table(document.get("load_cases")).items():
        for i, load in rows(loads):
            key = next((k for k in KINDS if k in load), None)
            if key is not None:
                yield pointer("load_cases", case, i), key, load

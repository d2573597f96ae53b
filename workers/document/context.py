"""What is known while a document is read: the declared units, and the place just now."""

from collections.abc import Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from dataclasses import dataclass, field

from workers.document.faults import pointer
from workers.job import Units


@dataclass
class Reading:
    units: Units
    place: list[str | int] = field(default_factory=list)


_READING: ContextVar[Reading] = ContextVar("reading")


@contextmanager
def reading(units: Units) -> Iterator[None]:
    token = _READING.set(Reading(units))
    try:
        yield
    finally:
        _READING.reset(token)


@contextmanager
def inside(token: str | int | None) -> Iterator[None]:
    """One level down; None stays where it is."""
    place = _READING.get().place
    if token is None:
        yield
        return
    place.append(token)
    try:
        yield
    finally:
        place.pop()


def current_place() -> list[str | int]:
    """The place itself, for those who keep it in a loop."""
    return _READING.get().place


def here() -> str:
    """JSON pointer of the place that is being read."""
    return pointer(*_READING.get().place)


def last_token() -> str:
    """Name of the map entry that is being read."""
    return str(_READING.get().place[-1])


def declared_units() -> Units:
    return _READING.get().units

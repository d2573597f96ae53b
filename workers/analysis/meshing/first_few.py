"""Long lists of faults, cut short."""

from collections.abc import Iterator
from itertools import islice

from workers.errors import Fault

MOST_FAULTS = 20  # of one kind


def first_few(faults: Iterator[Fault], pointer: str) -> Iterator[Fault]:
    """The first faults of one kind, and a last one that says that there are more."""
    yield from islice(faults, MOST_FAULTS)
    if next(faults, None) is not None:
        yield Fault(pointer, f"more faults of this kind than the {MOST_FAULTS} that are listed")

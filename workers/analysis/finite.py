"""Results are numbers: none is infinite, none is undefined."""

import math
from collections.abc import Iterator
from typing import Any

from workers.errors import AnalysisError, Fault

BEYOND = (
    "the computation left the range of numbers ({place} of the results); lengths, stiffnesses or "
    "loads of this job differ too much in size. Look at its units"
)


def require_numbers(results: Any) -> None:
    """Look through plain dictionaries and lists.

    Raises
    ------
    AnalysisError   names the first place that holds no finite number.
    """
    if not _is_finite(results):
        place = next(place for place, value in _numbers(results) if not math.isfinite(value))
        raise AnalysisError([Fault("", BEYOND.format(place=place))])


def _is_finite(value: Any) -> bool:
    """Without places, which cost more than the look itself."""
    if isinstance(value, float):
        return math.isfinite(value)
    if isinstance(value, dict):
        return all(map(_is_finite, value.values()))
    return all(map(_is_finite, value)) if isinstance(value, list | tuple) else True


def _numbers(value: Any, place: str = "") -> Iterator[tuple[str, float]]:
    if isinstance(value, float):
        yield place, value
    elif isinstance(value, dict):
        for key, inner in value.items():
            yield from _numbers(inner, f"{place}/{key}")
    elif isinstance(value, list | tuple):
        for number, inner in enumerate(value):
            yield from _numbers(inner, f"{place}/{number}")

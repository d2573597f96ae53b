"""The long arrays of a mesh: checked and converted as a whole.

Only when the whole is wrong is it searched for the entries that are.
"""

from collections.abc import Iterator
from itertools import chain, islice
from typing import Any

import numpy as np
from marshmallow import ValidationError, fields
from marshmallow.exceptions import SCHEMA
from numpy.typing import NDArray

from elements.errors import ElementError
from elements.registry import get
from workers.document.faults import seen
from workers.document.fields import LARGEST, Plain, described, finite
from workers.document.targets import MOST_NODES

MOST_ELEMENTS = 20_000_000
REPORTED = 20  # bad entries of one array

Errors = dict[Any, Any]


class ElementName(Plain, fields.Field[str]):
    """An installed element type."""

    def __init__(self, description: str, **options: Any) -> None:
        metadata = described(description, type="string", examples=["Q8", "Q4", "T6", "T3"])
        super().__init__(metadata=metadata, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        if not isinstance(value, str):
            raise ValidationError(f"must be the name of an element type, not {seen(value)}")
        try:
            get(value)
        except ElementError as error:
            raise ValidationError(str(error)) from None
        return value


class Rows(Plain, fields.Field[Any]):
    """A list of rows of plain numbers."""

    def __init__(
        self, description: str, *, whole: bool, widths: tuple[int, ...], most: int, **options: Any
    ) -> None:
        self.whole, self.widths, self.most = whole, widths, most
        number = {"type": "integer", "minimum": 0} if whole else {"type": "number"}
        row: dict[str, Any] = {"type": "array", "items": number}
        if widths:
            row |= {"minItems": widths[0], "maxItems": widths[-1]}
        metadata = described(description, type="array", items=row, minItems=1, maxItems=most)
        super().__init__(metadata=metadata, **options)

    def _widths(self, rows: Any, beside: Any) -> tuple[int, ...]:
        """Lengths that a row may have; `beside` is the object that holds the list."""
        return self.widths

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        if not isinstance(value, list | tuple):
            raise ValidationError(f"must be a list, not {seen(value)}")
        if not 1 <= len(value) <= self.most:
            raise ValidationError(f"must have 1 to {self.most} entries, not {len(value)}")
        widths = self._widths(value, data)
        flat = self._flat(value, widths)
        if flat is None:
            raise ValidationError(first_of(self._search(value, widths)))
        return self._shaped(flat, value)

    def _shaped(self, flat: NDArray[Any], rows: Any) -> Any:
        return flat.reshape(len(rows), -1)

    def _flat(self, rows: Any, widths: tuple[int, ...]) -> NDArray[Any] | None:
        """All numbers in one go; None when any of them is not what it should be."""
        kinds = {int} if self.whole else {int, float}
        if not set(map(type, rows)) <= {list, tuple} or not set(map(len, rows)) <= {*widths}:
            return None
        if not set(map(type, chain.from_iterable(rows))) <= kinds:
            return None
        try:
            flat = np.fromiter(
                chain.from_iterable(rows),
                np.int64 if self.whole else np.float64,
                sum(map(len, rows)),
            )
        except OverflowError:
            return None
        if self.whole:
            good = flat.min() >= 0 and flat.max() < MOST_NODES
            return flat.astype(np.int32) if good else None
        return flat if (np.abs(flat) <= LARGEST).all() else None  # nor where it is no number

    def _search(self, rows: Any, widths: tuple[int, ...]) -> Iterator[tuple[int, Any]]:
        """Bad rows with their errors."""
        allowed = " or ".join(map(str, widths))
        for i, row in enumerate(rows):
            if not isinstance(row, list | tuple):
                yield i, {SCHEMA: [f"must be a list of {allowed} numbers, not {seen(row)}"]}
            elif len(row) not in widths:
                yield i, {SCHEMA: [f"must have {allowed} numbers, not {len(row)}"]}
            else:
                errors = {j: [text] for j, entry in enumerate(row) if (text := self._fault(entry))}
                if errors:
                    yield i, errors

    def _fault(self, value: Any) -> str | None:
        if not self.whole:
            try:
                finite(value, "a plain number, in the job's length unit")
            except ValidationError as error:
                return str(error.messages[0])
            return None
        if isinstance(value, bool) or not isinstance(value, int):
            return f"must be a node number, not {seen(value)}"
        if not 0 <= value < MOST_NODES:
            return f"must be a node number from 0 to {MOST_NODES - 1}, not {seen(value)}"
        return None


class Connectivity(Rows):
    """Node numbers of each element, as many as the type beside them has nodes."""

    def __init__(self, description: str, **options: Any) -> None:
        super().__init__(description, whole=True, widths=(), most=MOST_ELEMENTS, **options)

    def _widths(self, rows: Any, beside: Any) -> tuple[int, ...]:
        try:
            return (get(beside["element"]).node_count,)
        except (ElementError, KeyError, TypeError):
            # The type is at fault, and said to be; so as many as the first row has, if any.
            return (len(rows[0]) if isinstance(rows[0], list | tuple) and rows[0] else 3,)

    def _serialize(self, value: Any, attr: Any, obj: Any, **kwargs: Any) -> Any:
        return value.tolist()


class Nodes(Rows):
    """Positions of the nodes."""

    def __init__(self, description: str, **options: Any) -> None:
        super().__init__(description, whole=False, widths=(2,), most=MOST_NODES, **options)

    def _serialize(self, value: Any, attr: Any, obj: Any, **kwargs: Any) -> Any:
        return value.tolist()


class Edges(Rows):
    """Element edges along a side, as tuples because they may differ in length."""

    def __init__(self, description: str, **options: Any) -> None:
        super().__init__(description, whole=True, widths=(2, 3), most=MOST_NODES, **options)

    def _shaped(self, flat: NDArray[Any], rows: Any) -> Any:
        return tuple(tuple(row) for row in rows)

    def _serialize(self, value: Any, attr: Any, obj: Any, **kwargs: Any) -> Any:
        return [list(row) for row in value]


def beyond(connectivity: NDArray[np.int32], count: int) -> Errors:
    """Node numbers of which there is no node."""
    if connectivity.max() < count:
        return {}
    rows = np.unique(np.nonzero(connectivity >= count)[0])[: REPORTED + 1].tolist()
    found = beyond_rows([connectivity[i].tolist() for i in rows], count)
    return first_of((rows[k], error) for k, error in found)


def beyond_rows(rows: Any, count: int) -> Iterator[tuple[int, Errors]]:
    for i, row in enumerate(rows):
        if max(row) >= count:
            yield i, {j: [no_node(n, count)] for j, n in enumerate(row) if n >= count}


def no_node(number: int, count: int) -> str:
    return f"there is no node {number}; the {count} nodes are numbered from 0 to {count - 1}"


def first_of(found: Iterator[tuple[int, Any]]) -> Errors:
    """The first bad rows; one more message when there are others."""
    rows = list(islice(found, REPORTED + 1))
    errors: Errors = dict(rows[:REPORTED])
    if len(rows) > REPORTED:
        errors[SCHEMA] = [f"more entries are wrong than these {REPORTED}"]
    return errors

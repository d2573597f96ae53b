"""The single values of a document: text, names, numbers, quantities with units.

Every field carries a description and its JSON Schema, so that the reference is generated from what
is enforced.
"""

import math
import unicodedata
from typing import Any

from marshmallow import ValidationError, fields
from marshmallow.types import ErrorMessages

from workers.document.context import declared_units
from workers.document.faults import seen
from workers.document.units import Dimension, to_number

LONGEST_NAME = 80
NAME_SIGNS = "._-+()#,="
NAME_RULE = (
    f"1 to {LONGEST_NAME} letters (of any script), digits, spaces and {NAME_SIGNS}, "
    "not starting with a full stop or a space"
)

# Products of a few numbers within these are numbers still; no plate in any unit is near them.
LARGEST, SMALLEST = 1e30, 1e-30  # also said in the docstring of JobSchema

JsonSchema = dict[str, Any]


def described(description: str, **schema: Any) -> JsonSchema:
    return {"description": description, **schema}


class Plain:
    """What every field here has in common: plain words for a missing or empty value."""

    default_error_messages: ErrorMessages = {  # noqa: RUF012  marshmallow's own convention
        "required": "is required",
        "null": "must not be null; leave it out if it is not wanted",
    }


class Text(Plain, fields.Field[str]):
    """Free text of at least one character that is not a space."""

    def __init__(self, description: str, *, most: int, **options: Any) -> None:
        self.most = most
        schema = described(description, type="string", minLength=1, maxLength=most)
        super().__init__(metadata=schema, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        if not isinstance(value, str):
            raise ValidationError(f"must be text, not {seen(value)}")
        if not value.strip():
            raise ValidationError("must not be empty")
        if len(value) > self.most:
            raise ValidationError(f"must have at most {self.most} characters, not {len(value)}")
        if any(unicodedata.category(c) in ("Cc", "Cs", "Zl", "Zp") for c in value):
            raise ValidationError("must be one line of text without control characters")
        return value


class Name(Plain, fields.Field[str]):
    """A name that can be used in file names and addresses."""

    def __init__(self, description: str, **options: Any) -> None:
        schema = described(description, type="string", minLength=1, maxLength=LONGEST_NAME)
        super().__init__(metadata=schema, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        if not isinstance(value, str):
            raise ValidationError(f"must be a name, not {seen(value)}")
        if not is_name(value):
            raise ValidationError(f"{seen(value)} is not a name: {NAME_RULE}")
        return value


def is_name(text: str) -> bool:
    if not 1 <= len(text) <= LONGEST_NAME or text[0] in ". ":
        return False
    return all(
        c in NAME_SIGNS or c == " " or unicodedata.category(c)[0] in "LM"
        or unicodedata.category(c) == "Nd" for c in text
    )  # fmt: skip


class Choice(Plain, fields.Field[str]):
    """One of a few words."""

    def __init__(self, description: str, *, among: tuple[str, ...], **options: Any) -> None:
        self.among = among
        schema = described(description, type="string", enum=list(among))
        super().__init__(metadata=schema, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        if value not in self.among:
            raise ValidationError(f"must be one of {', '.join(self.among)}, not {seen(value)}")
        return str(value)


class Number(Plain, fields.Field[float]):
    """A finite number without dimension, within limits."""

    def __init__(
        self,
        description: str,
        *,
        above: float | None = None,
        least: float | None = None,
        below: float | None = None,
        most: float | None = None,
        **options: Any,
    ) -> None:
        self.above, self.least, self.below, self.most = above, least, below, most
        limits = {"exclusiveMinimum": above, "minimum": least, "exclusiveMaximum": below,
                  "maximum": most}  # fmt: skip
        number = {"type": "number"} | {k: v for k, v in limits.items() if v is not None}
        super().__init__(metadata=described(description, **self._schema_of(number)), **options)

    def _schema_of(self, number: JsonSchema) -> JsonSchema:
        return number

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> float:
        return self._within_limits(self._number(value), value)

    def _number(self, value: Any) -> float:
        return finite(value)

    def _within_limits(self, number: float, value: Any) -> float:
        if (
            (self.above is not None and number <= self.above)
            or (self.least is not None and number < self.least)
            or (self.below is not None and number >= self.below)
            or (self.most is not None and number > self.most)
        ):
            limits = {"above": self.above, "at least": self.least, "below": self.below,
                      "at most": self.most}  # fmt: skip
            allowed = " and ".join(
                f"{w} {limit:g}" for w, limit in limits.items() if limit is not None
            )
            raise ValidationError(f"must be {allowed}, not {seen(value)}")
        if self.above == 0 and number < SMALLEST:
            raise ValidationError(f"must be at least {SMALLEST:g}, not {seen(value)}")
        return number


def finite(value: Any, expected: str = "a number") -> float:
    """A finite number, or ValidationError."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise ValidationError(f"must be {expected}, not {seen(value)}")
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise ValidationError(f"must be a finite number, not {seen(value)}")
    return within_reach(number, value)


def within_reach(number: float, value: Any) -> float:
    """The number, if it can be computed with; `value` as the client wrote it."""
    if abs(number) > LARGEST:
        raise ValidationError(
            f"{seen(value)} is too large to be computed with; in the units of the job it must be "
            f"at most {LARGEST:g} in size"
        )
    return number


class Quantity(Number):
    """A number in the job's units, or text with a unit, of one of the given dimensions."""

    def __init__(self, *dimensions: Dimension, description: str, **options: Any) -> None:
        self.dimensions = dimensions
        super().__init__(description, **options)

    def _schema_of(self, number: JsonSchema) -> JsonSchema:
        text = {"type": "string", "examples": [d.example for d in self.dimensions]}
        return {"anyOf": [number, text]}

    def _number(self, value: Any) -> float:
        if not isinstance(value, str):
            example = f'a number or text such as "{self.dimensions[0].example}"'
            return finite(value, example)
        try:
            number = to_number(value, self.dimensions, declared_units())
        except ValueError as error:
            raise ValidationError(f"{seen(value)} {error}") from None
        return within_reach(number, value)


class Truth(Plain, fields.Field[bool]):
    """true or false, and nothing that could be taken for them."""

    def __init__(self, description: str, **options: Any) -> None:
        super().__init__(metadata=described(description, type="boolean"), **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> bool:
        if not isinstance(value, bool):
            raise ValidationError(f"must be true or false, not {seen(value)}")
        return value


class Whole(Plain, fields.Field[int]):
    """A whole number within limits."""

    def __init__(self, description: str, *, least: int, most: int, **options: Any) -> None:
        self.least, self.most = least, most
        schema = described(description, type="integer", minimum=least, maximum=most)
        super().__init__(metadata=schema, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> int:
        if isinstance(value, bool) or not isinstance(value, int):
            raise ValidationError(f"must be a whole number, not {seen(value)}")
        if not self.least <= value <= self.most:
            raise ValidationError(f"must be {self.least} to {self.most}, not {seen(value)}")
        return value

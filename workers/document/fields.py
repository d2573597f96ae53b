"""The kinds of value in a document: names, numbers, quantities with units, vectors, lists, maps.

Every field carries a description and its JSON Schema, so that the reference is generated from what
is enforced. Fields that hold other fields keep track of the place for `context.here()`.
"""

import math
import unicodedata
from collections.abc import Mapping
from typing import Any

from marshmallow import ValidationError, fields
from marshmallow.exceptions import SCHEMA
from marshmallow.types import ErrorMessages

from workers.document.context import current_place, declared_units, inside
from workers.document.faults import seen
from workers.document.units import Dimension, to_number

LONGEST_NAME = 80
NAME_SIGNS = "._-+()#,="
NAME_RULE = (
    f"1 to {LONGEST_NAME} letters (of any script), digits, spaces and {NAME_SIGNS}, "
    "not starting with a full stop or a space"
)

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
        if value.encode("utf-8", "replace").decode() != value:
            raise ValidationError("must be Unicode text without lone surrogates")
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
            return to_number(value, self.dimensions, declared_units())
        except ValueError as error:
            raise ValidationError(f"{seen(value)} {error}") from None


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


class ListOf(Plain, fields.List):
    """A list within limits of length; becomes a tuple."""

    def __init__(
        self, inner: fields.Field, description: str, *, least: int = 0, most: int, **options: Any
    ) -> None:
        self.least, self.most = least, most
        schema = described(description, type="array", items=inner.metadata, minItems=least,
                           maxItems=most)  # fmt: skip
        super().__init__(inner, metadata=schema, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        if not isinstance(value, list | tuple):
            raise ValidationError(f"must be a list, not {seen(value)}")
        if not self.least <= len(value) <= self.most:
            exact = self.least == self.most
            allowed = f"{self.least}" if exact else f"{self.least} to {self.most}"
            raise ValidationError(f"must have {allowed} entries, not {len(value)}")
        return tuple(_each(self.inner, enumerate(value), attr).values())


class MapOf(Plain, fields.Dict):
    """An object whose keys are names that the client chooses; becomes a dict."""

    def __init__(
        self, inner: fields.Field, description: str, *, least: int = 0, most: int, **options: Any
    ) -> None:
        self.least, self.most = least, most
        schema = described(description, type="object", minProperties=least, maxProperties=most)
        super().__init__(values=inner, metadata=schema, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        if not isinstance(value, Mapping):
            raise ValidationError(f"must be an object, not {seen(value)}")
        if not self.least <= len(value) <= self.most:
            raise ValidationError(
                f"must have {self.least} to {self.most} entries, not {len(value)}"
            )
        bad = {key: {SCHEMA: [f"{seen(key)} is not a name: {NAME_RULE}"]}
               for key in value if not (isinstance(key, str) and is_name(key))}  # fmt: skip
        good = ((key, item) for key, item in value.items() if key not in bad)
        return _each(self.value_field, good, attr, bad)


def _each(inner: Any, entries: Any, attr: str | None, errors: Any = None) -> dict[Any, Any]:
    """Read the entries of a list or map, each in its place; all their errors together."""
    errors, result, place = dict(errors or {}), {}, current_place()
    with inside(attr):
        for key, value in entries:
            place.append(key)
            try:
                result[key] = inner.deserialize(value)
            except ValidationError as error:
                messages = error.messages
                errors[key] = messages if isinstance(messages, dict) else {SCHEMA: messages}
            finally:
                place.pop()
    if errors:
        raise ValidationError(errors)
    return result


class Vector(ListOf):
    """[x, y]."""

    def __init__(self, *dimensions: Dimension, description: str, **options: Any) -> None:
        text = "x or y component"
        inner = Quantity(*dimensions, description=text) if dimensions else Number(text)
        super().__init__(inner, description, least=2, most=2, **options)


def json_schema(field: fields.Field) -> JsonSchema:
    """The JSON Schema of a field, with that of its parts written out."""
    if not isinstance(field, Part):
        return dict(field.metadata)
    inner = {f.data_key or name: f for name, f in field.schema.fields.items()}
    return {
        **field.metadata,
        "type": "object",
        "properties": {key: json_schema(f) for key, f in inner.items()},
        "required": [key for key, f in inner.items() if f.required],
        "additionalProperties": False,
    }


class Varying(Plain, fields.Field[tuple[Any, Any]]):
    """A value, or {"from", "to"} values at the two ends of a side; becomes a pair."""

    def __init__(self, inner: fields.Field, description: str, **options: Any) -> None:
        self.inner = inner
        plain = {k: v for k, v in inner.metadata.items() if k != "description"}
        ends = {"type": "object", "properties": {"from": plain, "to": plain},
                "required": ["from", "to"], "additionalProperties": False}  # fmt: skip
        super().__init__(metadata=described(description, anyOf=[plain, ends]), **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> tuple[Any, Any]:
        if not isinstance(value, Mapping):
            alone = self.inner.deserialize(value)
            return alone, alone
        errors: dict[str, Any] = {
            key: ["unknown key; allowed here: from, to"]
            for key in value
            if key not in ("from", "to")
        }
        ends = []
        for key in ("from", "to"):
            try:
                if key not in value:
                    raise ValidationError("is required")
                ends.append(self.inner.deserialize(value[key]))
            except ValidationError as error:
                errors[key] = error.messages
        if errors:
            raise ValidationError(errors)
        return ends[0], ends[1]

    def _serialize(self, value: Any, attr: Any, obj: Any, **kwargs: Any) -> Any:
        if value is None:
            return None
        start, end = (self.inner._serialize(end, None, None) for end in value)
        return start if start == end else {"from": start, "to": end}


class Part(Plain, fields.Nested):
    """An object with a schema of its own."""

    def __init__(self, schema: Any, description: str, **options: Any) -> None:
        choices = [{"required": [key]} for key in schema.one_of]
        rule = {"oneOf": choices} if choices else {}
        super().__init__(schema, metadata=described(description, **rule), **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, *args: Any, **kwargs: Any) -> Any:
        if not isinstance(value, Mapping):
            raise ValidationError(f"must be an object, not {seen(value)}")
        with inside(attr):
            return self.schema.load(value)

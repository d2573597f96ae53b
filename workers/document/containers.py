"""Values that hold other values: lists, maps, vectors, objects.

They keep track of the place for `context.here()`, and report the faults of all their entries.
"""

from collections.abc import Mapping
from typing import Any

from marshmallow import ValidationError, fields
from marshmallow.exceptions import SCHEMA

from workers.document.context import current_place, inside
from workers.document.faults import seen
from workers.document.fields import (
    NAME_RULE,
    JsonSchema,
    Number,
    Plain,
    Quantity,
    described,
    is_name,
)
from workers.document.units import Dimension


class ListOf(Plain, fields.List):
    """A list within limits of length; becomes a tuple."""

    shown = "a list"  # what it must be, in words

    def __init__(
        self, inner: fields.Field, description: str, *, least: int = 0, most: int, **options: Any
    ) -> None:
        self.least, self.most = least, most
        schema = described(description, type="array", items=inner.metadata, minItems=least,
                           maxItems=most)  # fmt: skip
        super().__init__(inner, metadata=schema, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        if not isinstance(value, list | tuple):
            raise ValidationError(f"must be {self.shown}, not {seen(value)}")
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

    shown = "a list of two, [x, y]"

    def __init__(self, *dimensions: Dimension, description: str, **options: Any) -> None:
        text = "x or y component"
        inner = Quantity(*dimensions, description=text) if dimensions else Number(text)
        super().__init__(inner, description, least=2, most=2, **options)


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

"""The base of all schemas: strict objects that become, and come from, one frozen dataclass.

A new key is a line in a schema and a field of the same name in `workers/job.py`.
"""

import dataclasses
from collections.abc import Mapping
from inspect import getdoc
from typing import Any, ClassVar

from marshmallow import (
    RAISE,
    Schema,
    ValidationError,
    post_dump,
    post_load,
    pre_dump,
    validates_schema,
)

from workers.document.context import here
from workers.document.faults import seen


class Record(Schema):
    """A strict object.

    makes : the dataclass that it becomes.
    one_of : keys of which exactly one must be there.
    """

    makes: ClassVar[Any]
    one_of: ClassVar[tuple[str, ...]] = ()

    class Meta:
        unknown = RAISE

    def __init_subclass__(cls, **options: Any) -> None:
        """The first line of the docstring is the title in the reference.

        Not the description: where apispec finds one, it leaves out that the object is strict.
        """
        super().__init_subclass__(**options)
        title = (getdoc(cls) or "").partition("\n")[0].removesuffix(".")
        cls.Meta = type("Meta", (Record.Meta,), {"title": title})  # type: ignore[assignment,misc]

    def __init__(self, **options: Any) -> None:
        super().__init__(**options)
        keys = [f.data_key or name for name, f in self.fields.items()]
        self.error_messages["unknown"] = f"unknown key; allowed here: {', '.join(keys)}"
        self.error_messages["type"] = "must be an object"

    def build(self, data: dict[str, Any]) -> Any:
        """What the object becomes; data has the read values by attribute name."""
        if "pointer" in {f.name for f in dataclasses.fields(self.makes)}:
            data["pointer"] = here()
        return self.makes(**data)

    def unbuild(self, thing: Any) -> Any:
        """What is written; a mapping or an object with an attribute for each field."""
        return thing

    @post_load
    def _build(self, data: dict[str, Any], **_: Any) -> Any:
        return self.build(data)

    @pre_dump
    def _unbuild(self, thing: Any, **_: Any) -> Any:
        return self.unbuild(thing)

    @post_dump(pass_original=True)
    def _leave_out_defaults(self, data: dict[str, Any], thing: Any, **_: Any) -> dict[str, Any]:
        """What a reader would fill in anyway need not be written."""
        defaults = defaults_of(type(thing)) if dataclasses.is_dataclass(thing) else {}
        kept = {}
        for name, field in self.fields.items():
            value = data.get(field.data_key or name)
            if value is None or (name in defaults and getattr(thing, name) == defaults[name]):
                continue
            kept[field.data_key or name] = value
        return kept

    @validates_schema(pass_original=True, skip_on_field_errors=False)
    def _exactly_one(self, data: Any, original: Any, **_: Any) -> None:
        if not self.one_of or not isinstance(original, Mapping):
            return
        found = [key for key in self.one_of if key in original]
        misspelt = original.keys() - {f.data_key or name for name, f in self.fields.items()}
        if len(found) > 1 or not (found or misspelt):
            there = " and ".join(found) if found else "none"
            raise ValidationError(f"needs exactly one of {', '.join(self.one_of)}; found {there}")


def defaults_of(made: Any) -> dict[str, Any]:
    """Default of each field of a dataclass that has one."""
    found = {}
    for field in dataclasses.fields(made):
        if field.default is not dataclasses.MISSING:
            found[field.name] = field.default
        elif field.default_factory is not dataclasses.MISSING:
            found[field.name] = field.default_factory()
    return found


def only_with(data: Any, key: str, other: str) -> None:
    """ValidationError when `key` is there without the key that it depends on."""
    if isinstance(data, Mapping) and key in data and other not in data:
        raise ValidationError({key: [f"needs {other} beside it, not {seen(data[key])} alone"]})

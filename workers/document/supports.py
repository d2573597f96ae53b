"""Supports: what holds the plate."""

from collections import Counter
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from marshmallow import ValidationError, validates_schema

from workers.document.containers import ListOf, Part, Vector
from workers.document.fields import LONGEST_NAME, Name, Quantity
from workers.document.record import Record, only_with
from workers.document.targets import On
from workers.document.units import LENGTH, POINT_SPRING, SIDE_SPRING
from workers.job import Named, Spring, Support

MOST_SUPPORTS = 100_000
HOLDS = ("ux", "uy", "normal", "along", "spring")
PRESCRIBED = ("ux", "uy", "normal", "displacement")


def _stiffness(direction: str) -> Quantity:
    return Quantity(
        SIDE_SPRING,
        POINT_SPRING,
        description=f"Stiffness in {direction}: force per length per length of side, or force per "
        "length at a point",
        least=0,
    )


class SpringSchema(Record):
    """Elastic support; at least one stiffness above zero."""

    makes = Spring

    x = _stiffness("x")
    y = _stiffness("y")
    normal = _stiffness("the side's normal")
    tangential = _stiffness("the side's tangent")

    @validates_schema
    def _holds_something(self, data: dict[str, Any], **_: Any) -> None:
        if not any(data.values()):
            raise ValidationError("needs at least one of x, y, normal and tangential above zero")


class SupportSchema(Record):
    """At least one of ux, uy, normal, along and spring; the other directions stay free."""

    makes = Support

    name = Name("Name in the results; else that of the side")
    on = On("Where it holds: a side, hole, region or point by name, or a selector", required=True)
    ux = Quantity(LENGTH, description="Displacement in x: 0, or a prescribed value")
    uy = Quantity(LENGTH, description="Displacement in y: 0, or a prescribed value")
    normal = Quantity(
        LENGTH, description="Displacement along the side's outward normal: 0 is a roller"
    )
    along = Vector(description="Direction [dx, dy] of a skew support, of any length but zero")
    displacement = Quantity(LENGTH, description="Displacement along `along`; 0 if left out")
    spring = Part(SpringSchema, "Elastic support")
    case = Name(
        "Load case in which the prescribed values act; in the others the support holds at zero"
    )

    @validates_schema(pass_original=True, skip_on_field_errors=False)
    def _holds_something(self, data: dict[str, Any], original: Any, **_: Any) -> None:
        only_with(original, "displacement", "along")
        if isinstance(original, Mapping) and not any(key in original for key in HOLDS):
            raise ValidationError(f"holds nothing: needs at least one of {', '.join(HOLDS)}")

    def build(self, data: dict[str, Any]) -> Support:
        errors = {}
        if "along" in data and not any(data["along"]):
            errors["along"] = ["must be a direction, not [0, 0]"]
        if "case" in data and not any(data.get(key) for key in PRESCRIBED):
            errors["case"] = [
                f"has no effect without a value other than 0 in {', '.join(PRESCRIBED)}"
            ]
        if errors:
            raise ValidationError(errors)
        support: Support = super().build({"label": data.pop("name", "")} | data)
        return support

    def unbuild(self, thing: Support) -> dict[str, Any]:
        return {**vars(thing), "name": thing.label}


class SupportList(ListOf):
    """All supports; gives each its label."""

    def __init__(self, description: str, **options: Any) -> None:
        inner = Part(SupportSchema, "A support")
        super().__init__(inner, description, least=1, most=MOST_SUPPORTS, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        supports = super()._deserialize(value, attr, data, **kwargs)
        first: dict[str, int] = {}
        doubles = {
            i: {"name": ["another support has this name"]}
            for i, s in enumerate(supports) if s.label and first.setdefault(s.label, i) != i
        }  # fmt: skip
        if doubles:
            raise ValidationError(doubles)
        return _label(supports)


def _label(supports: tuple[Support, ...]) -> tuple[Support, ...]:
    """Labels for supports that have none: the name they act on, or their number; all different."""
    taken = {s.label for s in supports if s.label}
    copies: Counter[str] = Counter()
    labelled = []
    for number, support in enumerate(supports, 1):
        label = support.label
        if not label:
            first = support.on.name if isinstance(support.on, Named) else f"support {number}"
            label = first
            while label in taken:
                copies[first] += 1
                ending = f" ({copies[first] + 1})"
                label = first[: LONGEST_NAME - len(ending)] + ending
            taken.add(label)
        labelled.append(replace(support, label=label))
    return tuple(labelled)

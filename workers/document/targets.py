"""Where a support or a load acts: a name, or a selector."""

from collections.abc import Mapping
from typing import Any

from marshmallow import ValidationError, fields

from workers.document.containers import ListOf, Part, Vector, json_schema
from workers.document.context import inside
from workers.document.faults import seen
from workers.document.fields import Name, Plain, Quantity, Whole, described
from workers.document.record import Record
from workers.document.units import LENGTH
from workers.geometry import CircleShape
from workers.job import Box, Named, Nodes, OnCircle, Segment, Target

MOST_NODES = 20_000_000


class CircleSchema(Record):
    """A full circle."""

    makes = CircleShape

    centre = Vector(LENGTH, description="Centre of the circle [x, y]", required=True)
    radius = Quantity(LENGTH, description="Radius of the circle", above=0, required=True)


class SelectorSchema(Record):
    """Exactly one of segment, box, circle and nodes."""

    one_of = ("segment", "box", "circle", "nodes")

    segment = ListOf(
        Vector(LENGTH, description="End of the segment [x, y]"),
        "The boundary on the straight line between two points",
        least=2,
        most=2,
    )
    box = ListOf(
        Vector(LENGTH, description="Corner of the box [x, y]"),
        "Everything inside the upright box between two opposite corners",
        least=2,
        most=2,
    )
    circle = Part(CircleSchema, "The boundary on a circle")
    nodes = ListOf(
        Whole("Node number, from 0", least=0, most=MOST_NODES - 1),
        "Nodes by number; only with geometry.mesh",
        least=1,
        most=MOST_NODES,
    )
    tolerance = Quantity(LENGTH, description="How far off still counts; not with nodes", above=0)

    def build(self, data: dict[str, Any]) -> Target:
        tolerance = data.get("tolerance")
        if "nodes" in data:
            if tolerance is not None:
                raise ValidationError({"tolerance": ["has no meaning with nodes; leave it out"]})
            return Nodes(data["nodes"])
        if "circle" in data:
            return OnCircle(data["circle"].centre, data["circle"].radius, tolerance)
        a, b = data["box"] if "box" in data else data["segment"]
        if a == b:
            raise ValidationError("needs two points that differ")
        if "segment" in data:
            return Segment(a, b, tolerance)
        low = (min(a[0], b[0]), min(a[1], b[1]))
        high = (max(a[0], b[0]), max(a[1], b[1]))
        return Box(low, high, tolerance)

    def unbuild(self, thing: Target) -> dict[str, Any]:
        match thing:
            case Segment(start, end, tolerance):
                return {"segment": (start, end), "tolerance": tolerance}
            case Box(low, high, tolerance):
                return {"box": (low, high), "tolerance": tolerance}
            case OnCircle(centre, radius, tolerance):
                return {"circle": CircleShape(centre, radius), "tolerance": tolerance}
            case Nodes(numbers):
                return {"nodes": numbers}
        raise TypeError(f"{thing!r} is not a selector")


class On(Plain, fields.Field[Target]):
    """The key `on`."""

    def __init__(self, description: str, **options: Any) -> None:
        self.name_field = Name("Name of a side, hole, region or point")
        self.selector = Part(
            SelectorSchema, "A selector: exactly one of segment, box, circle, nodes"
        )
        ways = [json_schema(self.name_field), json_schema(self.selector)]
        super().__init__(metadata=described(description, anyOf=ways), **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Target:
        if isinstance(value, str):
            return Named(self.name_field.deserialize(value))
        if not isinstance(value, Mapping):
            place = isinstance(value, list) and len(value) == 2
            raise ValidationError(
                f"must be a name or a selector (an object with one of "
                f"{', '.join(SelectorSchema.one_of)}), not {seen(value)}"
                + ("; give the place a name in geometry.points" if place else "")
            )
        with inside(attr):
            target: Target = self.selector.deserialize(value)
        return target

    def _serialize(self, value: Any, attr: Any, obj: Any, **kwargs: Any) -> Any:
        if value is None or isinstance(value, Named):
            return value.name if value else None
        return self.selector.schema.dump(value)

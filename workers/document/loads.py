"""Loads, load cases and combinations.

A new kind of load is a row in KINDS and a field of the same name in LoadSchema.
"""

from collections.abc import Mapping
from types import MappingProxyType
from typing import Any, Literal, NamedTuple, cast

from marshmallow import ValidationError, fields, validates_schema

from workers.document.containers import ListOf, MapOf, Part, Varying, Vector
from workers.document.context import here, inside
from workers.document.factor_table import read_table
from workers.document.faults import MOST_FAULTS, pointer, seen
from workers.document.fields import Number, Plain, Quantity, described
from workers.document.record import Record
from workers.document.targets import On
from workers.document.units import (
    ACCELERATION,
    BODY_FORCE,
    FORCE,
    LENGTH,
    LINE_LOAD,
    MOMENT,
    ROTATION_SPEED,
    STRESS,
    TEMPERATURE,
)
from workers.job import (
    Acceleration,
    Bearing,
    BodyForce,
    Combination,
    LineLoad,
    Load,
    LoadCase,
    PointForce,
    Pressure,
    Shear,
    Spin,
    TemperatureChange,
    TotalForce,
    TotalMoment,
    Traction,
)

MOST_CASES = 20_000
MOST_LOADS = 100_000  # in one case


class Kind(NamedTuple):
    """What a load's key becomes, and where such a load can act."""

    makes: type[Load]
    attributes: tuple[str, ...]
    place: Literal["point", "side", "area"]


KINDS: Mapping[str, Kind] = MappingProxyType(
    {
        "force": Kind(PointForce, ("force",), "point"),
        "total_force": Kind(TotalForce, ("force",), "side"),
        "total_moment": Kind(TotalMoment, ("moment",), "side"),
        "traction": Kind(Traction, ("start", "end"), "side"),
        "pressure": Kind(Pressure, ("start", "end"), "side"),
        "shear": Kind(Shear, ("start", "end"), "side"),
        "line_load": Kind(LineLoad, ("start", "end"), "side"),
        "bearing": Kind(Bearing, ("force",), "side"),
        "acceleration": Kind(Acceleration, ("acceleration",), "area"),
        "body_force": Kind(BodyForce, ("force",), "area"),
        "spin": Kind(Spin, ("about", "speed"), "area"),
        "temperature_change": Kind(TemperatureChange, ("change",), "area"),
    }
)
_KEY_OF = {kind.makes: key for key, kind in KINDS.items()}


class SpinSchema(Record):
    """Steady rotation in the plate's own plane."""

    about = Vector(LENGTH, description="Centre of rotation [x, y]", required=True)
    speed = Quantity(ROTATION_SPEED, description="Speed in radians per second", required=True)

    def build(self, data: dict[str, Any]) -> tuple[Any, Any]:
        return data["about"], data["speed"]

    def unbuild(self, thing: tuple[Any, Any]) -> dict[str, Any]:
        return {"about": thing[0], "speed": thing[1]}


class LoadSchema(Record):
    """A place and exactly one kind of load."""

    one_of = tuple(KINDS)

    on = On(
        "Where it acts: a point for force; a side or hole for total_force to bearing; a region, or "
        "left out for the whole plate, for acceleration to temperature_change"
    )
    force = Vector(FORCE, description="Force at a point [Fx, Fy]")
    total_force = Vector(FORCE, description="Force spread evenly over a side [Fx, Fy]")
    total_moment = Quantity(
        MOMENT, description="Moment spread linearly over a side, counter-clockwise positive"
    )
    traction = Varying(Vector(STRESS, description="Traction"), "Force per area on a side [tx, ty]")
    pressure = Varying(
        Quantity(STRESS, description="Pressure"),
        "Force per area on a side, positive into the material",
    )
    shear = Varying(
        Quantity(STRESS, description="Shear"),
        "Force per area along a side; the border is traversed with the material on the left",
    )
    line_load = Varying(
        Vector(LINE_LOAD, description="Line load"), "Force per length of side [qx, qy]"
    )
    bearing = Vector(
        FORCE,
        description="Force of a pin on the border of a hole [Fx, Fy], as a cosine pressure over "
        "the loaded half",
    )
    acceleration = Vector(
        ACCELERATION,
        description="Body force = density x acceleration; [0, -9.81 m/s2] is self weight",
    )
    body_force = Vector(BODY_FORCE, description="Force per volume [bx, by]")
    spin = Part(SpinSchema, "Body force = density x speed squared x radius, outward")
    temperature_change = Quantity(TEMPERATURE, description="Uniform change of temperature")

    @validates_schema(pass_original=True, skip_on_field_errors=False)
    def _has_a_place(self, data: Any, original: Any, **_: Any) -> None:
        if not isinstance(original, Mapping) or "on" in original:
            return
        for key in original:
            if key in KINDS and KINDS[key].place != "area":
                raise ValidationError({"on": [f"is required with {key}"]})

    def build(self, data: dict[str, Any]) -> Load:
        on = data.pop("on", None)
        ((key, value),) = data.items()
        kind = KINDS[key]
        values = value if len(kind.attributes) > 1 else (value,)
        given = dict(zip(kind.attributes, values, strict=True))
        return kind.makes(on=on, pointer=here(), **given)

    def unbuild(self, thing: Load) -> dict[str, Any]:
        key = _KEY_OF[type(thing)]
        values = tuple(getattr(thing, name) for name in KINDS[key].attributes)
        return {"on": thing.on, key: values if len(values) > 1 else values[0]}


class LoadCases(MapOf):
    """Load cases by name."""

    def __init__(self, description: str, **options: Any) -> None:
        loads = ListOf(Part(LoadSchema, "A load"), "Loads that act together", most=MOST_LOADS)
        super().__init__(loads, description, least=1, most=MOST_CASES, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        cases = super()._deserialize(value, attr, data, **kwargs)
        with inside(attr):
            return tuple(
                LoadCase(name, loads, here() + pointer(name)) for name, loads in cases.items()
            )

    def _serialize(self, value: Any, attr: Any, obj: Any, **kwargs: Any) -> Any:
        by_name = {case.name: case.loads for case in value}
        return super()._serialize(by_name, attr, obj, **kwargs)


class Combinations(MapOf):
    """Factors on cases, by name."""

    def __init__(self, description: str, *, least: int = 0, **options: Any) -> None:
        factors = MapOf(Number("Factor"), "Factors by name of the case", least=1, most=MOST_CASES)
        super().__init__(factors, description, least=least, most=MOST_CASES, **options)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        found = super()._deserialize(value, attr, data, **kwargs)
        with inside(attr):
            return tuple(
                Combination(name, factors, here() + pointer(name))
                for name, factors in found.items()
            )

    def _serialize(self, value: Any, attr: Any, obj: Any, **kwargs: Any) -> Any:
        by_name = {combination.name: combination.factors for combination in value}
        return super()._serialize(by_name, attr, obj, **kwargs)


class FactoredCases(Plain, fields.Field[tuple[Combination, ...]]):
    """Cases made of factors on the load cases: an object, or the same as a CSV table."""

    def __init__(self, description: str, **options: Any) -> None:
        self.by_name = Combinations("Factors by name of the load case, by name", least=1)
        factors = {"type": "object", "additionalProperties": {"type": "number"}}
        as_object = {**self.by_name.metadata, "additionalProperties": factors}
        as_table = {
            "type": "string",
            "description": "CSV (RFC 4180): a heading with the names of load cases from the second "
            "column on, then a line for each case, its name first; an empty cell leaves out",
            "examples": ["case,pull x,pull y\nrope 1,0.8,0.6\n"],
        }
        super().__init__(metadata=described(description, anyOf=[as_object, as_table]), **options)

    def _deserialize(
        self, value: Any, attr: Any, data: Any, **kwargs: Any
    ) -> tuple[Combination, ...]:
        if isinstance(value, str):
            with inside(attr):  # a line of a table has no pointer of its own
                return _from_table(value)
        if not isinstance(value, Mapping):
            raise ValidationError(f"must be an object or CSV text, not {seen(value)}")
        with inside(attr):
            return cast(tuple[Combination, ...], self.by_name.deserialize(value))

    def _serialize(self, value: Any, attr: Any, obj: Any, **kwargs: Any) -> Any:
        return self.by_name._serialize(value, attr, obj, **kwargs)


def _from_table(text: str) -> tuple[Combination, ...]:
    table = read_table(text)
    if table.faults:
        raise ValidationError(table.faults[:MOST_FAULTS])
    if len(table.cases) > MOST_CASES:
        raise ValidationError(f"must have at most {MOST_CASES} cases, not {len(table.cases)}")
    return tuple(Combination(name, factors, here()) for name, factors in table.cases.items())

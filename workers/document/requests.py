"""How the plate is meshed, what the results should hold, and what they are measured against."""

from typing import Any

from marshmallow import ValidationError, fields, validates_schema

from workers.document.arrays import ElementName
from workers.document.containers import ListOf, MapOf, Part, Vector
from workers.document.context import inside
from workers.document.faults import seen
from workers.document.fields import (
    Choice,
    Name,
    Number,
    Plain,
    Quantity,
    Truth,
    Whole,
    described,
)
from workers.document.record import Record, only_with
from workers.document.units import LENGTH
from workers.job import Cut, HotSpot, Limits, Line, Meshing, Requests

MOST_REQUESTS = 20_000  # of each kind
MOST_SIZES = 20_000
WHOLESALE = ("all", "envelope")  # words that say which field files are wanted
MOST_DOFS = 20_000_000


class MeshingSchema(Record):
    """An outline takes all of it, patches take the element, a finished mesh takes nothing."""

    makes = Meshing

    element = ElementName("Element type; Q8 if left out")
    method = Choice("How an outline is meshed", among=("free",))
    size = Quantity(LENGTH, description="Size of elements; else chosen from the shape", above=0)
    sizes = MapOf(
        Quantity(LENGTH, description="Size of elements there", above=0),
        "Sizes by name of a side, hole, point or region",
        most=MOST_SIZES,
    )
    target_error = Number(
        "Refine until the estimated relative error in energy norm is below this", above=0, below=1
    )
    max_dofs = Whole("Stop refining at this number of unknowns", least=100, most=MOST_DOFS)

    @validates_schema(pass_original=True, skip_on_field_errors=False)
    def _limit_needs_target(self, data: Any, original: Any, **_: Any) -> None:
        only_with(original, "max_dofs", "target_error")

    def build(self, data: dict[str, Any]) -> Meshing:
        data.pop("method", None)  # there is one only
        return Meshing(**data)


class _FromTo(Record):
    start = Vector(LENGTH, description="First point [x, y]", data_key="from", required=True)
    end = Vector(LENGTH, description="Last point [x, y]", data_key="to", required=True)

    @validates_schema
    def _two_points(self, data: dict[str, Any], **_: Any) -> None:
        if data["start"] == data["end"]:
            raise ValidationError("needs two points that differ")


class LineSchema(_FromTo):
    """Evenly spaced points on a straight line."""

    makes = Line

    points = Whole("Number of points; 41 if left out", least=2, most=2001)


class CutSchema(_FromTo):
    """A straight cut through the plate."""

    makes = Cut


class HotSpotSchema(Record):
    """A weld toe; the stress along `direction` is extrapolated back to it."""

    makes = HotSpot

    at = Vector(LENGTH, description="The weld toe [x, y]", required=True)
    direction = Vector(
        description="Direction [dx, dy] from the toe into the plate, of any length but zero",
        required=True,
    )
    thickness = Quantity(
        LENGTH,
        description="Thickness t that places the reference points 0.4 t and 1.0 t from the toe; "
        "that of the plate if left out",
        above=0,
    )

    def build(self, data: dict[str, Any]) -> HotSpot:
        if not any(data["direction"]):
            raise ValidationError({"direction": ["must be a direction, not [0, 0]"]})
        spot: HotSpot = super().build(data)
        return spot


class FieldsWanted(Plain, fields.Field[str | tuple[str, ...]]):
    """One of the words "all" and "envelope", or a list of names."""

    def __init__(self, description: str, **options: Any) -> None:
        self.names = ListOf(
            Name("Name of a case or combination"),
            "Those of some states",
            least=1,
            most=MOST_REQUESTS,
        )
        word = {"type": "string", "enum": list(WHOLESALE)}
        ways = [word, dict(self.names.metadata)]
        super().__init__(metadata=described(description, anyOf=ways), **options)

    def _deserialize(
        self, value: Any, attr: Any, data: Any, **kwargs: Any
    ) -> str | tuple[str, ...]:
        if isinstance(value, str):
            if value in WHOLESALE:
                return value
            raise ValidationError(
                f"must be {' or '.join(map(seen, WHOLESALE))}, or a list of names, "
                f"not {seen(value)}"
            )
        with inside(attr):
            names: tuple[str, ...] = self.names.deserialize(value)
        return names

    def _serialize(self, value: Any, attr: Any, obj: Any, **kwargs: Any) -> Any:
        return list(value) if isinstance(value, tuple) else value


class RequestsSchema(Record):
    """What the results should hold beside the figures of every case."""

    makes = Requests

    probes = MapOf(
        Vector(LENGTH, description="Position [x, y]"),
        "Points where stress and displacement are wanted",
        most=MOST_REQUESTS,
    )
    lines = MapOf(
        Part(LineSchema, "A line"),
        "Lines along which stress and displacement are wanted",
        most=MOST_REQUESTS,
    )
    cuts = MapOf(
        Part(CutSchema, "A cut"),
        "Cuts whose normal force, shear force and moment are wanted",
        most=MOST_REQUESTS,
    )
    convergence = Truth(
        "Solve on the job's own mesh and two finer ones; the results are those of the finest, with "
        "a record of what the peaks tend to and how sure that is. With a `target_error` the meshes "
        "of the adaptive run make the record, asked for or not"
    )
    # Not called `fields`: every schema has an attribute of that name already.
    field_files = FieldsWanted(
        "Which VTK field files are made with the job: all; that of the envelope only; or those of "
        "some cases and combinations. Left out: all for up to 20 of them, else that of the "
        "envelope. Any other is made when it is asked for",
        data_key="fields",
    )
    hot_spots = MapOf(
        Part(HotSpotSchema, "A hot spot"),
        "Weld toes whose structural hot-spot stress is wanted: the stress at 0.4 t and 1.0 t from "
        "the toe, extrapolated to it",
        most=MOST_REQUESTS,
    )


class LimitsSchema(Record):
    """What the results are measured against."""

    makes = Limits

    displacement = Quantity(LENGTH, description="Largest displacement allowed", above=0)
    factor_on_yield = Number("Least ratio of yield strength to von Mises stress", above=0)

"""How the plate is meshed, what the results should hold, and what they are measured against."""

from typing import Any

from marshmallow import ValidationError, validates_schema

from workers.document.arrays import ElementName
from workers.document.containers import MapOf, Part, Vector
from workers.document.fields import Choice, Number, Quantity, Whole
from workers.document.record import Record, only_with
from workers.document.units import LENGTH
from workers.job import Cut, Limits, Line, Meshing, Requests

MOST_REQUESTS = 20_000  # of each kind
MOST_SIZES = 20_000
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


class RequestsSchema(Record):
    """Places where results are wanted, each under a name."""

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


class LimitsSchema(Record):
    """What the results are measured against."""

    makes = Limits

    displacement = Quantity(LENGTH, description="Largest displacement allowed", above=0)
    factor_on_yield = Number("Least ratio of yield strength to von Mises stress", above=0)

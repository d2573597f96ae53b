"""The whole document as one schema; what its parts say of each other is in `names.py`."""

from collections.abc import Mapping
from itertools import chain, islice
from typing import Any

from marshmallow import ValidationError, validates_schema

from workers.document import consistency, names
from workers.document.containers import MapOf, Part
from workers.document.context import reading
from workers.document.faults import MOST_FAULTS, nest
from workers.document.fields import Text
from workers.document.geometry import GeometrySchema
from workers.document.loads import Combinations, FactoredCases, LoadCases
from workers.document.materials import MaterialSchema, PlateSchema, UnitsSchema
from workers.document.raw import table
from workers.document.record import Record
from workers.document.requests import LimitsSchema, MeshingSchema, RequestsSchema
from workers.document.supports import SupportList
from workers.document.units import FORCE_UNITS, LENGTH_UNITS
from workers.job import Job, Units

MOST_MATERIALS = 10_000


class JobSchema(Record):
    """One plate with all its load cases.

    Names, here as keys and as values, are 1 to 80 letters (of any script), digits, spaces and
    ._-+()#,= and do not start with a full stop or a space. Numbers are at most 1e30 in size, in
    the units of the job; those that must be above 0 are at least 1e-30.

    `load` gives a `Job`, or ValidationError with every fault; `dump` gives the document again.
    """

    makes = Job

    title = Text("What is checked, for people", most=200, required=True)
    label = Text("Batch that the job belongs to", most=200)
    units = Part(UnitsSchema, "Units of all plain numbers", required=True)
    materials = MapOf(
        Part(MaterialSchema, "A material"),
        "Materials by name",
        least=1,
        most=MOST_MATERIALS,
        required=True,
    )
    geometry = Part(
        GeometrySchema, "The plate: exactly one of outline, patches and mesh", required=True
    )
    plate = Part(PlateSchema, "Section of whatever no region overrides", required=True)
    meshing = Part(MeshingSchema, "How the plate is meshed")
    supports = SupportList("What holds the plate", required=True)
    load_cases = LoadCases(
        "Load cases by name; the loads of a case act together. A case without loads needs a "
        "support with a prescribed value",
        required=True,
    )
    cases = FactoredCases(
        "Cases by name, made of factors on the load cases. Where they are given, the load cases "
        "are only patterns: the results hold these cases, and combinations are of these"
    )
    combinations = Combinations("Combinations of cases, by name")
    requests = Part(RequestsSchema, "What the results should hold beside the peaks")
    limits = Part(LimitsSchema, "What the results are measured against")

    def load(self, data: Any, **options: Any) -> Any:
        with reading(_units_of(data)):
            return super().load(data, **options)

    @validates_schema(pass_original=True, skip_on_field_errors=False)
    def _parts_agree(self, data: Any, original: Any, **_: Any) -> None:
        if isinstance(original, Mapping):
            lazily = chain(names.faults(original), consistency.faults(original))
            found = list(islice(lazily, MOST_FAULTS))
            if found:
                raise ValidationError(nest(found))


def _units_of(document: Any) -> Units:
    """The declared units; where they are themselves at fault any will do, for nothing is built."""
    units = table(table(document).get("units"))
    length, force = units.get("length"), units.get("force")
    if (
        isinstance(length, str)
        and isinstance(force, str)
        and length in LENGTH_UNITS
        and force in FORCE_UNITS
    ):
        return Units(length, force)
    return Units("m", "N")

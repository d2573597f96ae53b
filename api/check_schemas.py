"""What the answer to a check looks like, for the OpenAPI document.

Written by a worker (`workers/checking.py`); the tests hold real checks against these schemas. A key
that Python or marshmallow has a meaning for has an underscore here.
"""

from marshmallow import fields

from api.result_schemas import (
    AboutSchema,
    MeshFiguresSchema,
    PicturesSchema,
    ResultUnitsSchema,
    by_name,
    number,
    numbers,
    part,
    whole,
)
from api.schemas import Answer, CautiousAnswer, text


class CheckLinksSchema(Answer):
    self = text("This check", required=True)
    preview = text(
        "Address template (RFC 6570) of a picture of the plate with the loads of a case or "
        "combination; drawn when asked for",
        required=True,
    )


class MassSchema(Answer):
    value = number("Mass of the plate")
    unit = text("kg, or lb where lengths are in inches or feet", required=True)


class CheckedPlateSchema(Answer):
    from_ = numbers("Lower left corner of the box around the plate [L]", 2, data_key="from")
    to = numbers("Its upper right corner [L]", 2)
    size = numbers("Width and height of the box [L]", 2)
    area = number("Of all elements [L^2]")
    centroid = numbers("Of the area; moments are about it [L]", 2)
    mass = part(MassSchema, "Null where a material has no density", allow_none=True)


class CheckedSupportSchema(Answer):
    on = text("What it acts on, in words", required=True)
    holds = text("What it holds, in words", required=True)
    nodes = whole("How many nodes it caught")
    length = number("Length of the border that it caught; 0 at a point [L]")


class CheckedLoadSchema(Answer):
    on = text("What it acts on, in words", required=True)
    load_ = text("What acts there, in words", required=True, data_key="load")


class CheckedLoadCaseSchema(Answer):
    loads_ = fields.List(fields.Nested(CheckedLoadSchema), required=True, data_key="loads")


class CheckedStateSchema(Answer):
    factors = by_name(fields.Float(), "What it is made of")
    force = numbers("Sum of its loads [x, y] [F]", 2)
    moment = number("Their moment about the centroid of the plate, counter-clockwise [F L]")


class MemoryEstimateSchema(Answer):
    bytes = whole("Peak beyond what a resting worker has")
    by_stage = by_name(fields.Integer(), "Peak in each stage")


class TimeEstimateSchema(Answer):
    seconds = number("Of one idle processor of the machine that made the check")
    by_stage = by_name(fields.Float(), "Reading and meshing were measured in this check")
    machine = number("How slow that machine is, 1 where the formulas were measured")


class FinestMeshSchema(Answer):
    dofs = whole("Displacements that the finest mesh may have")
    bytes = whole("Peak of memory there")
    seconds = number("Time for that mesh alone")


class EstimateSchema(Answer):
    dofs = whole("Displacements")
    factor_entries = whole("Numbers in the factor of the stiffness matrix")
    factor_counted = fields.Boolean(
        required=True,
        metadata={"description": "Counted for this very mesh; false: by a formula"},
    )
    memory = part(MemoryEstimateSchema, "Memory")
    time = part(TimeEstimateSchema, "Time")
    finest = part(
        FinestMeshSchema,
        "The most that finer meshes may come to, for a job with a target error or a convergence "
        "record; everything else is of the mesh of this check. Null for a job with one mesh",
        allow_none=True,
    )
    basis = text("Where the formulas come from, and how far to trust them", required=True)


class JobCheckSchema(CautiousAnswer):
    id = text("Stands for this document in this workspace", required=True)
    expires = text("When it may be gone if its document is not sent again, RFC 3339", required=True)
    links = fields.Nested(CheckLinksSchema, required=True)
    job = part(AboutSchema, "What was checked")
    units = part(ResultUnitsSchema, "Of every number below")
    mesh = part(MeshFiguresSchema, "What it would be solved on")
    plate = part(CheckedPlateSchema, "Its dimensions")
    supports = by_name(CheckedSupportSchema, "By the name that they will have in the results")
    load_cases = by_name(CheckedLoadCaseSchema, "By name")
    cases = by_name(CheckedStateSchema, "What the loads add up to, by case")
    combinations = by_name(CheckedStateSchema, "What the loads add up to, by combination")
    estimate = part(EstimateSchema, "What it would cost")
    previews = by_name(fields.String(), "Addresses of the pictures drawn already, by case")
    pictures = part(PicturesSchema, "Whether pictures can be made")

"""What the answer about a batch looks like."""

from marshmallow import fields

from api.result_schemas import ResultUnitsSchema, number, part, place, whole
from api.schemas import Answer, CautiousAnswer, text


class BatchGoverningSchema(Answer):
    job = text("The job that governs", required=True)
    title = text("Its title", required=True)
    case = text("The case or combination", required=True)


class BatchPeakSchema(Answer):
    value = number("The extreme over all finished jobs")
    at = place()
    region = text("Region in which it is", required=True)
    governs = part(BatchGoverningSchema, "Where it comes from")


class BatchEnvelopeSchema(Answer):
    units = part(ResultUnitsSchema, "Of the numbers")
    jobs = whole("Finished jobs in these units")
    von_mises = part(BatchPeakSchema, "[F/L^2]", allow_none=True)
    principal_max = part(BatchPeakSchema, "[F/L^2]", allow_none=True)
    principal_min = part(BatchPeakSchema, "The lowest of all [F/L^2]", allow_none=True)
    shear_max = part(BatchPeakSchema, "[F/L^2]", allow_none=True)
    displacement = part(BatchPeakSchema, "[L]", allow_none=True)
    utilisation = part(BatchPeakSchema, "Against yield", allow_none=True)


class BatchJobsSchema(Answer):
    queued = whole("Jobs in line")
    running = whole("Jobs at work")
    finished = whole("Jobs with results")
    failed = whole("Jobs without results; each says why")
    cancelled = whole("Jobs that nobody wants any more")


class BatchLinksSchema(Answer):
    self = text("This batch", required=True)
    jobs = text("Its jobs", required=True)
    fields_ = fields.String(
        required=True,
        allow_none=True,
        attribute="fields",
        data_key="fields",
        metadata={"description": "Joint envelope as VTK fields, where the meshes are the same"},
    )
    nodes = text("The same as a table", required=True, allow_none=True)
    picture = text("Template of a picture: what governs where", required=True, allow_none=True)


class BatchSchema(CautiousAnswer):
    label = text("From the documents", required=True)
    jobs = part(BatchJobsSchema, "How many are in each state")
    progress = number("Part of the jobs that has come to its end")
    meshes = whole("Different meshes among the finished jobs")
    envelopes = fields.List(
        fields.Nested(BatchEnvelopeSchema),
        required=True,
        metadata={"description": "The worst of all finished jobs, one entry for each system of "
                  "units; empty before the first is finished"},
    )  # fmt: skip
    links = part(BatchLinksSchema, "Where more is")

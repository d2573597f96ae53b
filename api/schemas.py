"""What the JSON answers look like; views build their bodies with these, OpenAPI describes them.

The job document itself is described in `workers/document/`, the results in `result_schemas.py`.
"""

from marshmallow import INCLUDE, RAISE, Schema, ValidationError, fields, validate

from workers.cautions import SEVERITIES
from workers.record import PRIORITIES, STATES, is_id


def text(description: str, **options: object) -> fields.String:
    return fields.String(metadata={"description": description}, **options)  # type: ignore[arg-type]


def job_id(value: str) -> None:
    if not is_id(value):
        raise ValidationError("Not the id of a job.")


class Answer(Schema):
    """Base: keys beyond those named are a mistake."""

    class Meta:
        unknown = RAISE


class CautionSchema(Answer):
    code = text("Name of the rule, see GET /v1/cautions", required=True)
    severity = fields.String(
        required=True,
        validate=validate.OneOf(tuple(SEVERITIES)),
        metadata={"description": "; ".join(f"{k}: {v}" for k, v in SEVERITIES.items())},
    )
    message = text("What was noticed", required=True)
    evidence = fields.Dict(
        required=True,
        metadata={"description": "The facts: value, limit, `at` [x, y], `case`, names"},
    )
    action = text("What the reader should do", required=True)


class CautiousAnswer(Answer):
    """Base of every JSON answer. The list is filled in `responses.py` and never empty."""

    cautions = fields.List(
        fields.Nested(CautionSchema),
        required=True,
        validate=validate.Length(min=1),
        metadata={"description": "Review cautions; read them before using a number"},
    )


class FaultSchema(Answer):
    pointer = text("JSON pointer (RFC 6901) into the job document; empty: all of it", required=True)
    parameter = text("Query parameter or header, where that is to blame")
    message = text("What was seen, what is allowed, what to do", required=True)


class ProblemSchema(CautiousAnswer):
    """RFC 9457; some types carry further members, named at the type."""

    class Meta:
        unknown = INCLUDE

    type = text("Address that explains this type of problem", required=True)
    title = text("The type of problem in words", required=True)
    status = fields.Integer(required=True, metadata={"description": "The HTTP status"})
    detail = text("What happened this time", required=True)
    instance = text("Path of the request", required=True)
    errors = fields.List(
        fields.Nested(FaultSchema),
        required=True,
        metadata={"description": "Every fault that was found, not only the first"},
    )


class ProgressSchema(Answer):
    stage = text("What the worker is doing", required=True)
    fraction = fields.Float(
        required=True,
        validate=validate.Range(0, 1),
        metadata={"description": "How much of that stage is done"},
    )


class TimesSchema(Answer):
    accepted = text("When the job was accepted, RFC 3339", required=True)
    started = text("When a worker began (the latest attempt)", allow_none=True, required=True)
    ended = text("When it reached its final state", allow_none=True, required=True)


class LinksSchema(Answer):
    self = text("This job", required=True)
    results = text("Results, once finished", required=True)
    field = text("Address template (RFC 6570) of a VTK field file", required=True)
    preview = text("Address template of a picture", required=True)
    table = text("Address template of a CSV table", required=True)
    sheet = text("The review sheet: one page of HTML to read, print and file", required=True)
    archive = text("Everything in one ZIP file", required=True)
    pin = text("PUT keeps the job, DELETE keeps it no longer than others", required=True)


class JobSummarySchema(Answer):
    id = text("Time-ordered and not guessable", required=True)
    state = fields.String(required=True, validate=validate.OneOf(STATES))
    title = text("From the document", required=True)
    label = text("From the document", allow_none=True, required=True)
    workspace = text("Whose it is", required=True)
    owner = text("Name of the token that it came with", allow_none=True, required=True)
    priority = fields.String(
        required=True,
        validate=validate.OneOf(PRIORITIES),
        metadata={"description": "The line that it stands in, or stood in"},
    )
    pinned = fields.Boolean(
        required=True, metadata={"description": "Kept until it is unpinned, whatever happens"}
    )
    times = fields.Nested(TimesSchema, required=True)
    links = fields.Nested(LinksSchema, required=True)


class JobStatusSchema(JobSummarySchema, CautiousAnswer):
    attempts = fields.Integer(
        required=True,
        metadata={"description": "How often a worker began; lost workers are retried"},
    )
    progress = fields.Nested(
        ProgressSchema, allow_none=True, required=True, metadata={"description": "While it runs"}
    )
    reason = text("Why it is in this state, where that needs words", allow_none=True, required=True)
    errors = fields.List(
        fields.Nested(FaultSchema),
        required=True,
        metadata={"description": "What is wrong in the document, when that is why it failed"},
    )


class JobPageSchema(CautiousAnswer):
    jobs = fields.List(fields.Nested(JobSummarySchema), required=True)
    next = text("Address of the next page, or null", allow_none=True, required=True)


class JobQuerySchema(Schema):
    """Which jobs to list."""

    state = fields.String(
        validate=validate.OneOf(STATES), metadata={"description": "Only jobs in this state"}
    )
    label = text("Only jobs with this label")
    after = text("Continue after this job id (from `next` of the page before)", validate=job_id)
    limit = fields.Integer(
        load_default=50,
        validate=validate.Range(1, 200),
        metadata={"description": "Jobs on one page"},
    )


class SubmissionQuerySchema(Schema):
    """How to treat a job; what it is stands in the document."""

    priority = fields.String(
        validate=validate.OneOf(PRIORITIES),
        metadata={
            "description": "The line that the job should stand in; interactive is worked on "
            "first. Without it a small job without a label is interactive. Of one token's jobs "
            "only a few stand there at a time; `priority` of the answer says where it stands"
        },
    )


class RemovalSchema(CautiousAnswer):
    id = text("The job", required=True)
    done = fields.String(
        required=True,
        validate=validate.OneOf(("cancelled", "removed")),
        metadata={"description": "What the request did"},
    )


class ElementSchema(Answer):
    name = text("What `meshing.element` and mesh blocks call it", required=True)
    corners = fields.Integer(required=True)
    order = fields.Integer(required=True, metadata={"description": "1 straight, 2 quadratic sides"})
    nodes = fields.Integer(required=True)
    vtk_cell_type = fields.Integer(required=True)


class ElementsSchema(CautiousAnswer):
    elements = fields.List(fields.Nested(ElementSchema), required=True)
    unusable = fields.List(
        fields.String(),
        required=True,
        metadata={"description": "Installed plug-ins that cannot be used, and why"},
    )


class RuleSchema(Answer):
    code = text("`code` of the cautions that this rule raises", required=True)
    severity = text("How grave they are", required=True)
    title = text("In a few words", required=True)
    looks_at = text("The numbers that the rule looks at", required=True)
    action = text("What the reader should do", required=True)


class RulesSchema(CautiousAnswer):
    rules = fields.List(fields.Nested(RuleSchema), required=True)
    severities = fields.Dict(keys=fields.String(), values=fields.String(), required=True)


class LiveSchema(CautiousAnswer):
    status = fields.String(required=True, validate=validate.Equal("live"))


class CheckSchema(Answer):
    name = text("Part of the server", required=True)
    ok = fields.Boolean(required=True)
    detail = text("What was found", required=True)


class ReadySchema(CautiousAnswer):
    status = fields.String(required=True, validate=validate.Equal("ready"))
    checks = fields.List(fields.Nested(CheckSchema), required=True)

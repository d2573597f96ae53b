"""Jobs: accept, list, look at, wait for, cancel, remove.

A job is answered with 202 only after the store has it on disk; whether Redis is there at that
moment does not matter, because the reconciler queues what the store holds.
"""

import logging
from typing import Any
from urllib.parse import urlencode

import flask
from marshmallow import RAISE
from redis.exceptions import RedisError

from api.access import caller, note, visible_record
from api.admission import choose_line, require_memory, require_room
from api.bodies import read_document_bytes
from api.example import EXAMPLE
from api.openapi import Blueprint, problems_of
from api.preferences import applied, wanted_wait
from api.problem_types import BAD_REQUEST
from api.problems import RefusalError, parameter_fault
from api.schemas import (
    JobPageSchema,
    JobQuerySchema,
    JobStatusSchema,
    RemovalSchema,
    SubmissionQuerySchema,
)
from api.services import services
from workers.audit import CANCELLED, PINNED, REMOVED, SUBMITTED, UNPINNED
from workers.document.job import JobSchema
from workers.document.read import read_document
from workers.errors import UnknownJobError
from workers.model_hash import model_hash
from workers.record import RUNNING, Record
from workers.sizes import check_size

log = logging.getLogger(__name__)
blueprint = Blueprint("jobs", __name__, url_prefix="/v1", description="Jobs and their states")

LONGEST_KEY = 200  # characters
PREFER = {
    "in": "header",
    "name": "Prefer",
    "description": "`wait=30`: hold the answer until the job is final, at most so many seconds "
    "(RFC 7240)",
    "schema": {"type": "string"},
}
IDEMPOTENCY_KEY = {
    "in": "header",
    "name": "Idempotency-Key",
    "description": "Any text of 1-200 visible characters that stands for this document: sending "
    "both again answers with the first job",
    "schema": {"type": "string", "maxLength": LONGEST_KEY},
}
LOCATION = {"Location": {"description": "Address of the job", "schema": {"type": "string"}}}


@blueprint.post("/jobs")
@blueprint.arguments(SubmissionQuerySchema, location="query", unknown=RAISE)
@blueprint.response(202, JobStatusSchema, headers=LOCATION, description="Accepted and on disk")
@blueprint.alt_response(
    200, schema=JobStatusSchema, headers=LOCATION, description="Accepted earlier with this key"
)
@blueprint.doc(
    requestBody={
        "required": True,
        "content": {"application/json": {"schema": JobSchema, "example": EXAMPLE}},
    },
    parameters=[IDEMPOTENCY_KEY],
    responses=problems_of(400, 413, 415, 422, 503),
)
def submit(query: dict[str, Any]) -> Any:
    """Submit a job document

    The document is read and, where its mesh can be built at once, looked over before it is
    accepted; every fault found is answered together. The body may be gzip (`Content-Encoding`).
    """
    key = _idempotency_key()
    asks = caller()
    require_room(asks)
    document = read_document_bytes(flask.request, services().settings.body_bytes)
    job = read_document(document, services().settings.most_levels)
    check_size(job, services().settings)
    model = model_hash(job)
    foreseen = services().foresight.foresee(job, model)
    require_memory(job, foreseen)
    record, created = services().store.accept(
        document,
        label=job.label,
        title=job.title,
        key=key,
        workspace=asks.workspace,
        owner=asks.name,
        priority=choose_line(query.get("priority"), job, foreseen.mesh, asks),
        model=model,
    )
    if created:
        note(SUBMITTED, record)
        log.info("job %s is accepted", record.id, extra={"facts": {"job": record.id}})
        _enqueue(record.id)
    return describe(record), 202 if created else 200, {"Location": address(record.id)}


def _idempotency_key() -> str | None:
    key = flask.request.headers.get("Idempotency-Key")
    if key is None:
        return None
    if not (0 < len(key) <= LONGEST_KEY and key.isprintable()):
        message = f"1 to {LONGEST_KEY} visible characters are allowed"
        raise RefusalError(
            BAD_REQUEST,
            "The Idempotency-Key cannot be used.",
            errors=[parameter_fault("Idempotency-Key", message)],
        )
    return key


def _enqueue(job_id: str) -> None:
    try:
        services().queue.submit(job_id)
    except RedisError as error:
        log.warning("job %s is accepted but not queued yet: %s", job_id, error)


@blueprint.get("/jobs")
@blueprint.arguments(JobQuerySchema, location="query", unknown=RAISE)
@blueprint.response(200, JobPageSchema)
@blueprint.doc(responses=problems_of(400))
def list_jobs(query: dict[str, Any]) -> Any:
    """Jobs, newest first

    Follow `next` (also sent as a Link header with rel="next") for older ones.
    """
    records, after = services().store.list(
        state=query.get("state"),
        label=query.get("label"),
        workspace=caller().scope,
        after=query.get("after"),
        limit=query["limit"],
    )
    following = f"/v1/jobs?{urlencode({**query, 'after': after})}" if after else None
    # Not by the schema, which takes longer over a page than everything else.
    answer = flask.jsonify(jobs=[summarise(record) for record in records], next=following)
    if following:
        answer.headers["Link"] = f'<{following}>; rel="next"'
    return answer


@blueprint.get("/jobs/<job_id>")
@blueprint.response(200, JobStatusSchema)
@blueprint.doc(parameters=[PREFER], responses=problems_of(404))
def show_job(job_id: str) -> Any:
    """State and progress of a job

    With `Prefer: wait=30` the answer is held until the job is final or 30 seconds have passed; the
    server may shorten the wait and says so in `Preference-Applied`.
    """
    record = visible_record(job_id)
    wait = wanted_wait(flask.request.headers.get("Prefer", ""))
    headers: dict[str, str] = {}
    if wait is not None:
        seconds = min(wait, services().settings.longest_wait)
        if services().waiting_room.wait(lambda: _is_final(job_id), seconds):
            headers = applied(seconds)
        record = services().store.record(job_id)
    return describe(record), 200, headers


def _is_final(job_id: str) -> bool:
    try:
        return services().store.record(job_id).is_final
    except UnknownJobError:  # removed while somebody waited: nothing more to wait for
        return True


@blueprint.delete("/jobs/<job_id>")
@blueprint.response(200, RemovalSchema)
@blueprint.doc(responses=problems_of(404, 409, 503))
def delete_job(job_id: str) -> dict[str, Any]:
    """Cancel a job that waits or runs; remove one that is final

    A cancelled job stays in the list until it is deleted once more. One that is pinned is not
    removed.
    """
    record = visible_record(job_id)
    if record.is_final:
        services().store.remove(job_id)
        note(REMOVED, record)
        return {"id": job_id, "done": "removed"}
    services().queue.cancel(job_id)
    note(CANCELLED, record)
    return {"id": job_id, "done": "cancelled"}


@blueprint.put("/jobs/<job_id>/pin")
@blueprint.response(200, JobStatusSchema)
@blueprint.doc(responses=problems_of(404, 503))
def pin_job(job_id: str) -> dict[str, Any]:
    """Keep a job

    It is removed neither for its age nor for the room that it takes, nor on request, until it is
    unpinned. The body is empty.
    """
    return _pin(job_id, True)


@blueprint.delete("/jobs/<job_id>/pin")
@blueprint.response(200, JobStatusSchema)
@blueprint.doc(responses=problems_of(404, 503))
def unpin_job(job_id: str) -> dict[str, Any]:
    """Keep a job no longer than others"""
    return _pin(job_id, False)


def _pin(job_id: str, pinned: bool) -> dict[str, Any]:
    if visible_record(job_id).pinned != pinned:
        note(PINNED if pinned else UNPINNED, services().store.pin(job_id, pinned))
    return describe(services().store.record(job_id))


def address(job_id: str) -> str:
    return f"/v1/jobs/{job_id}"


def summarise(record: Record) -> dict[str, Any]:
    """What a list shows of a job."""
    here = address(record.id)
    return {
        "id": record.id,
        "state": record.state,
        "title": record.title,
        "label": record.label,
        "workspace": record.workspace,
        "owner": record.owner,
        "priority": record.priority,
        "pinned": record.pinned,
        "times": {
            "accepted": record.accepted,
            "started": record.started,
            "ended": record.ended,
        },
        "links": {
            "self": here,
            "results": f"{here}/results",
            "field": f"{here}/fields/{{case}}.vtu",
            "preview": f"{here}/previews/{{case}}/{{quantity}}.png",
            "table": f"{here}/tables/{{name}}.csv",
            "sheet": f"{here}/sheet",
            "archive": f"{here}/archive.zip",
            "pin": f"{here}/pin",
        },
    }


def describe(record: Record) -> dict[str, Any]:
    """Everything about a job but its results; a finished job's own cautions are among it."""
    return {
        **summarise(record),
        "attempts": record.attempts,
        "progress": _progress(record),
        "reason": record.reason,
        "errors": [fault.as_json() for fault in record.faults],
        "cautions": list(record.cautions),
    }


def _progress(record: Record) -> dict[str, Any] | None:
    if record.state != RUNNING:
        return None
    try:
        return services().queue.progress(record.id)
    except RedisError:  # progress is a convenience; the state in the store is the truth
        return None

"""Checks: what would happen with a job, said by a worker ahead of the queue; nothing is solved.

A check is no job: it is kept for an hour after its document was last sent.
"""

from datetime import UTC, datetime
from pathlib import Path
from typing import Any
from urllib.parse import quote

import flask
import orjson
from flask import Response

from api.access import caller
from api.bodies import read_document_bytes
from api.check_schemas import JobCheckSchema
from api.example import EXAMPLE
from api.openapi import Blueprint, describe_file, problems_of
from api.problem_types import (
    CHECK_FAILED,
    CHECK_LATE,
    NOTHING_OF_THAT_NAME,
    PICTURES_UNAVAILABLE,
    UNKNOWN_CHECK,
)
from api.problems import RefusalError
from api.responses import file_answer
from api.services import services
from workers.checks import Checks
from workers.document.job import JobSchema
from workers.document.read import read_document
from workers.errors import DocumentError, Fault, LimitError, PicturesUnavailableError
from workers.outputs.names import file_name
from workers.preflight import preflight
from workers.sizes import check_size

RUN_CHECK, DRAW_CHECK = "workers.check_tasks.run_check", "workers.check_tasks.draw_check"
WAIT = 25.0  # seconds; most checks take 1-5 s, clients and proxies give up after 30 or more
RETRY_AFTER = "5"
PNG = "image/png"
CHECK = "check.json"

blueprint = Blueprint(
    "checks", __name__, url_prefix="/v1", description="What would happen with a job"
)
ADDRESS = {"Content-Location": {"description": "This check", "schema": {"type": "string"}}}


@blueprint.post("/checks")
@blueprint.response(200, JobCheckSchema, headers=ADDRESS)
@blueprint.doc(
    requestBody={
        "required": True,
        "content": {"application/json": {"schema": JobSchema, "example": EXAMPLE}},
    },
    responses=problems_of(413, 415, 422, 500, 503),
)
def make_check() -> Response:
    """Look a job document over; nothing is solved

    A worker meshes the plate and finds every support and load on it, ahead of the jobs in line. The
    answer says what was understood, what the loads of each case add up to, what the job would cost,
    and which cautions are known already, with pictures of the plate. What only the mesh shows, such
    as a selector that catches nothing or a plate that is free to move, is a fault here. When no
    worker answers in time, send the document again: it is the same check.
    """
    document = read_document_bytes(flask.request, services().settings.body_bytes)
    job = read_document(document, services().settings.most_levels)
    check_size(job, services().settings)
    preflight(job)
    check_id = _checks().file(document, caller().workspace)
    answer = _describe(check_id)
    answer.headers["Content-Location"] = address(check_id)
    return answer


@blueprint.get("/checks/<check_id>")
@blueprint.response(200, JobCheckSchema)
@blueprint.doc(responses=problems_of(404, 422, 500, 503))
def show_check(check_id: str) -> Response:
    """A check made within the last hour"""
    _require(check_id)
    return _describe(check_id)


@blueprint.get("/checks/<check_id>/previews/<case>.png")
@blueprint.doc(responses={200: describe_file(PNG), **problems_of(404, 422, 500, 503)})
def show_check_preview(check_id: str, case: str) -> Response:
    """The plate with mesh, dimensions, supports, and the loads of a case or combination"""
    _require(check_id)
    folder = _answer(check_id)
    path = folder / "previews" / f"{file_name(case)}.png"
    if not path.is_file():
        found = _read(folder)
        available = sorted([*found["cases"], *found["combinations"]])
        if case not in available:
            detail = f"The job has no case or combination {case!r}."
            raise RefusalError(NOTHING_OF_THAT_NAME, detail, available=available)
        _ask(DRAW_CHECK, check_id, case)
    return file_answer(path, PNG, address(check_id), download_name=f"{case}.png")


def address(check_id: str) -> str:
    return f"/v1/checks/{check_id}"


def _checks() -> Checks:
    return Checks(services().settings.store)


def _require(check_id: str) -> None:
    """Refuse what is not there, or not there for the caller."""
    workspace = _checks().workspace(check_id)
    if workspace is None or caller().scope not in (None, workspace):
        raise RefusalError(UNKNOWN_CHECK, "It is gone, or never was; send the document again.")


def _describe(check_id: str) -> Response:
    """What the worker found, with the addresses of its parts."""
    found = _read(_answer(check_id))
    here = address(check_id)
    expires = datetime.fromtimestamp(_checks().expires(check_id), UTC)
    found |= {
        "id": check_id,
        "expires": expires.isoformat(timespec="seconds").replace("+00:00", "Z"),
        "links": {"self": here, "preview": f"{here}/previews/{{case}}.png"},
        "previews": {
            case: f"{here}/previews/{quote(case, safe='')}.png" for case in found["previews"]
        },
    }
    return flask.jsonify(found)


def _answer(check_id: str) -> Path:
    """Folder of the answer, which a worker makes where it is not there."""
    if (folder := _checks().answer(check_id)) is None:
        _ask(RUN_CHECK, check_id)
        folder = _checks().answer(check_id)
    if folder is None:  # removed by its age this moment
        raise RefusalError(UNKNOWN_CHECK, "It is gone; send the document again.")
    return folder


def _read(folder: Path) -> dict[str, Any]:
    found: dict[str, Any] = orjson.loads((folder / CHECK).read_bytes())
    return found


def _ask(function: str, *arguments: str) -> None:
    """Have a worker do it; on return it is done.

    Raises
    ------
    DocumentError, LimitError   what is wrong with the document.
    RefusalError                no worker has answered yet, or it could not be done.
    RedisError                  the workers cannot be asked.
    """
    with services().waiting_room.seat() as seated:
        answer = services().queue.ask(function, *arguments, wait=WAIT if seated else 0.0)
    if answer.state == "pending":
        raise RefusalError(
            CHECK_LATE, "No worker has answered yet.", headers={"Retry-After": RETRY_AFTER}
        )
    if answer.state == "failed":
        raise RefusalError(CHECK_FAILED, answer.reason or "")
    if not answer.value["ok"]:
        raise _refusal(answer.value)


def _refusal(value: dict[str, Any]) -> Exception:
    """What the worker's refusal is to the client."""
    if "faults" in value:
        faults = [Fault(**fault) for fault in value["faults"]]
        too_large = value["error"] == LimitError.__name__
        return LimitError(faults) if too_large else DocumentError(faults)
    away = value["error"] == PicturesUnavailableError.__name__
    return RefusalError(PICTURES_UNAVAILABLE if away else CHECK_FAILED, value["reason"])

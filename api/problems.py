"""Errors as problem documents (RFC 9457): a table from error class to status and type.

Lower layers raise errors that carry their facts and know nothing of HTTP; views raise
`RefusalError` for what only HTTP can get wrong (media types, headers, timing).
"""

import logging
import secrets
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

import flask
from flask import Flask, Response
from redis.exceptions import RedisError
from werkzeug.exceptions import HTTPException

from elements.errors import FishplateError
from workers.errors import (
    AnalysisError,
    DocumentError,
    FaultyError,
    KeyConflictError,
    MeshError,
    NotFinalError,
    PicturesUnavailableError,
    StoreError,
    TransitionError,
    UnknownJobError,
)

MEDIA_TYPE = "application/problem+json"
log = logging.getLogger(__name__)


@dataclass(frozen=True)
class ProblemType:
    """A kind of problem; `meaning` is what the documentation page says about it."""

    slug: str
    status: int
    title: str
    meaning: str

    @property
    def address(self) -> str:
        return f"/docs#problem-{self.slug}"


INVALID_DOCUMENT = ProblemType(
    "invalid-document", 422, "The job document is wrong",
    "`errors` lists every fault that was found, each with the JSON pointer of its place and what "
    "is allowed there. Correct them all and send the document again.",
)  # fmt: skip
UNMESHABLE = ProblemType(
    "unmeshable-plate", 422, "The plate cannot be meshed",
    "The geometry, or something named on it, cannot be brought onto a mesh; `errors` says where.",
)  # fmt: skip
UNSOLVABLE = ProblemType(
    "unsolvable-plate", 422, "The plate cannot be solved",
    "The equations have no reliable solution, mostly because a part is free to move.",
)  # fmt: skip
BAD_REQUEST = ProblemType(
    "bad-request", 400, "The request is wrong",
    "A query parameter or a header is not what this address allows; `errors` names each of them.",
)  # fmt: skip
BODY_TOO_LARGE = ProblemType(
    "body-too-large", 413, "The body is too large",
    "The body, after decompression, is larger than this server accepts.",
)  # fmt: skip
MEDIA_TYPE_UNKNOWN = ProblemType(
    "unsupported-media-type", 415, "The body has a type that is not understood here",
    "Send `Content-Type: application/json`, plain or with `Content-Encoding: gzip`.",
)  # fmt: skip
KEY_REUSED = ProblemType(
    "idempotency-key-reused", 422, "The Idempotency-Key belongs to another document",
    "One key stands for one document. Send the same bytes to repeat a request, or use a new key.",
)  # fmt: skip
UNKNOWN_JOB = ProblemType(
    "unknown-job", 404, "There is no such job",
    "No job has this id; it was never accepted here, or it was removed.",
)  # fmt: skip
NOTHING_OF_THAT_NAME = ProblemType(
    "unknown-name", 404, "The job has nothing of that name",
    "The job has no case, combination, quantity or table of this name; `available` lists them.",
)  # fmt: skip
NOT_FINAL = ProblemType(
    "not-finished", 409, "The job is not finished",
    "Results exist only when the job is finished. Ask for the job with `Prefer: wait=30`.",
)  # fmt: skip
JOB_FAILED = ProblemType(
    "job-failed", 409, "The job has no results because it failed",
    "The job ended without results; `errors` says why. Correct the document and submit it anew.",
)  # fmt: skip
JOB_CANCELLED = ProblemType(
    "job-cancelled", 409, "The job has no results because it was cancelled",
    "Submit the document again if its results are wanted after all.",
)  # fmt: skip
NOT_READY = ProblemType(
    "not-ready", 503, "The server is not ready",
    "`checks` says which part is missing: the queue, the store, or the workers.",
)  # fmt: skip
OVERTAKEN = ProblemType(
    "overtaken", 409, "The job went on in the meantime",
    "The job changed its state while the request was under way. Look at it and decide again.",
)  # fmt: skip
ARTEFACT_LATE = ProblemType(
    "not-made-yet", 503, "The file is not made yet",
    "A worker makes this file on request; it was not done within the waiting time. Ask again "
    "after `Retry-After` seconds.",
)  # fmt: skip
ARTEFACT_FAILED = ProblemType(
    "file-not-made", 500, "The file could not be made",
    "A worker tried to make this file and failed; `detail` gives the reason.",
)  # fmt: skip
PICTURES_UNAVAILABLE = ProblemType(
    "pictures-unavailable", 503, "This server cannot make pictures",
    "The machine of the workers cannot render off-screen; numbers and fields are not affected.",
)  # fmt: skip
STORE_REFUSED = ProblemType(
    "store-refused", 503, "The job store refused",
    "The store could not write or read, for instance because the disk is full. Nothing was "
    "accepted.",
)  # fmt: skip
QUEUE_AWAY = ProblemType(
    "queue-away", 503, "The queue cannot be reached",
    "Redis does not answer. Accepted jobs are safe and are queued when it is back.",
)  # fmt: skip
UNEXPECTED = ProblemType(
    "unexpected", 500, "Something went wrong inside the server",
    "A fault of the server, not of the request. Its log has the details under `reference`.",
)  # fmt: skip

TYPES: tuple[ProblemType, ...] = tuple(
    value for value in list(globals().values()) if isinstance(value, ProblemType)
)

BY_ERROR: Mapping[type[Exception], ProblemType] = {
    DocumentError: INVALID_DOCUMENT,
    MeshError: UNMESHABLE,
    AnalysisError: UNSOLVABLE,
    PicturesUnavailableError: PICTURES_UNAVAILABLE,
    StoreError: STORE_REFUSED,
    UnknownJobError: UNKNOWN_JOB,
    NotFinalError: NOT_FINAL,
    TransitionError: OVERTAKEN,
    KeyConflictError: KEY_REUSED,
    RedisError: QUEUE_AWAY,
}
BY_STATUS: Mapping[int, ProblemType] = {
    413: BODY_TOO_LARGE,
    415: MEDIA_TYPE_UNKNOWN,
}


class RefusalError(FishplateError):
    """A view's own answer to a request that it cannot serve."""

    def __init__(
        self,
        kind: ProblemType,
        detail: str,
        *,
        errors: Iterable[Mapping[str, Any]] = (),
        headers: Mapping[str, str] | None = None,
        **facts: Any,
    ) -> None:
        super().__init__(detail)
        self.kind = kind
        self.detail = detail
        self.errors = list(errors)
        self.headers = dict(headers or {})
        self.facts = facts


def problem(
    kind: ProblemType | HTTPException,
    detail: str,
    errors: Iterable[Mapping[str, Any]] = (),
    headers: Mapping[str, str] | None = None,
    **facts: Any,
) -> Response:
    """A problem response; a plain HTTP status has the type about:blank, as RFC 9457 4.2.1 says."""
    if isinstance(kind, ProblemType):
        address, title, status = kind.address, kind.title, kind.status
    else:
        address, title, status = "about:blank", kind.name, kind.code or 500
    answer = flask.jsonify(
        {
            "type": address,
            "title": title,
            "status": status,
            "detail": detail,
            "instance": flask.request.path,
            "errors": list(errors),
            **facts,
        }
    )
    answer.status_code = status
    answer.mimetype = MEDIA_TYPE
    answer.headers.extend(headers or {})
    return answer


def parameter_fault(name: str, message: str) -> dict[str, str]:
    """An entry of `errors` that blames a query parameter or a header."""
    return {"pointer": "", "parameter": name, "message": message}


def register(app: Flask) -> None:
    """Answer every error of this application with a problem document."""
    app.register_error_handler(RefusalError, _refused)
    app.register_error_handler(HTTPException, http_problem)
    for error in BY_ERROR:
        app.register_error_handler(error, _known)
    app.register_error_handler(Exception, _unexpected)


def _refused(error: RefusalError) -> Response:
    return problem(error.kind, error.detail, error.errors, error.headers, **error.facts)


def _known(error: Exception) -> Response:
    kind = next(BY_ERROR[c] for c in type(error).__mro__ if c in BY_ERROR)
    if isinstance(error, FaultyError):
        count = len(error.faults)
        detail = f"{count} fault{'s' if count != 1 else ''} found; nothing was computed."
        return problem(kind, detail, [fault.as_json() for fault in error.faults])
    if kind.status >= 500:
        log.warning("%s: %s", kind.slug, error)
    headers = {"Retry-After": "5"} if kind.status == 503 else {}
    return problem(kind, _text(error), headers=headers)


def _text(error: Exception) -> str:
    # A Redis error can name hosts and ports, which are no client's business.
    if isinstance(error, RedisError):
        return QUEUE_AWAY.meaning
    # An OSError with a number prints it as well; the words are enough.
    return getattr(error, "strerror", None) or str(error)


def http_problem(error: HTTPException) -> Response:
    """Routing and parsing errors: 404, 405, 413, malformed query parameters, ..."""
    kept = {k: v for k, v in error.get_headers() if k not in ("Content-Type", "Content-Length")}
    parameters = _wrong_parameters(error)
    if parameters:
        return problem(BAD_REQUEST, "A query parameter is wrong.", parameters, kept)
    detail = error.description or error.name
    if error.code == 404:
        detail = "There is nothing at this address; /openapi.json and /docs list what there is."
    elif error.code == 405:
        detail = f"This address does not know {flask.request.method}; it allows {kept['Allow']}."
    return problem(BY_STATUS.get(error.code or 500, error), detail, headers=kept)


def _wrong_parameters(error: HTTPException) -> list[dict[str, str]]:
    """What webargs found wrong in the query, one entry for each parameter."""
    places = getattr(error, "data", {}).get("messages", {})
    return [
        parameter_fault(name, " ".join(map(str, messages)))
        for fields in places.values()
        for name, messages in fields.items()
    ]


def _unexpected(error: Exception) -> Response:
    reference = secrets.token_hex(4)
    log.error("reference %s", reference, exc_info=error)
    return problem(
        UNEXPECTED, "The server failed; nothing was changed knowingly.", reference=reference
    )

"""Errors as problem documents (RFC 9457): a table from error class to status and type.

Lower layers raise errors that carry their facts and know nothing of HTTP; views raise
`RefusalError` for what only HTTP can get wrong (media types, headers, timing).
"""

import logging
import secrets
from collections.abc import Iterable, Mapping
from typing import Any

import flask
from flask import Flask, Response
from gunicorn.http.errors import ParseException
from redis.exceptions import RedisError
from werkzeug.exceptions import HTTPException, default_exceptions

from api.problem_types import (
    BAD_REQUEST,
    BODY_TOO_LARGE,
    INVALID_DOCUMENT,
    JOB_TOO_LARGE,
    KEY_REUSED,
    MEDIA_TYPE_UNKNOWN,
    NOT_FINAL,
    OVERTAKEN,
    PICTURES_UNAVAILABLE,
    PINNED,
    QUEUE_AWAY,
    STORE_REFUSED,
    UNEXPECTED,
    UNKNOWN_JOB,
    UNMESHABLE,
    UNSOLVABLE,
    ProblemType,
)
from api.services import services
from api.unreadable import status_of, words_of
from elements.errors import FishplateError
from workers.errors import (
    AnalysisError,
    DocumentError,
    FaultyError,
    KeyConflictError,
    LimitError,
    MeshError,
    NotFinalError,
    PicturesUnavailableError,
    PinnedError,
    StoreError,
    TransitionError,
    UnknownJobError,
)

MEDIA_TYPE = "application/problem+json"
log = logging.getLogger(__name__)


BY_ERROR: Mapping[type[Exception], ProblemType] = {
    DocumentError: INVALID_DOCUMENT,
    LimitError: JOB_TOO_LARGE,
    MeshError: UNMESHABLE,
    AnalysisError: UNSOLVABLE,
    PicturesUnavailableError: PICTURES_UNAVAILABLE,
    StoreError: STORE_REFUSED,
    UnknownJobError: UNKNOWN_JOB,
    NotFinalError: NOT_FINAL,
    PinnedError: PINNED,
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
    app.register_error_handler(ParseException, _unreadable)
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
    if isinstance(error.response, Response):  # whoever raised it has said all (rates.py)
        return error.response
    kept = {k: v for k, v in error.get_headers() if k not in ("Content-Type", "Content-Length")}
    parameters = _wrong_parameters(error)
    if parameters:
        return problem(BAD_REQUEST, "A query parameter is wrong.", parameters, kept)
    detail = error.description or error.name
    if error.code == 404:
        detail = "There is nothing at this address; /openapi.json and /docs list what there is."
    elif error.code == 405:
        detail = f"This address does not know {flask.request.method}; it allows {kept['Allow']}."
    elif error.code == 413:
        limit = services().settings.body_bytes
        detail = f"The body has more than the {limit} bytes allowed."
    return problem(BY_STATUS.get(error.code or 500, error), detail, headers=kept)


def _wrong_parameters(error: HTTPException) -> list[dict[str, str]]:
    """What webargs found wrong in the query, one entry for each parameter."""
    places = getattr(error, "data", {}).get("messages", {})
    return [
        parameter_fault(name, " ".join(map(str, messages)))
        for fields in places.values()
        for name, messages in fields.items()
    ]


def _unreadable(error: ParseException) -> Response:
    """The body is not what its headers say, or does not come; the headers have been read."""
    return problem(default_exceptions[status_of(error)](), words_of(error))


def _unexpected(error: Exception) -> Response:
    reference = secrets.token_hex(4)
    log.error("reference %s", reference, exc_info=error)
    return problem(
        UNEXPECTED, "The server failed; nothing was changed knowingly.", reference=reference
    )

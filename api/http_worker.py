"""Gunicorn's threads, which answer with a problem and its cautions also what is not even HTTP.

What gunicorn cannot read never reaches the application, and its own page would carry no cautions.
"""

import logging
from http import HTTPStatus
from typing import Any

import orjson
from gunicorn import util
from gunicorn.http.errors import (
    ExpectationFailed,
    LimitRequestHeaders,
    LimitRequestLine,
    ParseException,
    UnsupportedTransferCoding,
)
from gunicorn.workers.gthread import ThreadWorker

from api.responses import with_cautions

MOST_WORDS = 200  # of what was wrong, which may be as long as the client liked
STATUS: dict[type[ParseException], HTTPStatus] = {
    ExpectationFailed: HTTPStatus.EXPECTATION_FAILED,
    LimitRequestHeaders: HTTPStatus.REQUEST_HEADER_FIELDS_TOO_LARGE,
    LimitRequestLine: HTTPStatus.REQUEST_URI_TOO_LONG,
    UnsupportedTransferCoding: HTTPStatus.NOT_IMPLEMENTED,  # RFC 9112, section 6.1
}
log = logging.getLogger(__name__)


class Worker(ThreadWorker):
    """A process of the HTTP server."""

    def handle_error(self, req: Any, client: Any, addr: Any, exc: Exception) -> None:
        """Answer a request that could not be read, or whose answer could not be sent."""
        if isinstance(exc, ParseException):
            status = STATUS.get(type(exc), HTTPStatus.BAD_REQUEST)
            detail = f"The request is not HTTP as it should be: {str(exc)[:MOST_WORDS]}"
            log.warning("unreadable request from %s: %s", addr, detail)
        else:
            status, detail = HTTPStatus.INTERNAL_SERVER_ERROR, "The answer could not be sent."
            log.error("an answer could not be sent", exc_info=exc)
        try:
            util.write_nonblock(client, answer(status, detail))
        except OSError as error:
            log.debug("nobody was there for the answer: %s", error)


def answer(status: HTTPStatus, detail: str) -> bytes:
    """A whole HTTP response with a problem document (RFC 9457)."""
    body = orjson.dumps(
        with_cautions(
            {
                "type": "about:blank",
                "title": status.phrase,
                "status": status,
                "detail": detail,
                "instance": "/",
                "errors": [],
            }
        )
    )
    head = (
        f"HTTP/1.1 {status.value} {status.phrase}\r\n"
        "Connection: close\r\n"
        "Content-Type: application/problem+json\r\n"
        f"Content-Length: {len(body)}\r\n\r\n"
    )
    return head.encode("ascii") + body

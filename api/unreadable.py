"""Requests that are not HTTP as it should be, or come in too slowly: which status they get.

Gunicorn finds them, before the application has the request or while it reads the body.
"""

from http import HTTPStatus

from gunicorn.http.errors import (
    ExpectationFailed,
    LimitRequestHeaders,
    LimitRequestLine,
    ParseException,
    UnsupportedTransferCoding,
)

MOST_WORDS = 200  # of what was wrong, which may be as long as the client liked


class SlowClientError(ParseException):
    """A client sends its request more slowly than the server waits."""

    def __str__(self) -> str:
        return "it came in too slowly"


STATUS: dict[type[ParseException], HTTPStatus] = {
    SlowClientError: HTTPStatus.REQUEST_TIMEOUT,
    ExpectationFailed: HTTPStatus.EXPECTATION_FAILED,
    LimitRequestHeaders: HTTPStatus.REQUEST_HEADER_FIELDS_TOO_LARGE,
    LimitRequestLine: HTTPStatus.REQUEST_URI_TOO_LONG,
    UnsupportedTransferCoding: HTTPStatus.NOT_IMPLEMENTED,  # RFC 9112, section 6.1
}


def status_of(error: ParseException) -> HTTPStatus:
    return STATUS.get(type(error), HTTPStatus.BAD_REQUEST)


def words_of(error: ParseException) -> str:
    """What was wrong, for the client."""
    return f"The request is not HTTP as it should be: {str(error)[:MOST_WORDS]}"

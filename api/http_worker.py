"""Gunicorn's threads, patient but not for ever, and with cautions on whatever they answer.

A thread is taken as long as a request comes in, so that a few clients who never end theirs would
keep out everybody else. And what gunicorn cannot read never reaches the application; its own page
would carry no cautions.
"""

import logging
import time
from http import HTTPStatus
from socket import socket
from typing import Any

import orjson
from gunicorn import util
from gunicorn.http.errors import ParseException
from gunicorn.workers.gthread import ThreadWorker

from api.responses import with_cautions
from api.unreadable import SlowClientError, status_of, words_of
from workers.settings import Settings

FIRST_BYTE = 5.0  # that a thread waits for; then gunicorn looks at the connection again [s]
SLOWEST = 10_000.0  # bytes per second of a body that are waited for
PATIENCE = Settings.from_environment().client_patience  # seconds, and more for a body
log = logging.getLogger(__name__)


class PatientSocket:
    """A socket that is read for a limited time, which grows with what comes in."""

    def __init__(self, inner: socket, seconds: float) -> None:
        self._inner = inner
        self._until = time.monotonic() + seconds

    def recv(self, size: int) -> bytes:
        """As of a socket; SlowClientError when the time is up."""
        usual = self._inner.gettimeout()
        left = self._until - time.monotonic()
        if left <= 0:
            raise SlowClientError
        self._inner.settimeout(left if usual is None else min(left, usual))
        try:
            data = self._inner.recv(size)
        except TimeoutError:
            if time.monotonic() < self._until:  # whoever set the shorter time knows why
                raise
            raise SlowClientError from None
        finally:
            self._inner.settimeout(usual)
        self._until += len(data) / SLOWEST
        return data

    def __getattr__(self, name: str) -> Any:
        return getattr(self._inner, name)


class Worker(ThreadWorker):
    """A process of the HTTP server."""

    def handle(self, conn: Any) -> Any:
        """Read and answer one request of a connection."""
        if conn.initialized or conn.wait_for_data(FIRST_BYTE):
            conn.init()
            conn.parser.unreader.sock = PatientSocket(conn.sock, PATIENCE)
        return super().handle(conn)

    def handle_error(self, req: Any, client: Any, addr: Any, exc: Exception) -> None:
        """Answer a request that could not be read, or whose answer could not be sent."""
        if isinstance(exc, ParseException):
            status, detail = status_of(exc), words_of(exc)
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

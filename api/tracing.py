"""A name for every request, and a log entry with what became of it.

A client, or a proxy, may name its request in `X-Request-Id`; the name stands in every log entry and
in the audit log, and comes back with the answer.
"""

import logging
import re
import secrets
import time

import flask
from flask import Flask, Response

from workers import logs

HEADER = "X-Request-Id"
# What may stand in a header and in a file of lines without meaning anything there.
_NAME = re.compile(r"[A-Za-z0-9._-]{1,64}")
QUIET = frozenset({"health.live", "health.ready", "metrics.show"})  # asked every few seconds

log = logging.getLogger("api.access")


def register(app: Flask) -> None:
    """Name every request of the application; before anything else looks at it."""
    app.before_request(_begin)
    app.after_request(_end)


def _begin() -> None:
    given = flask.request.headers.get(HEADER, "")
    flask.g.request_id = given if _NAME.fullmatch(given) else secrets.token_hex(8)
    flask.g.began = time.monotonic()
    logs.begin(request=flask.g.request_id)


def _end(answer: Response) -> Response:
    answer.headers[HEADER] = flask.g.request_id
    asks = flask.g.get("caller")
    path, method = flask.request.path, flask.request.method
    facts = {
        "method": method,
        "path": path,
        "status": answer.status_code,
        "milliseconds": round(1000 * (time.monotonic() - flask.g.began), 1),
        "who": asks.name if asks else None,
        "address": flask.request.remote_addr,
    }
    if job := (flask.request.view_args or {}).get("job_id"):
        facts["job"] = job
    level = logging.DEBUG if flask.request.endpoint in QUIET else logging.INFO
    log.log(level, "%s %s %d", method, path, answer.status_code, extra={"facts": facts})
    return answer

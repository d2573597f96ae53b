"""Log entries as JSON objects, one a line, with the request and the job that they belong to.

    {"at": "...", "level": "info", "logger": "api.access", "message": "...", "request": "...",
     "job": "...", ...}

Every process of the server writes them to its standard error. A line break in a name or a message
cannot make a second entry: JSON has it escaped.
"""

import json
import logging
import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from contextvars import ContextVar
from datetime import UTC, datetime
from typing import Any

from workers.record import timestamp

_facts: ContextVar[Mapping[str, Any]] = ContextVar("facts", default={})  # noqa: B039  a Mapping


@contextmanager
def about(**facts: Any) -> Iterator[None]:
    """Add facts to every entry of this thread that is written inside."""
    token = _facts.set({**_facts.get(), **facts})
    try:
        yield
    finally:
        _facts.reset(token)


def begin(**facts: Any) -> None:
    """From now on every entry of this thread has these facts and no others."""
    _facts.set(facts)


class JsonLines(logging.Formatter):
    """The one formatter. Further facts of an entry come as `extra={"facts": {...}}`."""

    def format(self, record: logging.LogRecord) -> str:
        entry: dict[str, Any] = {
            "at": timestamp(datetime.fromtimestamp(record.created, UTC)),
            "level": record.levelname.lower(),
            "logger": record.name,
            "message": record.getMessage(),
            **_facts.get(),
            **getattr(record, "facts", {}),
        }
        if record.exc_info:
            entry["trace"] = self.formatException(record.exc_info)
        # Not orjson: it refuses what a name may hold that was no valid text, and a log must not.
        return json.dumps(entry, default=str)


def configure(level: str) -> None:
    """Write every entry of this process from `level` upwards as a line on standard error."""
    handler = logging.StreamHandler(sys.stderr)
    handler.setFormatter(JsonLines())
    root = logging.getLogger()
    root.handlers[:] = [handler]
    root.setLevel(level.upper())
    logging.captureWarnings(True)


def for_gunicorn(level: str) -> dict[str, Any]:
    """The same in the form of `logging.config.dictConfig`, for gunicorn's own entries as well."""
    return {
        "version": 1,
        "disable_existing_loggers": False,
        "formatters": {"lines": {"()": JsonLines}},
        "handlers": {
            "errors": {
                "class": "logging.StreamHandler",
                "formatter": "lines",
                "stream": "ext://sys.stderr",
            }
        },
        "root": {"level": level.upper(), "handlers": ["errors"]},
        # Of its own requests and workers gunicorn has nothing to say that is not said elsewhere.
        "loggers": {"gunicorn.error": {"level": "WARNING", "handlers": [], "propagate": True}},
    }

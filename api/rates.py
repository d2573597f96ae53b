"""How often one client may ask: limits counted in Redis, by all API processes together.

While Redis is away each process counts for itself, so that the limits become wider by the number of
processes and the API goes on: it accepts jobs without Redis, because the store is the truth, and a
limit that closed it would turn a small failure into a large one. What is bounded by the store (the
length of the line, sizes) is bounded all the time. Without tokens there is nobody to be fair to,
and nothing is counted.
"""

import time
from typing import Any

import flask
from flask import Flask, Response
from flask_limiter import Limiter, RequestLimit

from api import access
from api.problem_types import TOO_MANY
from api.problems import problem
from workers.queue import redis_address
from workers.setting_readers import OFF
from workers.settings import Settings

# What costs a worker time.
SUBMITTING = ("jobs.submit", "checks.make_check")
TIMEOUTS: Any = {
    "socket_timeout": 1.0,
    "socket_connect_timeout": 1.0,
}  # a limit must not hold up [s]


def register(app: Flask, settings: Settings) -> None:
    """Limit the rates of an application whose views are all there."""
    limiter = Limiter(
        access.rate_key,
        application_limits=[] if settings.request_rate == OFF else [settings.request_rate],
        storage_uri=redis_address(settings).replace("unix://", "redis+unix://"),
        storage_options=dict(TIMEOUTS),
        in_memory_fallback_enabled=True,
        key_prefix="fishplate:rate",
        on_breach=_too_many,
    )
    limiter.request_filter(_is_free)
    limiter.init_app(app)
    if settings.submit_rate != OFF:
        limit = limiter.limit(settings.submit_rate, override_defaults=False)
        for endpoint in SUBMITTING:
            app.view_functions[endpoint] = limit(app.view_functions[endpoint])  # type: ignore[assignment]


def _is_free() -> bool:
    return access.is_unguarded() or flask.request.endpoint == "health.live"


def _too_many(breached: RequestLimit) -> Response:
    seconds = max(1, int(breached.reset_at - time.time()))
    return problem(
        TOO_MANY,
        f"More than {breached.limit}; the next is answered in {seconds} s.",
        headers={"Retry-After": str(seconds)},
    )

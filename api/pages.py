"""The page for a person who opens the server in a browser: jobs, how far they are, their sheets.

No script: the page asks for itself again, often as long as something is going on.
"""

from collections import Counter
from datetime import datetime
from typing import Any
from urllib.parse import urlencode

import flask
from flask import Blueprint, Response
from marshmallow import RAISE, ValidationError, fields

from api.access import caller
from api.jobs import describe
from api.problem_types import BAD_REQUEST
from api.problems import RefusalError, parameter_fault
from api.responses import text_answer
from api.schemas import JobQuerySchema
from api.services import services
from workers.cautions import SEVERITIES, STANDING
from workers.record import FINISHED, STATES, UNFINISHED, Record

blueprint = Blueprint("pages", __name__, template_folder="templates")

POLICY = (
    "default-src 'none'; style-src 'unsafe-inline'; base-uri 'none'; form-action 'self'; "
    "frame-ancestors 'none'"
)
BUSY, IDLE = 5, 60  # until the page asks for itself again [s]


class PageQuerySchema(JobQuerySchema):
    """Which jobs to show, and whether the page should hold still."""

    hold = fields.Boolean(load_default=False)


@blueprint.get("/")
@blueprint.get("/jobs")
def show_jobs() -> Response:
    """The jobs that the caller may see, newest first."""
    query = _query()
    chosen = {name: query[name] for name in ("state", "label") if name in query}
    page = services().store.list(
        **chosen, workspace=caller().scope, after=query.get("after"), limit=query["limit"]
    )
    busy = any(record.state in UNFINISHED for record in page.records)
    html = flask.render_template(
        "jobs.html",
        jobs=[_row(record) for record in page.records],
        chosen=chosen,
        states=STATES,
        cautions=STANDING,
        refresh=None if query["hold"] else BUSY if busy else IDLE,
        hold=_address(query, hold=True),
        release=_address(query, hold=None),
        following=_address(query, after=page.after) if page.after else None,
        first=_address(query, after=None) if query.get("after") else None,
    )
    answer = text_answer(html, "text/html")
    answer.headers["Content-Security-Policy"] = POLICY
    answer.headers["Cache-Control"] = "no-cache"
    return answer


def _query() -> dict[str, Any]:
    """What the address asks for; a form sends its empty fields, too."""
    given = {name: value for name, value in flask.request.args.items() if value}
    try:
        query: dict[str, Any] = PageQuerySchema(unknown=RAISE).load(given)
    except ValidationError as error:
        faults = [
            parameter_fault(name, " ".join(messages))
            for name, messages in error.normalized_messages().items()
        ]
        raise RefusalError(BAD_REQUEST, "A query parameter is wrong.", errors=faults) from error
    return query


def _address(query: dict[str, Any], **changes: Any) -> str:
    """This page with other parameters."""
    wanted = {**query, **changes}
    return "/jobs?" + urlencode({k: v for k, v in wanted.items() if v not in (None, "", False)})


def _row(record: Record) -> dict[str, Any]:
    """What a row shows of a job: its description, and what a person wants to know of it."""
    counts = Counter(caution["severity"] for caution in record.cautions)
    return {
        **describe(record),
        "is_finished": record.state == FINISHED,
        "took": _seconds(record.started, record.ended),
        "graves": [(severity, counts[severity]) for severity in SEVERITIES if counts[severity]],
    }


def _seconds(start: str | None, end: str | None) -> float | None:
    if start is None or end is None:
        return None
    return (datetime.fromisoformat(end) - datetime.fromisoformat(start)).total_seconds()

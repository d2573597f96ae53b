"""The API described: OpenAPI for programs, one self-contained HTML page for people."""

import json
from typing import Any

import flask
import orjson
from flask import Blueprint, Response, current_app
from flask_smorest import Api
from markupsafe import Markup, escape

from api import problem_types
from api.example import EXAMPLE
from api.responses import text_answer, with_cautions
from workers.cautions import STANDING

blueprint = Blueprint("docs", __name__, template_folder="templates")

LINE = 88  # characters of JSON beside each other
# Nothing on the page comes from elsewhere, and the browser is told so.
POLICY = "default-src 'none'; style-src 'unsafe-inline'; base-uri 'none'; form-action 'none'"


@blueprint.get("/openapi.json")
def openapi() -> Response:
    """The OpenAPI document; the standard wants foreign keys to start with x-."""
    document = {**_api().spec.to_dict(), "x-cautions": with_cautions({})["cautions"]}
    return text_answer(orjson.dumps(document).decode(), "application/json")


@blueprint.get("/docs")
def page() -> Response:
    """The same for people."""
    document = _api().spec.to_dict()
    html = flask.render_template(
        "docs.html",
        document=document,
        operations=list(_operations(document)),
        problem_types=problem_types.TYPES,
        cautions=STANDING,
        example=indented(EXAMPLE),
        here=flask.request.host_url.rstrip("/"),
    )
    answer = text_answer(html, "text/html")
    answer.headers["Content-Security-Policy"] = POLICY
    return answer


@blueprint.app_template_filter("code")
def mark_code(text: str | None) -> Markup:
    """Text between backticks as code, everything else as it is."""
    parts = (text or "").split("`")
    return Markup("").join(
        Markup("<code>{}</code>").format(part) if i % 2 else escape(part)
        for i, part in enumerate(parts)
    )


def indented(value: Any, margin: int = 0) -> str:
    """JSON for people: what fits on a line stays on it."""
    line = json.dumps(value, ensure_ascii=False)
    if margin + len(line) <= LINE or not isinstance(value, dict | list):
        return line
    if isinstance(value, dict):
        parts = [f"{json.dumps(key)}: {indented(part, margin + 2)}" for key, part in value.items()]
    else:
        parts = [indented(part, margin + 2) for part in value]
    pad = "\n" + " " * margin
    return f"{line[0]}{pad}  {f',{pad}  '.join(parts)}{pad}{line[-1]}"


def _api() -> Api:
    api: Api = current_app.extensions["flask-smorest"]["apis"][""]["ext_obj"]
    return api


def _operations(document: dict[str, Any]) -> Any:
    """(method, path, operation with the parameters of its path), in the order of the document."""
    for path, item in document["paths"].items():
        shared = item.get("parameters", [])
        for method, operation in item.items():
            if method != "parameters":
                own = operation.get("parameters", [])
                yield method.upper(), path, {**operation, "parameters": [*shared, *own]}

"""The API described: OpenAPI for programs, one self-contained HTML page for people."""

from typing import Any

import flask
import orjson
from flask import Blueprint, Response, current_app
from flask_smorest import Api

from api import problem_types
from api.responses import text_answer, with_cautions
from workers.cautions import STANDING

blueprint = Blueprint("docs", __name__, template_folder="templates")

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
    )
    answer = text_answer(html, "text/html")
    answer.headers["Content-Security-Policy"] = POLICY
    return answer


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

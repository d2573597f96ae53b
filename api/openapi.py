"""The OpenAPI description: flask-smorest's machinery, with problem documents as the errors."""

import http
from importlib.metadata import version
from typing import Any

import flask_smorest
from flask import Response
from flask_smorest.utils import prepare_response
from webargs.flaskparser import FlaskParser
from werkzeug.exceptions import HTTPException

from api import problems
from api.access import needed_role
from api.schemas import ProblemSchema
from workers.tokens import READ

SETTINGS = {
    "API_TITLE": "Fishplate",
    "API_VERSION": version("fishplate"),
    "OPENAPI_VERSION": "3.1.0",
}
SCHEME = "token"
ABOUT = (
    "Checks thin plates loaded in their own plane. Post a job document, wait for the job, fetch "
    "results, VTK fields and pictures. Every JSON body carries `cautions`; files carry a `Link` "
    'header with rel="describedby" that leads to them.'
)


class Api(flask_smorest.Api):
    """flask-smorest's Api whose error responses are problem documents."""

    ERROR_SCHEMA = ProblemSchema

    def describe_tokens(self) -> None:
        """How a token is sent; servers without tokens need none, hence the `{}` beside it."""
        self.spec.components.security_scheme(
            SCHEME,
            {
                "type": "http",
                "scheme": "bearer",
                "description": "A token that whoever runs the server made with `fishplate tokens "
                "add` (RFC 6750); a browser sends it as the password. On the server's own machine, "
                "as long as none was made, it is not needed.",
            },
        )

    def _register_responses(self) -> None:
        for status in [*http.HTTPStatus, None]:
            if status is not None and status < 400:
                continue
            response: dict[str, Any] = {
                "description": status.phrase if status else "Any other problem",
                "schema": ProblemSchema,
            }
            prepare_response(response, self.spec, problems.MEDIA_TYPE)
            name = status.name if status else self.DEFAULT_ERROR_RESPONSE_NAME
            self.spec.components.response(name, response, lazy=True)

    def _register_pagination_header(self) -> None:
        """Lists have cursors in their bodies; the header of page numbers is not used."""

    def handle_http_exception(self, error: HTTPException) -> Response:
        return problems.http_problem(error)


class QueryParser(FlaskParser):
    """Wrong query parameters are a bad request; 422 is kept for job documents."""

    DEFAULT_VALIDATION_STATUS = 400


class Blueprint(flask_smorest.Blueprint):
    """flask-smorest's Blueprint whose operations tell that they may need a token."""

    ARGUMENTS_PARSER = QueryParser()

    def __init__(self, *arguments: Any, **options: Any) -> None:
        super().__init__(*arguments, **options)
        self._prepare_doc_cbks.append(self._prepare_security_doc)
        self._prepare_doc_cbks.append(self._prepare_file_doc)

    @staticmethod
    def _prepare_security_doc(
        doc: dict[str, Any], doc_info: dict[str, Any], *, method: str, **_: Any
    ) -> dict[str, Any]:
        """An operation that is open to everybody says so with `security=[]`."""
        if doc_info.get("manual_doc", {}).get("security") != []:
            refusals = (401, 429) if needed_role(method.upper()) == READ else (401, 403, 429)
            doc["security"] = [{SCHEME: []}, {}]
            doc["responses"] = {**problems_of(*refusals), **doc.get("responses", {})}
        return doc

    @staticmethod
    def _prepare_file_doc(
        doc: dict[str, Any], doc_info: dict[str, Any], **_: Any
    ) -> dict[str, Any]:
        """A file can be asked for under conditions, and most files in parts (RFC 9110, 13, 14)."""
        file = doc_info.get("manual_doc", {}).get("responses", {}).get(200)
        headers = file["headers"] if isinstance(file, dict) else {}
        if "ETag" in headers:
            doc["responses"][304] = {"description": "The client has it already"}
        if "Accept-Ranges" in headers:
            content: dict[str, Any] = {media: {} for media in file["content"]}
            doc["responses"][206] = {**file, "description": "A part of the file",
                                     "content": content}  # fmt: skip
            doc["responses"] |= problems_of(416)
        return doc


def problems_of(*statuses: int) -> dict[int, str]:
    """Responses that a view may give besides its own: problem documents of these statuses."""
    return {status: http.HTTPStatus(status).name for status in statuses}


def describe_file(media_type: str, schema: Any = None, *, parts: bool = True) -> dict[str, Any]:
    """Description of a 200 response that is a file.

    parts : whether it can be asked for in parts; what is made while it is sent cannot
    """
    ranges = {"Accept-Ranges": {"schema": {"type": "string"}}} if parts else {}
    return {
        "description": "The file",
        "headers": {
            "Link": {
                "description": 'rel="describedby": where the cautions of this file are',
                "schema": {"type": "string"},
            },
            "ETag": {"schema": {"type": "string"}},
            **ranges,
        },
        "content": {media_type: {"schema": schema or {}}},
    }

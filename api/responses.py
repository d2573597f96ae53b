"""The way out of the server: every JSON body carries review cautions, every file links to them.

`CautiousJSON` is the application's JSON provider, so `flask.jsonify`, a dictionary returned from a
view and a problem all pass through it. Which cautions a job raised is in its results, not here.
"""

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

import flask
import orjson
from flask import Response
from flask.json.provider import JSONProvider

from workers.cautions import STANDING

ABOUT_CAUTIONS = "/v1/cautions"

_STANDING = [caution.as_json() for caution in STANDING]
_STANDING_CODES = {caution.code for caution in STANDING}


def with_cautions(body: Mapping[str, Any]) -> dict[str, Any]:
    """The body with a `cautions` list: its own, then the standing ones that it lacks."""
    own: Sequence[Mapping[str, Any]] = body.get("cautions") or []
    missing = [c for c in _STANDING if c["code"] not in {mine["code"] for mine in own}]
    return {**body, "cautions": [*own, *missing]}


class CautiousJSON(JSONProvider):
    """JSON by orjson; a response body must be an object and gets its cautions here."""

    def dumps(self, obj: Any, **_options: Any) -> str:
        return orjson.dumps(obj).decode()

    def loads(self, s: str | bytes, **_options: Any) -> Any:
        return orjson.loads(s)

    def response(self, *args: Any, **kwargs: Any) -> Response:
        body = self._prepare_response_obj(args, kwargs)
        if not isinstance(body, Mapping):
            raise TypeError(f"a JSON answer must be an object, not {type(body).__name__}")
        return Response(orjson.dumps(with_cautions(body)), mimetype="application/json")


def described_by(address: str) -> str:
    """Value of the Link header (RFC 8288) that leads from a file to its cautions."""
    return f'<{address}>; rel="describedby"'


def file_answer(
    path: Path, mimetype: str, cautions_at: str, download_name: str | None = None
) -> Response:
    """A file, streamed, with an ETag; answers 304 and 206 where the request asks for it.

    cautions_at : address of the JSON body whose `cautions` belong to this file.
    """
    answer = flask.send_file(path, mimetype=mimetype, download_name=download_name, conditional=True)
    answer.headers["Link"] = described_by(cautions_at)
    return answer


def stream_answer(
    pieces: Iterator[bytes], mimetype: str, cautions_at: str, download_name: str, etag: str
) -> Response:
    """A file that is made while it is sent; `etag` stands for what it is made from."""
    answer = Response(pieces, mimetype=mimetype)
    answer.headers["Link"] = described_by(cautions_at)
    answer.headers.set("Content-Disposition", "attachment", filename=download_name)
    answer.set_etag(etag, weak=True)
    answer.make_conditional(flask.request)
    return answer


def text_answer(text: str, mimetype: str, cautions_at: str = ABOUT_CAUTIONS) -> Response:
    """A document made on the fly (HTML, CSV, OpenAPI), with its ETag."""
    answer = Response(text, mimetype=mimetype)
    answer.headers["Link"] = described_by(cautions_at)
    answer.add_etag()
    answer.make_conditional(flask.request)
    return answer

"""What every answer of the server keeps to, whatever was sent."""

import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import orjson
from jsonschema import Draft202012Validator

from api.problem_types import TYPES
from workers.cautions import STANDING

# What only the inside of the program says.
LEAKS = re.compile(
    r"Traceback|File \"|\.py\b|site-packages|werkzeug|marshmallow|orjson|zlib\.|numpy"
    r"|0x[0-9a-f]{8,}|<class |Errno"
)
PART = 206  # of a file
JSON = ("application/json", "application/problem+json")
REASONS = {kind.address: kind.status for kind in TYPES}


class BrokenPromiseError(AssertionError):
    """An answer is not what it must be."""


def keeps(
    status: int, headers: Mapping[str, str], body: bytes, private: tuple[Path, ...] = ()
) -> None:
    """No failure but a stated one, nothing of the inside, and cautions.

    headers : names as HTTP writes them, in any case
    private : folders of which no answer may speak

    Raises
    ------
    BrokenPromiseError   with what is wrong.
    """
    named = {name.lower(): value for name, value in headers.items()}
    media = named.get("content-type", "").partition(";")[0]
    found: Any = orjson.loads(body) if media in JSON and body and status != PART else None
    if status >= 500:
        _require(status == 503, f"{status}: {body[:300]!r}")
        _require(REASONS.get(found["type"]) == 503, f"no reason is given: {found}")
    if status >= 400 and found is not None:
        _require(found["status"] == status, "another status in the body")
    if found is not None:
        codes = {caution["code"] for caution in found["cautions"]}
        _require({c.code for c in STANDING} <= codes, "a standing caution is missing")
    elif status == 200 and media != "text/plain":
        _require("describedby" in named.get("link", ""), "a file without a way to its cautions")
    if media in JSON or media.startswith("text/"):
        text = body.decode()
        leak = LEAKS.search(text)
        _require(leak is None, f"tells of the inside: {leak}: {text[:500]}")
        for folder in private:
            _require(str(folder) not in text, f"tells of {folder}")
    for name, value in headers.items():
        _require(not re.search(r"[\r\n\0]", value), f"header {name}: {value!r}")


def _require(kept: bool, words: str) -> None:
    if not kept:
        raise BrokenPromiseError(words)


class Described:
    """The OpenAPI document, as a judge of answers."""

    def __init__(self, document: Mapping[str, Any]) -> None:
        self.document = document
        self._forms: dict[tuple[str, str, str, str], Draft202012Validator] = {}

    def judge(self, method: str, path: str, status: int, media: str, body: bytes) -> None:
        """Raises BrokenPromiseError when an operation answers what it does not declare."""
        answers = self.document["paths"][path][method.lower()]["responses"]
        where = f"{method} {path} {status} {media}"
        _require(str(status) in answers, f"{where}: this status is not declared")
        declared = self._resolve(answers[str(status)])
        _require(media in declared["content"], f"{where}: this type is not declared")
        schema = declared["content"][media].get("schema")
        if schema and media in JSON:
            key = (method, path, str(status), media)
            if key not in self._forms:
                whole = {**schema, "components": self.document["components"]}
                self._forms[key] = Draft202012Validator(whole)
            wrong = [e.message for e in self._forms[key].iter_errors(orjson.loads(body))]
            _require(not wrong, f"{where}: {wrong[:3]}")

    def _resolve(self, part: Any) -> Any:
        if "$ref" not in part:
            return part
        found: Any = self.document
        for step in part["$ref"].removeprefix("#/").split("/"):
            found = found[step]
        return found

"""A small HTTP client for a Fishplate server, by the standard library alone."""

import gzip
import json
import shutil
import time
from collections.abc import Callable, Mapping
from http import HTTPStatus
from pathlib import Path
from typing import Any
from urllib.error import HTTPError, URLError
from urllib.parse import urljoin, urlsplit
from urllib.request import Request, urlopen

from elements.errors import FishplateError

WAIT = 30  # seconds for which one request asks to be held
PATIENCE = 90  # seconds without any byte after which the server counts as gone
WORTH_PACKING = 1 << 16  # bytes; smaller documents are sent as they are
TOO_MANY = 429  # too many requests or unfinished jobs: the server says when to come again
AGAIN = 5.0  # after which time to come again where it does not say [s]
LONGEST_PAUSE = 300.0  # whatever the server says [s]


def silent(_seconds: float) -> None:
    """What a client says about a pause to nobody."""


class ServerError(FishplateError):
    """The server refused or did not answer.

    status : HTTP status, None when there was no answer.
    errors : faults as the server listed them.
    """

    def __init__(self, message: str, status: int | None = None, errors: Any = ()) -> None:
        super().__init__(message)
        self.status = status
        self.errors = list(errors)


class Client:
    """Talks to the server at one base address, with a token where one is needed.

    Where the server has too much to do (429), waits as long as it asks for and tries again; told to
    `on_pause`, with the seconds, before each pause.

    Raises ServerError where the server refuses or is silent.
    """

    def __init__(
        self, url: str, token: str | None = None, on_pause: Callable[[float], None] = silent
    ) -> None:
        if urlsplit(url).scheme not in ("http", "https"):
            raise ServerError(f"{url} is no http:// or https:// address", status=400)
        self.url = url if url.endswith("/") else url + "/"
        self.token = token
        self.on_pause = on_pause

    @property
    def shows_token(self) -> bool:
        """Whether others on the way can read the token."""
        parts = urlsplit(self.url)
        return (
            self.token is not None
            and parts.scheme == "http"
            and parts.hostname not in ("localhost", "127.0.0.1", "::1")
        )

    def submit(
        self, document: bytes, key: str, priority: str | None = None
    ) -> tuple[dict[str, Any], bool]:
        """Send a document; the key makes it safe to send again.

        Returns the job, and whether it is new: False where the key was used before.
        """
        headers = {"Content-Type": "application/json", "Idempotency-Key": key}
        if len(document) >= WORTH_PACKING:
            document = gzip.compress(document, compresslevel=1)
            headers["Content-Encoding"] = "gzip"
        query = f"?priority={priority}" if priority else ""
        request = Request(self._at("v1/jobs" + query), document, headers, method="POST")
        with self._open(request) as answer:
            return json.load(answer), answer.status == HTTPStatus.ACCEPTED

    def job(self, job_id: str, wait: int = WAIT) -> dict[str, Any]:
        """State of a job, held by the server until it is final or the wait is over."""
        return self._json(
            Request(self._at(f"v1/jobs/{job_id}"), headers={"Prefer": f"wait={wait}"})
        )

    def results(self, job_id: str) -> dict[str, Any]:
        """Results of a finished job."""
        return self._json(Request(self._at(f"v1/jobs/{job_id}/results")))

    def fetch(self, path: str, target: Path) -> None:
        """Download a file of the server; the path comes percent-encoded."""
        target.parent.mkdir(parents=True, exist_ok=True)
        with self._open(Request(self._at(path))) as answer, target.open("wb") as file:
            shutil.copyfileobj(answer, file)

    def _at(self, path: str) -> str:
        return urljoin(self.url, path.lstrip("/"))

    def _json(self, request: Request) -> dict[str, Any]:
        with self._open(request) as answer:
            body: dict[str, Any] = json.load(answer)
            return body

    def _open(self, request: Request) -> Any:
        if self.token is not None:
            # Not to wherever an answer might lead.
            request.add_unredirected_header("Authorization", f"Bearer {self.token}")
        while True:
            try:
                return urlopen(request, timeout=PATIENCE)
            except HTTPError as error:
                with error:
                    if error.code != TOO_MANY:
                        raise _refusal(error) from error
                    seconds = _pause(error)
            except OSError as error:
                raise ServerError(self._why_silent(error)) from error
            self.on_pause(seconds)
            time.sleep(seconds)

    def _why_silent(self, error: OSError) -> str:
        reason = error.reason if isinstance(error, URLError) else error
        if isinstance(reason, BrokenPipeError | ConnectionResetError):
            # What a server does that refuses a large body before it has read all of it.
            return (
                f"{self.url} closed the connection while the document was on its way; it is "
                "probably larger than the server accepts"
            )
        return f"{self.url} does not answer: {reason}"


def _pause(error: HTTPError) -> float:
    """Seconds after which to come again (RFC 9110, 10.2.3; a date is not understood)."""
    text = error.headers.get("Retry-After", "")
    return min(float(text), LONGEST_PAUSE) if text.isdecimal() else AGAIN


def _refusal(error: HTTPError) -> ServerError:
    problem = _problem(error)
    return ServerError(
        f"{problem.get('title', error.reason)}: {problem.get('detail', '')}",
        error.code,
        problem.get("errors", ()),
    )


def _problem(error: HTTPError) -> Mapping[str, Any]:
    try:
        body = json.load(error)
    except ValueError:
        return {}
    return body if isinstance(body, dict) else {}

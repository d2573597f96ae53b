"""A real `fishplate serve`, with what a client needs to use it."""

import json
import subprocess
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from urllib.request import Request, urlopen

from tests.real_server import PATIENCE, serving


@dataclass(frozen=True)
class Server:
    process: "subprocess.Popen[bytes]"
    url: str
    store: Path

    def get(self, path: str, **headers: str) -> bytes:
        named = {name.replace("_", "-"): value for name, value in headers.items()}
        with urlopen(Request(self.url + path, headers=named), timeout=PATIENCE) as answer:
            content: bytes = answer.read()
            return content

    def submit(self, document: Any) -> str:
        """Address of the job."""
        data = json.dumps(document).encode()
        request = Request(self.url + "/v1/jobs", data, {"Content-Type": "application/json"})
        with urlopen(request, timeout=PATIENCE) as answer:
            assert answer.status == 202
            return str(answer.headers["Location"])

    def finished(self, address: str) -> Any:
        """The job, once it is finished."""
        until = time.monotonic() + PATIENCE
        while True:
            job = json.loads(self.get(address, Prefer="wait=30"))
            if job["state"] not in ("queued", "running"):
                assert job["state"] == "finished", job
                return job
            assert time.monotonic() < until


@contextmanager
def running_server(store: Path, *options: str, **settings: str) -> Iterator[Server]:
    """A server on a free port of this machine; its log is beside the store."""
    named = {f"FISHPLATE_{name.upper()}": value for name, value in settings.items()}
    with serving(store, named, "--store", store, *options) as (process, url):
        yield Server(process, url, store)

"""Jobs that a server works on: sent so that repeating does no harm, and followed to their end."""

import hashlib
import time
import uuid
from collections import deque
from collections.abc import Iterator
from typing import Any

from api.commands.client import Client
from api.commands.documents import Document
from api.commands.terminal import Many, progress
from workers.record import RUNNING, UNFINISHED

PAUSE = 0.25  # shortest time between two looks at a job [s]
LOOKS = 10  # at jobs between two pauses: far below the rate that a server allows

Job = dict[str, Any]
Sent = tuple[Document, Job]


def key_of(document: bytes, anew: bool) -> str:
    """The key under which a document is sent.

    That of the same document is always the same, so that a repeated command finds the earlier job;
    anew : a key that was never used before.
    """
    if anew:
        return str(uuid.uuid4())
    return f"fishplate submit {hashlib.sha256(document).hexdigest()}"


def follow(client: Client, job: Job) -> Job:
    """Wait until the job is final, showing where it is."""
    with progress() as report:
        while job["state"] in UNFINISHED:
            report(*_where(job))
            asked = time.monotonic()
            job = client.job(job["id"], wait=1)  # a person watches: no stage should go unseen long
            # A busy server may answer at once instead of holding the request.
            if job["state"] in UNFINISHED:
                _pause(asked)
    return job


def follow_all(client: Client, sent: list[Sent], many: Many) -> Iterator[Sent]:
    """Each job when it is final; they are looked at in turn, because they end in any order."""
    yield from (pair for pair in sent if pair[1]["state"] not in UNFINISHED)
    waiting = deque(pair for pair in sent if pair[1]["state"] in UNFINISHED)
    while waiting:
        asked = time.monotonic()
        for look in range(min(LOOKS, len(waiting))):
            document, job = waiting.popleft()
            job = client.job(job["id"], wait=0 if look else 1)
            if job["state"] in UNFINISHED:
                waiting.append((document, job))
                if job["state"] == RUNNING:
                    many.now(document.name)(*_where(job))
            else:
                yield document, job
        if waiting:
            _pause(asked)


def _where(job: Job) -> tuple[str, float]:
    now = job["progress"] or {"stage": job["state"], "fraction": 0.0}
    return now["stage"], now["fraction"]


def _pause(since: float) -> None:
    time.sleep(max(0.0, PAUSE - (time.monotonic() - since)))

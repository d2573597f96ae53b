"""The record of a job: its id, its state history, and which change of state is legal.

Pure data; where records are kept is in `store.py`.
"""

import re
import secrets
import time
from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from typing import Any

import orjson

from workers.errors import Fault, TransitionError

QUEUED, RUNNING, FINISHED, FAILED, CANCELLED = STATES = (
    "queued",
    "running",
    "finished",
    "failed",
    "cancelled",
)
UNFINISHED = frozenset({QUEUED, RUNNING})
INTERACTIVE, BULK = PRIORITIES = ("interactive", "bulk")
DEFAULT_WORKSPACE = "default"  # of whoever works without tokens, or was given no other
# running -> queued: its worker was killed or shut down. A final state is never left.
LEGAL = {
    QUEUED: frozenset({RUNNING, CANCELLED}),
    RUNNING: frozenset({QUEUED, FINISHED, FAILED, CANCELLED}),
}

# Why a job failed, in one word each, for counting.
DOCUMENT, MESH, ANALYSIS, LIMIT, TIME, MEMORY, DISK, KILLED, PROGRAM = CAUSES = (
    "document", "mesh", "analysis", "limit", "time", "memory", "disk", "killed", "program",
)  # fmt: skip

# --- ids -----------------------------------------------------------------------------------------

# Base 32 without i, l, o, u; its order is the order of the characters, so ids sort by time.
ALPHABET = "0123456789abcdefghjkmnpqrstvwxyz"
TIME_CHARACTERS = 11  # 55 bits of microseconds since 1970: enough for a thousand years
CHANCE_CHARACTERS = 15  # 75 bits: not to be guessed
_ID = re.compile(f"[{ALPHABET}]{{{TIME_CHARACTERS + CHANCE_CHARACTERS}}}")


def new_id() -> str:
    """A time-ordered id that nobody can guess."""
    return _base32(time.time_ns() // 1000, TIME_CHARACTERS) + _base32(
        secrets.randbits(5 * CHANCE_CHARACTERS), CHANCE_CHARACTERS
    )


def is_id(text: str) -> bool:
    """Whether the text has the form of an id; it is then safe as the name of a folder."""
    return _ID.fullmatch(text) is not None


def day_of(job_id: str) -> str:
    """The UTC day inside an id, e.g. "2031-04-05"."""
    return time_of(job_id).date().isoformat()


def time_of(job_id: str) -> datetime:
    """When the id was made, UTC."""
    microseconds = 0
    for character in job_id[:TIME_CHARACTERS]:
        microseconds = 32 * microseconds + ALPHABET.index(character)
    return datetime(1970, 1, 1, tzinfo=UTC) + timedelta(microseconds=microseconds)


def age_of(job_id: str) -> float:
    """Seconds since the id was made."""
    return max(0.0, (datetime.now(UTC) - time_of(job_id)).total_seconds())


def _base32(value: int, length: int) -> str:
    return "".join(ALPHABET[value >> 5 * place & 31] for place in reversed(range(length)))


# --- the record ----------------------------------------------------------------------------------


@dataclass(frozen=True)
class Event:
    """One entry of the history: when the job came into a state, and why where that needs words."""

    state: str
    at: str  # RFC 3339, UTC
    reason: str | None = None


@dataclass(frozen=True)
class Record:
    """What is known of a job besides its document and its results.

    attempts  : how often a worker has begun it; one that was shut down in order does not count.
    reason    : why it failed or was cancelled, in plain words.
    cause     : the same as one of few words, for counting; when it failed.
    faults    : what is wrong in the document, when that is why it failed.
    cautions  : those of the results, once it is finished.
    key       : digest of the workspace and the Idempotency-Key.
    workspace : whose it is; owner: name of the token that it came with.
    priority  : the line that it stands in.
    pinned    : never removed for its age or for the room that it takes.
    model     : digest that jobs of the same model share; None where there is nothing to share.
    outcome   : what its batch wants to know of the results: units, mesh and envelope.
    """

    id: str
    title: str
    label: str | None
    checksum: str  # "sha256:..." of the document
    size: int  # of the document [bytes]
    history: tuple[Event, ...]
    attempts: int = 0
    faults: tuple[Fault, ...] = ()
    cautions: tuple[Mapping[str, Any], ...] = ()
    key: str | None = None
    workspace: str = DEFAULT_WORKSPACE
    owner: str | None = None
    priority: str = BULK
    pinned: bool = False
    cause: str | None = None
    model: str | None = None
    outcome: Mapping[str, Any] | None = None

    @property
    def state(self) -> str:
        return self.history[-1].state

    @property
    def reason(self) -> str | None:
        return self.history[-1].reason

    @property
    def is_final(self) -> bool:
        return self.state not in UNFINISHED

    @property
    def accepted(self) -> str:
        return self.history[0].at

    @property
    def started(self) -> str | None:
        """When the last attempt began."""
        return next((e.at for e in reversed(self.history) if e.state == RUNNING), None)

    @property
    def ended(self) -> str | None:
        return self.history[-1].at if self.is_final else None

    def moved(self, state: str, *, reason: str | None = None, **facts: Any) -> "Record":
        """The record after a change of state; `facts` are fields that change with it.

        Raises
        ------
        TransitionError   the change is not legal; a final state is never left.
        """
        if state not in LEGAL.get(self.state, frozenset()):
            raise TransitionError(self.id, self.state, state)
        facts.setdefault("attempts", self.attempts + (state == RUNNING))
        return replace(self, history=(*self.history, Event(state, now(), reason)), **facts)

    def as_json(self) -> dict[str, Any]:
        return {
            "id": self.id,
            "title": self.title,
            "label": self.label,
            "checksum": self.checksum,
            "size": self.size,
            "history": [{"state": e.state, "at": e.at, "reason": e.reason} for e in self.history],
            "attempts": self.attempts,
            "faults": [fault.as_json() for fault in self.faults],
            "cautions": [dict(caution) for caution in self.cautions],
            "key": self.key,
            "workspace": self.workspace,
            "owner": self.owner,
            "priority": self.priority,
            "pinned": self.pinned,
            "cause": self.cause,
            "model": self.model,
            "outcome": self.outcome,
        }

    def as_bytes(self) -> bytes:
        return orjson.dumps(self.as_json(), option=orjson.OPT_INDENT_2)

    @classmethod
    def from_bytes(cls, data: bytes) -> "Record":
        document = orjson.loads(data)
        history = tuple(Event(**event) for event in document.pop("history"))
        faults = tuple(Fault(**fault) for fault in document.pop("faults"))
        cautions = tuple(document.pop("cautions"))
        return cls(**document, history=history, faults=faults, cautions=cautions)


def now() -> str:
    """The time of the day, UTC, as RFC 3339 writes it."""
    return timestamp(datetime.now(UTC))


def timestamp(moment: datetime) -> str:
    """A time in UTC as RFC 3339 writes it; texts of this form sort as the times do."""
    return moment.isoformat(timespec="milliseconds").replace("+00:00", "Z")

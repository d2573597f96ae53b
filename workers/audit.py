"""Who submitted and deleted what: one JSON object a line, added and never changed.

    audit/YYYY-MM.jsonl     in the store, readable by its owner only

A line that cannot be written (a full disk) goes to the log, in full, and what it tells of goes on:
deleting must stay possible on a full disk, and what was accepted is accepted.
"""

import logging
from pathlib import Path
from typing import Any

import orjson

from workers import durable
from workers.record import now

FOLDER = "audit"
# What is done, in the words of the log.
SUBMITTED, CANCELLED, REMOVED, EXPIRED, PINNED, UNPINNED, TOKEN_ADDED, TOKEN_REVOKED = ACTIONS = (
    "submitted", "cancelled", "removed", "expired", "pinned", "unpinned", "token added",
    "token revoked",
)  # fmt: skip

log = logging.getLogger(__name__)


class Audit:
    """The audit log of one store."""

    def __init__(self, root: Path) -> None:
        self.folder = root / FOLDER

    def note(self, action: str, **facts: Any) -> None:
        """Add a line: when, what, and the facts that are not None."""
        entry = {"at": now(), "action": action}
        entry |= {name: fact for name, fact in facts.items() if fact is not None}
        path = self.folder / f"{entry['at'][:7]}.jsonl"
        try:
            durable.make_folder(self.folder)
            self.folder.chmod(0o700)
            durable.append(path, orjson.dumps(entry, option=orjson.OPT_APPEND_NEWLINE))
        except OSError as error:
            log.error("not in the audit log (%s): %s", error, orjson.dumps(entry).decode())

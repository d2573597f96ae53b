"""The audit log: whole lines, added only, by any number of processes."""

import errno
import json
import logging
import multiprocessing
import os
import stat
from typing import Any

import pytest

from workers import durable
from workers.audit import REMOVED, SUBMITTED, Audit
from workers.store import Store


@pytest.fixture
def audit(store: Store) -> Audit:
    return Audit(store.root)


def entries(audit: Audit) -> list[dict[str, Any]]:
    text = "".join(path.read_text() for path in sorted(audit.folder.iterdir()))
    return [json.loads(line) for line in text.splitlines()]


def test_entries_say_when_what_and_who(audit: Audit) -> None:
    audit.note(SUBMITTED, who="ana", job="1", workspace=None)
    audit.note(REMOVED, who="ben\n{}", job="1")
    first, second = entries(audit)
    assert {k: v for k, v in first.items() if k != "at"} == {
        "action": "submitted", "who": "ana", "job": "1"
    }  # fmt: skip
    assert second["who"] == "ben\n{}"  # one line all the same
    assert first["at"] <= second["at"]


def test_the_log_is_its_owners_alone(audit: Audit) -> None:
    audit.note(SUBMITTED)
    (path,) = audit.folder.iterdir()
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    assert stat.S_IMODE(audit.folder.stat().st_mode) == 0o700


def test_lines_of_many_processes_stay_whole(audit: Audit) -> None:
    def write(name: str) -> None:
        for n in range(25):
            audit.note(SUBMITTED, who=name, job=str(n), filler="x" * 5000)

    fork = multiprocessing.get_context("fork")
    writers = [fork.Process(target=write, args=(name,)) for name in "abcd"]
    for writer in writers:
        writer.start()
    for writer in writers:
        writer.join()
    assert len(entries(audit)) == 100


def test_a_full_disk_leaves_whole_lines_and_the_entry_in_the_log(
    audit: Audit, monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture
) -> None:
    audit.note(SUBMITTED, job="1")

    def full(_descriptor: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    with monkeypatch.context() as patch, caplog.at_level(logging.ERROR):
        patch.setattr(durable.os, "fsync", full)
        audit.note(REMOVED, job="2", who="ana")
    assert '"job":"2","who":"ana"' in caplog.text
    audit.note(REMOVED, job="3")
    assert [entry["job"] for entry in entries(audit)] == ["1", "3"]

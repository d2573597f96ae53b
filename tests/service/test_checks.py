"""Where checks are kept: the same question is the same check, and an hour later it is gone."""

import os
import time
from pathlib import Path

import pytest

from tests.service_pool import Service, eventually
from workers.checks import KEPT, Checks
from workers.errors import StoreError

DOCUMENT = b'{"title": "Cradle bracket"}'


@pytest.fixture
def checks(tmp_path: Path) -> Checks:
    return Checks(tmp_path)


def answer(checks: Checks, check_id: str, text: str) -> None:
    found = checks.root / "found"
    found.mkdir()
    (found / "check.json").write_text(text)
    checks.publish(check_id, found)


def age(checks: Checks, check_id: str, seconds: float) -> None:
    """Make the check look as if nobody had asked about it for so long."""
    then = time.time() - seconds
    for path in (checks.root / check_id / "job.json", checks.root / check_id):
        os.utime(path, (then, then))


def test_a_document_is_kept_byte_for_byte_under_one_id(checks: Checks) -> None:
    check_id = checks.file(DOCUMENT)
    assert checks.file(DOCUMENT) == check_id
    assert checks.file(DOCUMENT + b" ") != check_id
    assert checks.document(check_id) == DOCUMENT


def test_workspaces_do_not_share_checks(checks: Checks) -> None:
    ids = [checks.file(DOCUMENT, workspace) for workspace in ("yard", "office")]
    assert ids[0] != ids[1]
    assert [checks.workspace(check_id) for check_id in ids] == ["yard", "office"]


def test_the_first_answer_stays(checks: Checks) -> None:
    """A lost worker and its successor may both have worked on it."""
    check_id = checks.file(DOCUMENT)
    assert checks.answer(check_id) is None
    answer(checks, check_id, "first")
    folder = checks.answer(check_id)
    assert folder is not None
    answer(checks, check_id, "second")
    assert (folder / "check.json").read_text() == "first"


@pytest.mark.parametrize("name", ["..", "../jobs", "", "x" * 32, "A" * 32, "0" * 32])
def test_what_is_no_check_is_not_known_and_not_a_path(checks: Checks, name: str) -> None:
    checks.file(DOCUMENT)
    assert checks.workspace(name) is None
    with pytest.raises(StoreError):
        checks.document(name)


def test_checks_go_an_hour_after_the_last_question(checks: Checks) -> None:
    old, new = checks.file(DOCUMENT), checks.file(b"{}")
    answer(checks, old, "found")
    age(checks, old, KEPT + 60)
    age(checks, new, KEPT - 60)
    checks.expire()
    assert checks.workspace(old) is None
    assert checks.workspace(new) is not None
    assert [path.name for path in checks.root.iterdir() if path.is_dir()] == [new]
    with pytest.raises(StoreError, match="send its document again"):
        checks.document(old)


@pytest.mark.parametrize("ask", [lambda c, i: c.file(DOCUMENT), lambda c, i: c.document(i)])
def test_a_question_keeps_a_check_for_another_hour(checks: Checks, ask) -> None:
    check_id = checks.file(DOCUMENT)
    age(checks, check_id, KEPT + 60)
    ask(checks, check_id)
    checks.expire()
    assert checks.workspace(check_id) is not None
    assert checks.expires(check_id) == pytest.approx(time.time() + KEPT, abs=60)


def test_what_a_crash_left_half_done_goes_as_well(checks: Checks) -> None:
    half = checks.root / ("0" * 32)
    half.mkdir(parents=True)
    os.utime(half, (0, 0))
    assert checks.workspace(half.name) is None
    checks.expire()
    assert not half.exists()


def test_a_folder_that_cannot_be_written_is_a_store_error(checks: Checks) -> None:
    checks.root.write_text("a file where the folder should be")
    with pytest.raises(StoreError, match="could not be filed"):
        checks.file(DOCUMENT)
    checks.expire()


@pytest.mark.server
def test_the_reconciler_removes_what_is_too_old(service: Service) -> None:
    checks = Checks(service.settings.store)
    old, new = checks.file(DOCUMENT), checks.file(b"{}")
    age(checks, old, KEPT + 60)
    eventually(lambda: checks.workspace(old) is None)
    assert checks.workspace(new) is not None

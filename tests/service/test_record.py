"""Records: ids sort by time, and only legal changes of state happen."""

import itertools
from datetime import UTC, datetime

import pytest

from workers.errors import Fault, TransitionError
from workers.record import STATES, Event, Record, day_of, is_id, new_id, now

# What the design says may follow a state; written out here on purpose.
MAY_FOLLOW = {
    ("queued", "running"),
    ("queued", "cancelled"),
    ("running", "queued"),
    ("running", "finished"),
    ("running", "failed"),
    ("running", "cancelled"),
}


def record_in(state: str) -> Record:
    return Record(new_id(), "lug", None, "sha256:0", 2, (Event(state, now()),))


@pytest.mark.parametrize(("before", "after"), list(itertools.product(STATES, STATES)))
def test_exactly_the_legal_changes_of_state_happen(before: str, after: str) -> None:
    if (before, after) in MAY_FOLLOW:
        assert record_in(before).moved(after).state == after
    else:
        with pytest.raises(TransitionError, match=f"is {before}; it cannot become {after}"):
            record_in(before).moved(after)


def test_ids_sort_by_the_time_they_were_made() -> None:
    ids = []
    for _ in range(50):
        ids.append(new_id())
        before = datetime.now(UTC)
        while datetime.now(UTC) == before:  # the next microsecond
            pass
    assert ids == sorted(ids)


def test_an_id_knows_its_day() -> None:
    days = {datetime.now(UTC).date().isoformat()}
    job_id = new_id()
    days.add(datetime.now(UTC).date().isoformat())  # midnight may have passed in between
    assert day_of(job_id) in days


def test_ids_of_one_moment_differ_by_chance(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("time.time_ns", lambda: 1_900_000_000_000_000_000)
    ids = {new_id() for _ in range(1000)}
    assert len(ids) == 1000
    # 1 900 000 000 s after 1970 is 17 March 2030 (GNU date -u -d @1900000000).
    assert {day_of(job_id) for job_id in ids} == {"2030-03-17"}


@pytest.mark.parametrize("text", ["", "..", "../../etc/passwd", "0" * 25, "0" * 27, "U" * 26])
def test_what_is_no_id_never_becomes_a_path(text: str) -> None:
    assert is_id(new_id())
    assert not is_id(text)


def test_a_record_survives_being_written() -> None:
    record = (
        record_in("queued")
        .moved("running")
        .moved(
            "failed",
            reason="the plate tore",
            faults=(Fault("/plate/thickness", "must be above 0"),),
        )
    )
    assert Record.from_bytes(record.as_bytes()) == record
    assert (record.attempts, record.reason) == (1, "the plate tore")
    assert record.accepted <= record.started <= record.ended

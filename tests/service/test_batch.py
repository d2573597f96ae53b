"""What the records of a batch tell together, without looking at any results."""

from pathlib import Path
from typing import Any

from tests.small_results import AT, CAUTION, RESULTS
from workers import batch as batch_module
from workers.batch import Batch, outcome_of, read_batch
from workers.cautions import STANDING
from workers.record import CANCELLED, FINISHED, STATES, Event, Record
from workers.store import Store

NUMBERS = {"von_mises": 100.0, "principal_max": 90.0, "principal_min": -80.0, "shear_max": 50.0,
           "displacement": 0.1, "utilisation": 0.3}  # fmt: skip


def outcome(mesh: str = "a", force: str = "N", **values: float | None) -> dict[str, Any]:
    """Of a job whose peaks have the values above unless others are given."""
    envelope = {
        name: None if value is None else
        {"value": value, "at": AT, "region": "plate", "governs": f"case of {name}"}
        for name, value in {**NUMBERS, **values}.items()
    }  # fmt: skip
    return {"units": {"length": "mm", "force": force}, "mesh": mesh, "envelope": envelope}


def record(job_id: str, state: str = FINISHED, **facts: Any) -> Record:
    return Record(job_id, f"title of {job_id}", "ropes", "", 0, (Event(state, ""),), **facts)


def batch(*records: Record) -> Batch:
    return Batch("ropes", None, records)


def test_jobs_are_counted_by_state() -> None:
    counted = batch(*(record(str(n), state) for n, state in enumerate(STATES))).counts
    assert counted == dict.fromkeys(STATES, 1)
    assert batch(record("a"), record("b")).counts == {**dict.fromkeys(STATES, 0), FINISHED: 2}


def test_the_worst_of_all_jobs_is_told_with_its_job() -> None:
    """The largest of each measure, but the lowest of the smallest principal stresses."""
    mild = record("mild", outcome=outcome(principal_min=-10.0))
    worse = record("worse", outcome=outcome(von_mises=120.0, principal_min=-200.0, shear_max=1.0))
    (found,) = batch(mild, worse).envelopes()
    assert found["jobs"] == 2
    assert found["von_mises"]["value"] == 120.0
    assert found["principal_min"]["value"] == -200.0
    assert found["principal_min"]["governs"] == {
        "job": "worse", "title": "title of worse", "case": "case of principal_min",
    }  # fmt: skip
    assert found["shear_max"]["governs"]["job"] == "mild"


def test_a_measure_that_no_job_has_is_none() -> None:
    """Without a yield strength there is no utilisation; a job that has one is compared alone."""
    without, stated = (
        record("a", outcome=outcome(utilisation=None)),
        record("b", outcome=outcome(utilisation=0.2)),
    )
    assert next(batch(without).envelopes())["utilisation"] is None
    assert next(batch(without, stated).envelopes())["utilisation"]["value"] == 0.2


def test_different_units_are_never_compared() -> None:
    found = batch(
        record("a", outcome=outcome()),
        record("b", outcome=outcome(force="kN", von_mises=0.1)),
        record("c", outcome=outcome(von_mises=110.0)),
    )
    assert [(e["units"]["force"], e["jobs"], e["von_mises"]["value"]) for e in found.envelopes()] \
        == [("N", 2, 110.0), ("kN", 1, 0.1)]  # fmt: skip
    assert found.meshes == 2  # node by node neither


def test_meshes_that_are_not_known_are_not_the_same() -> None:
    """Results of an older store do not tell their mesh."""
    old = [record(job_id, outcome={**outcome(), "mesh": None}) for job_id in "ab"]
    assert batch(*old).meshes == 2


def test_only_finished_jobs_are_compared() -> None:
    found = batch(record("a", CANCELLED), record("b", outcome=None))
    assert found.finished == ()
    assert list(found.envelopes()) == []
    assert found.meshes == 0


def test_each_caution_is_told_once_with_the_gravest_job() -> None:
    note, grave = {**CAUTION, "severity": "note"}, {**CAUTION, "severity": "stop"}
    standing = tuple(caution.as_json() for caution in STANDING)
    found = batch(
        record("a", cautions=(note, *standing)),
        record("b", cautions=(grave, *standing)),
        record("c", cautions=(*standing,)),
    ).cautions()
    assert [caution["code"] for caution in found] == [
        CAUTION["code"], *(caution.code for caution in STANDING)
    ]  # fmt: skip
    assert found[0]["severity"] == "stop"
    assert found[0]["evidence"] == {**CAUTION["evidence"], "job": "b", "jobs": 2}
    assert found[1]["evidence"]["jobs"] == 3


def test_other_finished_jobs_have_other_files(tmp_path: Path) -> None:
    one = batch(record("a", outcome=outcome()), record("b", CANCELLED))
    two = batch(record("a", outcome=outcome()), record("b", outcome=outcome()))
    assert one.file(tmp_path, "fields") != two.file(tmp_path, "fields")
    again = batch(record("a", outcome=outcome()), record("c", CANCELLED))
    assert one.file(tmp_path, "fields") == again.file(tmp_path, "fields")


def test_a_batch_is_read_whole_and_oldest_first(tmp_path: Path, monkeypatch: Any) -> None:
    """However many pages of the listing that takes."""
    monkeypatch.setattr(batch_module, "PAGE", 2)
    store = Store(tmp_path)
    ids = [store.accept(b"{}", title=str(n), label="ropes").record.id for n in range(5)]
    store.accept(b"{}", title="other", label="rope")
    store.accept(b"{}", title="none")
    assert [r.id for r in read_batch(store, "ropes", None).records] == ids


def test_results_leave_in_the_record_what_a_batch_compares() -> None:
    results = {**RESULTS, "mesh": {**RESULTS["mesh"], "digest": "d"}}
    assert outcome_of(results) == {
        "units": RESULTS["units"], "mesh": "d", "envelope": RESULTS["envelope"],
    }  # fmt: skip

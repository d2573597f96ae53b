"""The joint envelope of a batch is that of one job that holds all the cases.

A real store and real results, published as a worker publishes them.
"""

import csv
from pathlib import Path
from typing import Any

import numpy as np
import orjson
import pytest
import pyvista

from tests.job_documents import strip
from workers import pipeline
from workers.analysis.envelope import WORST, measures
from workers.batch import outcome_of, read_batch
from workers.batch_envelope import Joint, form_joint, write_joint
from workers.document.read import load
from workers.errors import MeshError
from workers.model_hash import model_hash
from workers.outputs import preview
from workers.record import DEFAULT_WORKSPACE, RUNNING
from workers.store import Store

LABEL = "ropes 2031/04"
# Different enough that every one of them governs somewhere.
CASES: dict[str, list[dict[str, Any]]] = {
    "pull": [{"on": "right", "total_force": [32_000, 0]}],
    "push down": [{"on": "right", "total_force": [-9_000, -4_000]}],
    "push up": [{"on": "right", "total_force": [-9_000, 4_000]}],
    "warm": [{"temperature_change": 80}],
}
SAME = 1e-12  # relative; the same sums, in blocks of other widths


def job(*names: str, **parts: Any) -> dict[str, Any]:
    document = {
        **strip(),
        "title": ", ".join(names),
        "label": LABEL,
        "supports": [{"on": "left", "ux": 0, "uy": 0}],
        "load_cases": {name: CASES[name] for name in names},
        **parts,
    }
    document["materials"]["steel"]["thermal_expansion"] = 1.2e-5
    return document


@pytest.fixture
def store(tmp_path: Path) -> Store:
    return Store(tmp_path / "store")


def solve(store: Store, document: dict[str, Any], workspace: str = DEFAULT_WORKSPACE) -> str:
    """File a document and publish its results; the id of the job."""
    data, found = orjson.dumps(document), load(document)
    job_id = store.accept(
        data, label=found.label, title=found.title, workspace=workspace, model=model_hash(found)
    ).record.id
    store.transition(job_id, RUNNING)
    with store.working(job_id) as staging:
        assert staging is not None
        results = pipeline.run(data, staging, job_id=job_id, pictures=0)
        store.publish(job_id, staging, results["cautions"], outcome_of(results))
    return job_id


def form(store: Store, folder: Path) -> Joint:
    folder.mkdir(parents=True, exist_ok=True)
    return form_joint(store, read_batch(store, LABEL, None), folder)


def assert_is_envelope_of_one_job(joint: Joint, folder: Path) -> None:
    """A job with all the cases is worked on in that folder: the values at every node are its own,
    and what is said to govern has that value there.
    """
    folder.mkdir()
    pipeline.run(orjson.dumps(job(*CASES)), folder, pictures=0)
    work = pipeline.reopen(folder).work
    fields = [work.fields(name) for name in joint.short]
    by_state = measures(
        np.stack([f.displacement for f in fields], axis=2),
        np.stack([f.stress for f in fields], axis=2),
    )
    assert np.array_equal(joint.field_mesh.points, work.field_mesh.points)
    for name in WORST:
        value, governing = joint.envelope.value[name], joint.envelope.state[name]
        near = SAME * np.abs(value).max()
        assert np.abs(value - work.envelope.value[name]).max() <= near, name
        told = np.take_along_axis(by_state[name], governing[:, None], axis=1)[:, 0]
        assert np.abs(told - value).max() <= near, name
    assert len(np.unique(joint.envelope.state["von_mises"])) > 2  # not one state everywhere


GROUPS = {
    "single cases": [["pull"], ["push down"], ["push up"], ["warm"]],
    "several cases": [["pull", "push down"], ["push up", "warm"]],
    "both": [["pull", "push down", "warm"], ["push up"]],
    "another order": [["push up"], ["warm", "pull", "push down"]],
}


@pytest.mark.parametrize("groups", GROUPS.values(), ids=GROUPS)
def test_joint_envelope_is_that_of_one_job_with_all_the_cases(
    store: Store, tmp_path: Path, groups: list[list[str]]
) -> None:
    for names in groups:
        solve(store, job(*names))
    assert_is_envelope_of_one_job(form(store, tmp_path / "joint"), tmp_path / "one")


def test_few_states_at_a_time_come_to_the_same(
    store: Store, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """As on a mesh so large that only one state fits."""
    monkeypatch.setattr("workers.batch_envelope.states_at_once", lambda _: 1)
    for names in GROUPS["single cases"]:
        solve(store, job(*names))
    assert_is_envelope_of_one_job(form(store, tmp_path / "joint"), tmp_path / "one")


def test_what_was_kept_is_taken_again(store: Store, tmp_path: Path) -> None:
    """The second file of a batch does not form the envelope anew, and has the same numbers."""
    for names in GROUPS["both"]:
        solve(store, job(*names))
    first = form(store, tmp_path / "joint")
    before = {path.name: path.stat().st_mtime_ns for path in (tmp_path / "joint").iterdir()}
    again = form(store, tmp_path / "joint")
    assert {p.name: p.stat().st_mtime_ns for p in (tmp_path / "joint").iterdir()} == before
    assert again.states == first.states
    for name in WORST:
        assert np.array_equal(again.envelope.value[name], first.envelope.value[name])
        assert np.array_equal(again.envelope.state[name], first.envelope.state[name])


def test_other_thickness_and_other_names_of_sides_on_the_same_nodes(
    store: Store, tmp_path: Path
) -> None:
    """Twice as thick, half the stress: 32000 / (40 x 8) = 100 MPa, then 50."""
    free = [{"on": "left", "ux": 0}, {"on": "corner", "uy": 0}]
    solve(store, job("pull", supports=free))
    thick = job("pull", supports=[{"on": "west", "ux": 0}, {"on": "corner", "uy": 0}])
    thick["plate"]["thickness"] = 16
    thick["geometry"]["patches"][0]["sides"] = ["low", "east", "high", "west"]
    thick["load_cases"] = {"pull": [{"on": "east", "total_force": [32_000, 0]}]}
    second = solve(store, thick)
    joint = form(store, tmp_path / "joint")
    assert joint.envelope.value["von_mises"] == pytest.approx(100.0, rel=1e-9)
    assert not any(
        joint.states[s].endswith(f"({second})") for s in joint.envelope.state["von_mises"]
    )
    assert len({*joint.short}) == 2  # both are called "pull": told apart by their jobs


def test_different_meshes_have_no_joint_envelope(store: Store, tmp_path: Path) -> None:
    """But their peaks are compared: 100 MPa at 8 mm, 200 MPa at 20 mm of height instead of 40."""
    solve(store, {**strip(), "label": LABEL, "title": "high"})
    low = solve(store, {**strip(height=20), "label": LABEL, "title": "low"})
    batch = read_batch(store, LABEL, None)
    assert batch.meshes == 2
    (found,) = batch.envelopes()
    assert found["von_mises"]["value"] == pytest.approx(200.0, rel=1e-9)
    assert found["von_mises"]["governs"] == {"job": low, "title": "low", "case": "pull"}
    with pytest.raises(MeshError, match="2 different meshes"):
        form(store, tmp_path / "joint")


def test_files_tell_what_governs_and_in_which_job(store: Store, tmp_path: Path) -> None:
    """Read by VTK's own reader and the standard library's CSV reader."""
    ids = {name: solve(store, job(name)) for name in CASES}
    joint, batch = form(store, tmp_path / "joint"), read_batch(store, LABEL, None)
    write_joint(joint, batch, "fields", tmp_path / "fields.vtu")
    write_joint(joint, batch, "nodes", tmp_path / "nodes.csv")
    grid = pyvista.read(tmp_path / "fields.vtu")
    assert {*grid.field_data["states"]} == {f"{name} ({job_id})" for name, job_id in ids.items()}
    value = joint.envelope.value["von_mises"]
    assert grid.point_data["von_mises"] == pytest.approx(value, rel=1e-6)  # kept in 24 bits
    assert "engineer" in " ".join(map(str, grid.field_data["cautions"]))
    with (tmp_path / "nodes.csv").open() as file:
        rows = list(csv.DictReader(file))
    assert [float(row["von_mises [MPa]"]) for row in rows] == value.tolist()
    governing = [joint.states[state] for state in joint.envelope.state["von_mises"]]
    assert [row["von_mises governed by"] for row in rows] == governing
    with pytest.raises(KeyError):
        write_joint(joint, batch, "colour", tmp_path / "colour.png")


@pytest.mark.slow
def test_a_picture_shows_what_governs_where(store: Store, tmp_path: Path) -> None:
    for name in CASES:
        solve(store, job(name))
    if (reason := preview.probe()) is not None:
        pytest.skip(reason)
    joint, batch = form(store, tmp_path / "joint"), read_batch(store, LABEL, None)
    write_joint(joint, batch, "von_mises", tmp_path / "picture.png")
    image = pyvista.read(tmp_path / "picture.png")
    assert min(image.dimensions[:2]) >= 600
    colours = np.unique(np.asarray(image.active_scalars).reshape(-1, 3), axis=0)
    assert len(colours) > 20


# --- what belongs together ------------------------------------------------------------------------


def test_jobs_of_another_workspace_are_of_another_batch(store: Store) -> None:
    ours = solve(store, job("pull"), "dock")
    theirs = solve(store, job("push up"), "yard")
    for workspace, ids in (("dock", {ours}), ("yard", {theirs}), (None, {ours, theirs})):
        batch = read_batch(store, LABEL, workspace)
        assert {record.id for record in batch.records} == ids
    folders = {read_batch(store, LABEL, w).folder(store.root) for w in ("dock", "yard", None)}
    assert len(folders) == 3


def test_a_removed_job_takes_the_joint_files_with_it(store: Store) -> None:
    """They hold its numbers."""
    gone = solve(store, job("pull"))
    solve(store, job("push up"))
    place = read_batch(store, LABEL, None).file(store.root, "nodes")
    place.parent.mkdir(parents=True)
    place.write_text("1.0")
    store.remove(gone)
    assert not place.exists()
    assert len(read_batch(store, LABEL, None).records) == 1

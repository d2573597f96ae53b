"""Files of a solved job: which are made at once, and that those made later are the same."""

import csv
import io
import math
from pathlib import Path
from typing import Any

import numpy as np
import orjson
import pytest
import pyvista

from tests.job_documents import strip
from workers import pipeline
from workers.analysis.combine import state_names
from workers.analysis.envelope import WORST, Envelope
from workers.document.read import load
from workers.filing import EAGER_FIELDS, eager_states
from workers.outputs.drawing.offscreen import probe

MEASURES = {name: "displacement_magnitude" if name == "displacement" else name for name in WORST}


def bent(cases: int = 3, **parts: Any) -> dict[str, Any]:
    """A strip held at the left, its end loaded in directions that turn with the case."""
    document = {**strip(), **parts}
    document["supports"] = [{"on": "left", "ux": 0, "uy": 0}]
    angles = np.linspace(0.0, 2.0, cases).tolist()
    document["load_cases"] = {
        f"turn {n}": [{"on": "right", "total_force": [9000 * math.cos(a), 3000 * math.sin(a)]}]
        for n, a in enumerate(angles)
    }
    return document


def solve(folder: Path, document: dict[str, Any], pictures: int = 0) -> dict[str, Any]:
    folder.mkdir()
    return pipeline.run(orjson.dumps(document), folder, pictures=pictures)


# --- which field files are made with the job ------------------------------------------------------


@pytest.mark.parametrize(
    ("cases", "wanted", "made"),
    [
        (1, None, ["turn 0", "sum"]),
        (EAGER_FIELDS - 1, None, [*(f"turn {n}" for n in range(EAGER_FIELDS - 1)), "sum"]),
        (EAGER_FIELDS, None, []),  # with the combination one more than the limit
        (EAGER_FIELDS, "all", [*(f"turn {n}" for n in range(EAGER_FIELDS)), "sum"]),
        (2, "envelope", []),
        (40, ["sum", "turn 7"], ["sum", "turn 7"]),
    ],
)
def test_field_files_at_once_by_request_or_by_size(
    cases: int, wanted: Any, made: list[str]
) -> None:
    requests = {} if wanted is None else {"fields": wanted}
    job = load(bent(cases, combinations={"sum": {"turn 0": 1}}, requests=requests))
    assert list(eager_states(job, state_names(job))) == made


@pytest.fixture(scope="module")
def lean(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, dict[str, Any]]:
    """A job that wants the envelope only."""
    folder = tmp_path_factory.mktemp("lean") / "job"
    parts = {"requests": {"fields": "envelope"}, "combinations": {"sum": {"turn 1": 1.5}}}
    return folder, solve(folder, bent(**parts))


@pytest.fixture(scope="module")
def full(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, dict[str, Any]]:
    """The same job with all field files and the first pictures."""
    folder = tmp_path_factory.mktemp("full") / "job"
    return folder, solve(folder, bent(combinations={"sum": {"turn 1": 1.5}}), pictures=8)


def files_in(folder: Path) -> list[str]:
    return sorted(str(p.relative_to(folder)) for p in folder.rglob("*") if p.is_file())


def test_only_the_wanted_files_are_made(lean: Any, full: Any) -> None:
    assert not (lean[0] / "fields").exists()
    assert lean[1]["files"]["fields"] == {}
    assert lean[1]["files"]["envelope"]["fields"] == "envelope/fields.vtu"
    states = ["turn 0", "turn 1", "turn 2", "sum"]
    assert full[1]["files"]["fields"] == {name: f"fields/{name}.vtu" for name in states}
    assert {f for f in files_in(full[0]) if f.endswith(".vtu")} == {
        "envelope/fields.vtu", *full[1]["files"]["fields"].values(),
    }  # fmt: skip


def test_every_case_has_its_figures_whatever_files_are_made(lean: Any, full: Any) -> None:
    for kind in ("cases", "combinations"):
        assert lean[1][kind] == full[1][kind]
    for state in (*lean[1]["cases"].values(), *lean[1]["combinations"].values()):
        assert state["reactions"]["left"]["force"]
        assert state["equilibrium"]["residual"] < 1e-9
        assert state["error_estimate"]["relative"] > 0
        assert state["von_mises"]["value"] > 0


@pytest.mark.parametrize("state", ["turn 0", "turn 2", "sum"])
def test_a_field_file_made_later_is_the_same_byte_for_byte(
    lean: Any, full: Any, state: str
) -> None:
    made = pipeline.write_fields(lean[0], state)
    assert made.read_bytes() == (full[0] / "fields" / f"{state}.vtu").read_bytes()


def test_a_picture_made_later_is_the_same_byte_for_byte(lean: Any, full: Any) -> None:
    if probe() is not None:
        pytest.skip(probe())
    drawn = [
        (state, quantity)
        for state, pictures in full[1]["files"]["previews"].items()
        for quantity in pictures
    ]
    assert len(drawn) == 7
    for state, quantity in drawn:
        made = pipeline.render(lean[0], state, quantity)
        assert made.read_bytes() == (full[0] / made.relative_to(lean[0])).read_bytes()
    made = pipeline.write_envelope(lean[0], "von_mises")
    assert made.read_bytes() == (full[0] / "envelope" / "von_mises.png").read_bytes()


# --- the envelope ---------------------------------------------------------------------------------


def grid(path: Path) -> Any:
    return pyvista.read(path)


def measure(fields: Any, name: str) -> np.ndarray:
    """From the field file of one state, in the precision of the file."""
    if name != "displacement":
        return np.asarray(fields.point_data[name])
    return np.linalg.norm(fields.point_data["displacement"], axis=1).astype(np.float32)


def test_the_envelope_is_the_worst_of_all_field_files(full: Any) -> None:
    """Oracle: the field files of all states, read by VTK, compared node by node."""
    envelope = grid(full[0] / "envelope" / "fields.vtu")
    names = [str(name) for name in envelope.field_data["states"]]
    assert names == ["turn 0", "turn 1", "turn 2", "sum"]
    states = [grid(full[0] / "fields" / f"{name}.vtu") for name in names]
    for name, sign in WORST.items():
        values = np.array([measure(fields, name) for fields in states])
        found = envelope.point_data[MEASURES[name]]
        # the files hold seven digits
        np.testing.assert_allclose(found, sign * (sign * values).max(axis=0), rtol=1e-6)
        governs = envelope.point_data[f"{MEASURES[name]}_governs"]
        np.testing.assert_allclose(values[governs, np.arange(len(found))], found, rtol=1e-6)
    assert len({*envelope.point_data["principal_max_governs"]}) > 1
    assert "engineer" in " ".join(map(str, np.ravel(envelope.field_data["cautions"])))


def test_the_envelope_of_the_results_is_that_of_the_nodes(full: Any) -> None:
    """At the place of the reported peak, which may keep away from places of infinite stress."""
    envelope = grid(full[0] / "envelope" / "fields.vtu")
    for name in WORST:
        peak = full[1]["envelope"][name]
        node = np.linalg.norm(envelope.points[:, :2] - peak["at"], axis=1).argmin()
        assert envelope.point_data[MEASURES[name]][node] == pytest.approx(peak["value"], rel=1e-6)
        governs = envelope.point_data[f"{MEASURES[name]}_governs"][node]
        assert envelope.field_data["states"][governs] == peak["governs"]


def test_the_table_of_the_envelope_reads_back_exactly(full: Any) -> None:
    path = pipeline.write_envelope(full[0], "nodes")
    heading, *rows = csv.reader(io.StringIO(path.read_text(), newline=""))
    assert heading[:6] == ["node", "region", "x [mm]", "y [mm]", "von_mises [MPa]",
                           "von_mises governed by"]  # fmt: skip
    with np.load(full[0] / "envelope.npz") as arrays:
        envelope = Envelope.from_arrays(arrays)
    states = ["turn 0", "turn 1", "turn 2", "sum"]
    for number, name in enumerate(WORST):
        column = 4 + 2 * number
        assert [float(row[column]) for row in rows] == envelope.value[name].tolist()
        governs = [states[state] for state in envelope.state[name]]
        assert [row[column + 1] for row in rows] == governs


@pytest.mark.parametrize("kind", ["fields", "nodes"])
def test_an_envelope_formed_later_is_the_same_byte_for_byte(
    full: Any, tmp_path: Path, kind: str
) -> None:
    first = pipeline.write_envelope(full[0], kind).read_bytes()
    again = tmp_path / "again"
    again.mkdir()
    for name in ("job.json", "displacements.npy", "results.json"):
        (again / name).write_bytes((full[0] / name).read_bytes())
    assert pipeline.write_envelope(again, kind).read_bytes() == first


def test_the_envelope_of_one_case_is_that_case(tmp_path: Path) -> None:
    results = solve(tmp_path / "job", strip())
    assert results["files"]["envelope"] == {"previews": {}}  # nothing to compare
    assert not (tmp_path / "job" / "envelope.npz").exists()
    envelope = grid(pipeline.write_envelope(tmp_path / "job", "fields"))
    assert (envelope.point_data["von_mises_governs"] == 0).all()
    # 32 000 N over 40 mm x 8 mm
    np.testing.assert_allclose(envelope.point_data["von_mises"], 100.0, rtol=1e-6)


def test_a_file_that_the_envelope_does_not_have_is_refused(full: Any) -> None:
    with pytest.raises(KeyError):
        pipeline.write_envelope(full[0], "colour")


def test_a_case_may_be_called_envelope(tmp_path: Path) -> None:
    """The files of the envelope lie where no case can reach."""
    document = strip()
    document["load_cases"] = {"envelope": document["load_cases"]["pull"], "fields": [
        {"on": "right", "total_force": [1, 0]}]}  # fmt: skip
    results = solve(tmp_path / "job", document)
    assert results["files"]["fields"]["envelope"] == "fields/envelope.vtu"
    assert results["files"]["envelope"]["fields"] == "envelope/fields.vtu"
    names = grid(tmp_path / "job" / "envelope" / "fields.vtu").field_data["states"]
    assert [str(name) for name in names] == ["envelope", "fields"]


def test_cases_made_of_factors_have_their_files(tmp_path: Path) -> None:
    """Pattern of 32 000 N: 100 MPa; half of it 50 MPa, and the sum of both cases 150 MPa."""
    cases = {"whole": {"pull": 1}, "half": {"pull": 0.5}}
    results = solve(
        tmp_path / "job",
        {**strip(), "cases": cases, "combinations": {"sum": dict.fromkeys(cases, 1)}},
    )
    assert list(results["files"]["fields"]) == ["whole", "half", "sum"]
    for name, stress in (("whole", 100.0), ("half", 50.0), ("sum", 150.0)):
        fields = grid(tmp_path / "job" / "fields" / f"{name}.vtu")
        np.testing.assert_allclose(fields.point_data["von_mises"], stress, rtol=1e-6)
    assert np.load(tmp_path / "job" / "displacements.npy").shape[2] == 1

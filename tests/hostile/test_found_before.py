"""Faults that random jobs have shown, each in its smallest form."""

import math
from pathlib import Path
from typing import Any

import numpy as np
import orjson
import pytest
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

from tests.job_documents import strip
from workers.analysis.meshing.build import mesh_job
from workers.analysis.meshing.size_field import element_areas
from workers.analysis.solved import solve_on
from workers.document.read import load
from workers.index import Indexes
from workers.pipeline import run, silent
from workers.store import Store

Json = dict[str, Any]


def _bytes(document: Json) -> bytes:
    return orjson.dumps(document)


def results_of(document: Json) -> Any:
    job = load(document)
    return solve_on(job, mesh_job(job), silent).results


def test_a_support_that_holds_what_others_hold_has_no_force() -> None:
    """Where it acts was the mean of no nodes, which is not a number."""
    document = strip()
    document["supports"].append({"name": "again", "on": "left", "ux": 0})
    reaction = results_of(document)["cases"]["pull"]["reactions"]["again"]
    assert reaction["force"] == [0.0, 0.0]
    assert reaction["about"] == pytest.approx([50.0, 20.0])  # the centre of the plate


@pytest.mark.parametrize("far", [0.0, 1e6, 1e8])
def test_the_corner_of_a_plate_far_from_the_origin_is_found(far: float) -> None:
    """It was outside the plate: Newton's method waited for digits that were lost out there."""
    document = strip()
    patch = document["geometry"]["patches"][0]
    patch["corners"] = [[x + far, y + far] for x, y in patch["corners"]]
    document["geometry"]["points"]["corner"] = [far, far]
    document["requests"] = {"probes": {"corner": [100 + far, 40 + far]}}
    found = results_of(document)["probes"]["corner"]["pull"]
    assert found["stress"] == pytest.approx([100, 0, 0], abs=1e-4)  # 32 kN on 40 x 8 mm


def test_a_plate_without_stress_has_a_convergence_record(tmp_path: Path) -> None:
    """The growth of its infinite stress, which is nothing, was divided by nothing."""
    document = strip(force=0.0)
    document["supports"] = [{"on": "left", "ux": 0, "uy": 0}]
    document["requests"] = {"convergence": True}
    results = run(_bytes(document), tmp_path, pictures=0)
    assert results["envelope"]["von_mises"]["value"] == 0


@pytest.mark.parametrize(("force", "thickness"), [(1e30, 1e-12), (1e-30, 1e18)])
def test_field_files_hold_numbers_beyond_single_precision(
    tmp_path: Path, force: float, thickness: float
) -> None:
    """3e38 and 1e-38 are the ends of single precision (IEEE 754 binary32)."""
    run(_bytes(strip(force=force, thickness=thickness)), tmp_path, pictures=0)
    reader = vtkXMLUnstructuredGridReader()
    reader.SetFileName(str(tmp_path / "fields" / "pull.vtu"))
    reader.Update()
    stress = vtk_to_numpy(reader.GetOutput().GetPointData().GetArray("von_mises"))
    assert math.isfinite(stress.max())
    np.testing.assert_allclose(stress, force / (40 * thickness), rtol=1e-6)


@pytest.mark.parametrize("letter", ["x", "ж", "点", "\U0001f6e5", "/", "."])
def test_jobs_with_the_longest_labels_are_kept_and_found(tmp_path: Path, letter: str) -> None:
    """The folder of their index had a name of more than the 255 bytes that file systems allow."""
    store = Store(tmp_path)
    labels = [
        letter * 200,
        letter * 199,
        letter * 199 + "!",
    ]  # 200 is the longest (document/job.py)
    ids = [store.accept(b"{}", title="a", label=label).record.id for label in labels]
    for label, job_id in zip(labels, ids, strict=True):
        assert [record.id for record in store.list(label=label).records] == [job_id]


def test_small_elements_far_from_the_origin_keep_their_areas() -> None:
    """Products of large coordinates lost them, so that a convergence record had no sizes."""
    document = strip()
    patch = document["geometry"]["patches"][0]
    patch["corners"] = [[x + 1e8, y - 1e8] for x, y in patch["corners"]]
    document["geometry"]["points"]["corner"] = [1e8, -1e8]
    areas = element_areas(mesh_job(load(document)))
    np.testing.assert_allclose(areas, 20 * 20, rtol=1e-6)


def test_a_cut_far_from_the_origin_carries_the_weight_beyond_it() -> None:
    """As above, of the parts of elements on one side of a cut: 100 x 15 x 8 mm of 200 kN/m3."""
    document = strip()
    patch = document["geometry"]["patches"][0]
    patch["corners"] = [[x + 1e8, y - 1e8] for x, y in patch["corners"]]
    document["geometry"]["points"]["corner"] = [1e8, -1e8]
    document["supports"] = [{"on": "low", "ux": 0, "uy": 0}]
    document["load_cases"] = {"pull": [{"body_force": [0, -2e-4]}]}
    across = {"from": [1e8, 25 - 1e8], "to": [100 + 1e8, 25 - 1e8]}
    document["requests"] = {"cuts": {"across": across}}
    found = results_of(document)["cuts"]["across"]["pull"]
    assert abs(found["normal"]) == pytest.approx(100 * 15 * 8 * 2e-4, rel=1e-3)


def test_the_label_of_one_dot_is_a_label(tmp_path: Path) -> None:
    """The folder of its index was the parent of all of them."""
    store = Store(tmp_path)
    ids = {label: store.accept(b"{}", title="a", label=label).record.id for label in (".", "..")}
    for label, job_id in ids.items():
        assert [record.id for record in store.list(label=label).records] == [job_id]
    assert store.list(label="").records == ()
    roots = [Indexes(tmp_path).of_label(label).root.resolve() for label in ("", ".", "..", "a")]
    assert len({*roots}) == 4
    assert len({root.parent for root in roots}) == 1

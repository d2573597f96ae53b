"""Refined jobs from the document to the folder, and files made from the folder later."""

from pathlib import Path
from typing import Any

import orjson
import pytest
from PIL import Image

from tests.refined_documents import panel, ring
from workers import pipeline

Json = dict[str, Any]


def run(given: Json, folder: Path) -> Json:
    return pipeline.run(orjson.dumps(given), folder, pictures=0, seconds=60.0)


@pytest.mark.parametrize(
    "given",
    [
        panel("Q8", target_error=0.05),
        {**ring("T6", target_error=0.02)},
        {**ring("Q8"), "requests": {"convergence": True}},
    ],
    ids=["outline", "patches", "series"],
)
def test_a_field_made_later_is_the_one_made_with_the_job(given: Json, tmp_path: Path) -> None:
    """The last mesh is kept, so that the folder alone gives the same file byte for byte."""
    results = run(given, tmp_path)
    assert results["convergence"] is not None
    path = tmp_path / results["files"]["fields"]["load"]
    made = path.read_bytes()
    path.unlink()
    assert pipeline.write_fields(tmp_path, "load").read_bytes() == made


def test_the_picture_of_the_record_is_there_and_named(tmp_path: Path) -> None:
    results = run(ring("Q8", target_error=0.02), tmp_path)
    assert results["files"]["convergence"] == "convergence.png"
    with Image.open(tmp_path / "convergence.png") as image:
        assert image.text["Quantity"] == "convergence"


def test_results_are_those_of_the_last_mesh(tmp_path: Path) -> None:
    results = run(panel("Q8", target_error=0.05), tmp_path)
    last = results["convergence"]["meshes"][-1]
    assert results["mesh"]["dofs"] == results["solver"]["dofs"] == last["dofs"]
    assert results == orjson.loads((tmp_path / "results.json").read_bytes())


def test_the_corner_is_left_out_and_raises_its_caution(tmp_path: Path) -> None:
    results = run(panel("Q8", target_error=0.03), tmp_path)
    found = [c for c in results["cautions"] if c["code"] == "stress-singularity"]
    assert len(found) == 1
    assert found[0]["evidence"]["at"] == [100.0, 100.0]
    assert found[0]["evidence"]["confirmed"] is True
    peak = results["cases"]["load"]["von_mises"]
    assert found[0]["evidence"]["outside"] == peak["value"] < peak["singular"]["value"]


def test_a_plain_job_has_no_record(tmp_path: Path) -> None:
    results = run(ring("Q4"), tmp_path)
    assert results["convergence"] is None
    assert not (tmp_path / "convergence.png").exists()
    assert "convergence" not in results["files"]

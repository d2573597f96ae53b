"""Jobs that a worker could not hold are refused with what they would need; nothing is kept of them.

How true the estimates are is tested in `tests/test_estimate.py`.
"""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import orjson
import pytest
from flask.testing import FlaskClient

from api.app import create_app
from tests.job_documents import STEEL, strip
from tests.large_documents import large_document
from workers.settings import Settings

Json = dict[str, Any]
LIMIT = 125_000_000


def patch(cells: int) -> Json:
    document = strip()
    document["geometry"]["patches"][0]["divisions"] = [cells, cells]
    return document


def outline(cells: int) -> Json:
    """A square of about so many elements each way."""
    return {
        **strip(),
        "materials": {"steel": STEEL},
        "geometry": {
            "outline": [
                {"at": [0, 0], "side": "low"},
                {"at": [900, 0], "side": "right"},
                {"at": [900, 900], "side": "high"},
                {"at": [0, 900], "side": "left"},
            ]
        },
        "meshing": {"element": "Q8", "size": 900 / cells},
        "supports": [{"on": "left", "ux": 0, "uy": 0}],
    }


def own_mesh(cells: int) -> Json:
    document: Json = orjson.loads(large_document(cells))
    return document


KINDS = pytest.mark.parametrize("make", [patch, outline, own_mesh])


@pytest.fixture
def client_of(redis_url: str, tmp_path: Path) -> Callable[..., FlaskClient]:
    def make(**changes: Any) -> FlaskClient:
        settings = Settings(
            store=tmp_path / "store", redis_url=redis_url, pictures=0, memory_limit=LIMIT, **changes
        )
        return create_app(settings).test_client()

    return make


@KINDS
def test_a_job_within_the_memory_is_accepted(
    make: Callable[[int], Json], client_of: Callable[..., FlaskClient]
) -> None:
    """60 x 60 Q8 are 22 000 unknowns, which take 65 MB."""
    assert client_of().post("/v1/jobs", json=make(60)).status_code == 202


@KINDS
def test_a_job_over_the_memory_is_refused_with_the_estimate(
    make: Callable[[int], Json], client_of: Callable[..., FlaskClient]
) -> None:
    """90 x 90 Q8 are 49 000 unknowns; at 3 kB each (multifrontal prototype) they take 147 MB."""
    client = client_of()
    answer = client.post("/v1/jobs", json=make(90))
    assert answer.status_code == 413
    problem = answer.get_json()
    assert problem["type"].endswith("#problem-job-too-large")
    assert problem["limit"] == LIMIT
    assert problem["estimate"]["dofs"] == pytest.approx(49_000, rel=0.2)  # an outline is estimated
    assert problem["estimate"]["bytes"] == pytest.approx(147e6, rel=0.35)
    assert problem["estimate"]["bytes"] == max(problem["estimate"]["by_stage"].values())
    (fault,) = problem["errors"]
    assert "coarser mesh" in fault["message"]
    assert "FISHPLATE_MEMORY_LIMIT" in fault["message"]
    assert "FISHPLATE_LARGE_JOBS" in fault["message"]
    assert client.get("/v1/jobs").get_json()["jobs"] == []


def test_load_cases_count(client_of: Callable[..., FlaskClient]) -> None:
    """500 cases at 22 000 unknowns: the displacements alone are 88 MB, copies not counted."""
    document = patch(60)
    pull = document["load_cases"]["pull"]
    document["load_cases"] = {f"pull {i}": pull for i in range(500)}
    answer = client_of().post("/v1/jobs", json=document)
    assert answer.status_code == 413
    assert "500 load cases" in answer.get_json()["errors"][0]["message"]


@KINDS
def test_where_large_jobs_are_iterated_more_is_accepted_but_not_all(
    make: Callable[[int], Json], client_of: Callable[..., FlaskClient]
) -> None:
    client = client_of(large_jobs="iterate")
    assert client.post("/v1/jobs", json=make(90)).status_code == 202
    answer = client.post("/v1/jobs", json=make(120))
    assert answer.status_code == 413
    assert "FISHPLATE_LARGE_JOBS" not in answer.get_json()["errors"][0]["message"]

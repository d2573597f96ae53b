"""What README.md shows is true: its reference, its job, its examples."""

import json
import re
from pathlib import Path

import pytest

from api.reference import rewrite
from workers import pipeline

ROOT = Path(__file__).resolve().parents[2]
README = ROOT / "README.md"
JOBS = sorted(ROOT.glob("examples/*/job.json"))


def test_the_reference_is_that_of_the_schemas_and_rules() -> None:
    """`python -m api.reference README.md` writes it anew."""
    assert rewrite(README.read_text()) == README.read_text()


def test_the_job_in_the_readme_is_solved(tmp_path: Path) -> None:
    """Without a caution that stops, and in balance."""
    document = re.search(r"```json\n(.*?)```", README.read_text(), re.DOTALL)
    assert document is not None
    results = pipeline.run(document[1].encode(), tmp_path, pictures=0)
    assert not [c for c in results["cautions"] if c["severity"] == "stop"]
    assert results["combinations"]["design"]["equilibrium"]["residual"] < 1e-9


@pytest.mark.slow
@pytest.mark.parametrize("job", JOBS, ids=lambda job: job.parent.name)
def test_every_example_is_solved(job: Path, tmp_path: Path) -> None:
    """Examples are models to follow: none may end in a caution that stops."""
    results = pipeline.run(job.read_bytes(), tmp_path, pictures=0)
    assert not [c for c in results["cautions"] if c["severity"] == "stop"]
    states = {**results["cases"], **results["combinations"]}
    assert all(state["equilibrium"]["residual"] < 1e-9 for state in states.values())


def test_every_example_says_what_it_is() -> None:
    for folder in ROOT.glob("examples/*/"):
        assert (folder / "README.md").read_text().startswith("# ")
    for job in JOBS:
        assert json.loads(job.read_text())["title"]

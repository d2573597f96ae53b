"""`fishplate check`: what it prints, what it leaves, and how it ends."""

import json
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

from api.commands import main
from tests.job_documents import strip
from workers.outputs import preview


def run(*arguments: str | Path) -> Result:
    return CliRunner().invoke(main, ["check", *(str(argument) for argument in arguments)])


@pytest.fixture
def job(tmp_path: Path) -> Path:
    return write(tmp_path, strip())


def write(folder: Path, document: dict[str, Any]) -> Path:
    path = folder / "strip.json"
    path.write_text(json.dumps(document))
    return path


def test_a_check_is_read_from_cautions_to_cost(job: Path) -> None:
    """Hand sums: 100 x 40 x 8 mm of 7850 kg/m3 are 0.2512 kg; 32 kN on the right, in the middle."""
    result = run(job)
    assert result.exit_code == 0
    words = " ".join(result.stdout.split())
    parts = (
        "qualified engineer",
        "0.2512 kg",
        "45 nodes, 10 Q8",
        "left left ux = 0 5 40",
        "force (32 000, 0) N spread over the side",
        "pull 32000 0 0",
        "90 unknowns",
    )
    places = [words.index(part) for part in parts]
    assert places == sorted(places)


def test_without_a_folder_nothing_is_written(job: Path) -> None:
    run(job)
    assert list(job.parent.iterdir()) == [job]


def test_a_folder_gets_the_check_and_the_pictures(job: Path, tmp_path: Path) -> None:
    folder = tmp_path / "checked"
    for _ in range(2):  # the second replaces the first
        result = run(job, "--out", folder, "--pictures", "1")
        assert result.exit_code == 0
    found = json.loads((folder / "check.json").read_bytes())
    assert found["cases"]["pull"]["force"] == pytest.approx([32_000, 0])
    assert "check.json" in result.stderr
    pictures = [path.name for path in folder.rglob("*.png")]
    assert pictures == ([] if preview.probe() else ["pull.png"])


@pytest.mark.parametrize("other", ["results.json", "diary.txt"])
def test_a_folder_with_something_else_in_it_is_left_alone(
    job: Path, tmp_path: Path, other: str
) -> None:
    folder = tmp_path / "taken"
    folder.mkdir()
    (folder / other).write_text("kept")
    result = run(job, "--out", folder)
    assert result.exit_code == 2
    assert other in result.stderr
    assert (folder / other).read_text() == "kept"


@pytest.mark.parametrize(
    ("supports", "pointer", "words"),
    [
        ([{"on": "left", "ux": 0}], "/supports", "move"),
        (
            [{"on": "left", "ux": 0, "uy": 0}, {"on": {"segment": [[0, 3], [9, 3]]}, "uy": 0}],
            "/supports/1/on",
            "no boundary lies",
        ),
    ],
)
def test_what_only_the_mesh_shows_ends_with_two_and_leaves_no_folder(
    tmp_path: Path, supports: list[Any], pointer: str, words: str
) -> None:
    job = write(tmp_path, {**strip(), "supports": supports})
    result = run(job, "--out", tmp_path / "checked")
    assert result.exit_code == 2
    assert pointer in result.stderr
    assert words in result.stderr
    assert list(tmp_path.iterdir()) == [job]


def test_hundreds_of_cases_are_not_all_printed(tmp_path: Path) -> None:
    cases = {f"pull {n}": [{"on": "right", "total_force": [n, 0]}] for n in range(100)}
    result = run(write(tmp_path, {**strip(), "load_cases": cases}))
    assert result.exit_code == 0
    assert "100 cases" in result.stdout
    assert result.stdout.count("pull ") < 50

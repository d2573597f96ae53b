"""Every snippet of the documentation does what it shows: shell, JSON and Python blocks are run.

A copy of the examples and pages is the current folder, as after a fresh installation, and one real
server answers where the pages say `http://127.0.0.1:8470`. The examples' own commands are among
the snippets, so that this runs every example; the tests at the end look at what they have left.
"""

import csv
import json
import os
import re
import shutil
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from tests.real_server import real_server
from tests.snippets import Snippet, indented_blocks, pages, snippets
from workers import pipeline
from workers.document.read import read_document

ROOT = Path(__file__).resolve().parents[2]
SNIPPETS = snippets(ROOT)
SHELL = [s for s in SNIPPETS if s.language == "sh"]
JSON = [s for s in SNIPPETS if s.language == "json"]
PYTHON = [s for s in SNIPPETS if s.language == "python"]
SHOWN = ("toml", "text")  # languages of blocks that are only looked at
ADDRESS = "http://127.0.0.1:8470"

# Beginnings of lines that are not run here, and why.
NOT_RUN = {
    "deploy/setup": "the installation under test was made by it",
    "deploy/try": "another server beside this one; a test of its own would repeat the snippets",
    "deploy/test": "runs this test",
    "export PATH=": "set for every snippet",
    "fishplate serve": "runs until it is stopped; this module's server is one",
    "python3 -m venv": "this environment was made by it",
    ".venv/bin/pip install": "changes the environment under test; see test_element_plugin.py",
    ".venv/bin/pytest": "runs this test",
    "BENCHMARKS=long": "takes half an hour",
    "HOSTILE=10000": "takes more than an hour",
    "RANDOM_PLATES=1000": "takes half an hour",
    ".venv/bin/python -m tests.contact_sheet": "test_gallery.py makes the same meshes",
    "fishplate solve examples/element_plugin": "needs the plug-in; see test_element_plugin.py",
}
# Commands that are run for a part of what they do; pictures have tests of their own.
SHORTENED = {
    "fishplate verify": "fishplate verify --only 'patch test'",
    "fishplate solve bollard.json": "fishplate solve bollard.json --pictures 0",
    "--out bollard-check": "--out bollard-check --pictures 1",
    "/run.sh  ": "/run.sh --pictures 0  ",
    "queue_rope_directions.py": "queue_rope_directions.py --count 4",
}


@dataclass(frozen=True)
class Site:
    """Where snippets are run."""

    folder: Path
    url: str
    environment: dict[str, str]

    def run(self, *command: str) -> "subprocess.CompletedProcess[str]":
        return subprocess.run(
            command, cwd=self.folder, env=self.environment, capture_output=True, text=True,
            check=False,
        )  # fmt: skip


@pytest.fixture(scope="module")
def site(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Site]:
    folder = tmp_path_factory.mktemp("site")
    shutil.copytree(
        ROOT / "examples", folder / "examples", ignore=shutil.ignore_patterns("results")
    )
    for page in ("README.md", "DEVELOPERS.md"):
        shutil.copy(ROOT / page, folder)
    (folder / "deploy").mkdir()
    (folder / ".venv").symlink_to(sys.prefix)
    # Every answer that is no success fails the snippet.
    (folder / ".curlrc").write_text("fail-with-body\nshow-error\n")
    for snippet in SNIPPETS:
        if snippet.file_name:
            (folder / snippet.file_name).write_text(snippet.text)
    with real_server(tmp_path_factory.mktemp("server"), FISHPLATE_PICTURES="0") as server:
        environment = {
            **os.environ,
            "PATH": f"{Path(sys.executable).parent}:{os.environ['PATH']}",
            "CURL_HOME": str(folder),
            # Tokens and back-ups are of another store: this server stays open to all.
            "FISHPLATE_STORE": str(folder / "store"),
        }
        yield Site(folder, server.url, environment)


def commands(snippet: Snippet) -> list[str]:
    """Commands of a shell block, each on one line."""
    lines = snippet.text.replace("\\\n", " ").splitlines()
    return [line.strip() for line in lines if line.strip() and not line.lstrip().startswith("#")]


def is_run(command: str) -> bool:
    return not command.startswith(tuple(NOT_RUN))


@pytest.mark.server
@pytest.mark.slow
@pytest.mark.parametrize(
    "snippet", [s for s in SHELL if any(map(is_run, commands(s)))], ids=lambda s: s.where
)
def test_shell_blocks_run(snippet: Snippet, site: Site) -> None:
    script = "\n".join(filter(is_run, commands(snippet))).replace(ADDRESS, site.url)
    for command, shorter in SHORTENED.items():
        script = script.replace(command, shorter)
    done = site.run("bash", "-euo", "pipefail", "-c", script)
    assert done.returncode == 0, f"{script}\n{done.stdout}\n{done.stderr}"


def test_whatever_is_not_run_is_written_somewhere() -> None:
    """And the scripts among it are there, and are shell."""
    every = [command for snippet in SHELL for command in commands(snippet)]
    for beginning in NOT_RUN:
        assert any(command.startswith(beginning) for command in every), beginning
        if beginning.startswith("deploy/"):
            subprocess.run(["bash", "-n", ROOT / beginning], check=True)
    for command in SHORTENED:
        assert any(command in line for line in every)


def test_every_block_has_a_language_and_none_is_made_by_indentation() -> None:
    assert {s.language for s in SNIPPETS} <= {"sh", "json", "python", *SHOWN}
    for page in pages(ROOT):
        assert indented_blocks(page.read_text(encoding="utf-8")) == [], page


def first_plate() -> dict[str, Any]:
    """The whole document that README.md begins with."""
    return next(d for d in (json.loads(s.text) for s in JSON) if "title" in d)


@pytest.mark.slow
@pytest.mark.parametrize("snippet", JSON, ids=lambda s: s.where)
def test_json_blocks_are_jobs_that_are_solved(snippet: Snippet, tmp_path: Path) -> None:
    """Whole documents; or parts, that take the place of those of the first plate. In balance, and
    without a caution that stops.
    """
    document: dict[str, Any] = json.loads(snippet.text)
    if "title" not in document:
        base = first_plate()
        if "geometry" in document:
            del base["requests"]
        if "load_cases" in document:
            del base["combinations"]
        document = {**base, **document}
    results = pipeline.run(json.dumps(document).encode(), tmp_path, pictures=0)
    assert not [c["message"] for c in results["cautions"] if c["severity"] == "stop"]
    for state in {**results["cases"], **results["combinations"]}.values():
        assert state["equilibrium"]["residual"] < 1e-9


INLINE = re.findall(
    r'`(\{"(?:on|acceleration|temperature_change)".*?\})` \|', (ROOT / "README.md").read_text()
)


@pytest.mark.parametrize("text", INLINE)
def test_supports_and_loads_in_tables_are_understood(text: str) -> None:
    document, part = first_plate(), json.loads(text)
    document["geometry"]["points"] = {"hook": [120, 150]}
    document["materials"]["S355"]["thermal_expansion"] = 1.2e-5
    if part.keys() & {"ux", "uy", "normal", "along", "spring"}:
        document["supports"].append(part)
    else:
        document["load_cases"]["mooring"].append(part)
    read_document(json.dumps(document).encode())


def test_tables_of_supports_and_loads_are_found() -> None:
    assert len(INLINE) == 12


@pytest.mark.slow
@pytest.mark.parametrize("snippet", PYTHON, ids=lambda s: s.where)
def test_python_blocks_run(snippet: Snippet, tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", snippet.text], cwd=tmp_path, check=False,
        capture_output=True, text=True, env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)},
    )  # fmt: skip
    assert done.returncode == 0, done.stderr


# --- what the examples have left ---------------------------------------------------------------


@pytest.mark.server
@pytest.mark.slow
@pytest.mark.parametrize(
    "example", [path.parent.name for path in sorted(ROOT.glob("examples/*/run.sh"))]
)
def test_examples_are_models_to_follow(example: str, site: Site) -> None:
    """In balance, and none ends in a caution that stops."""
    folder = site.folder / ("tie-plate" if example == "curl" else f"examples/{example}/results")
    results = json.loads((folder / "results.json").read_bytes())
    assert not [c["message"] for c in results["cautions"] if c["severity"] == "stop"]
    for state in {**results["cases"], **results["combinations"]}.values():
        assert state["equilibrium"]["residual"] < 1e-9


@pytest.mark.server
@pytest.mark.slow
def test_the_shell_example_files_the_stress_at_the_hole(site: Site) -> None:
    """60 kN on 80 x 10 mm times 2.506 (Howland, d/W = 0.2; see workers/verification): 188 MPa.

    Within the percent by which the fit and the mesh differ.
    """
    folder = site.folder / "tie-plate"
    with (folder / "peaks.csv").open(newline="") as file:
        peaks = {(row["case"], row["quantity"]): row for row in csv.DictReader(file)}
    peak = float(peaks["keel", "principal_max"]["value [MPa; mm; 1]"])
    assert peak == pytest.approx(2.506 * 60_000 / (80 * 10), rel=0.015)
    assert "Keel block tie plate" in (folder / "sheet.html").read_text()
    assert (folder / "archive.zip").read_bytes().startswith(b"PK")


@pytest.mark.server
@pytest.mark.slow
def test_the_spreadsheet_example_brings_every_row_back(site: Site) -> None:
    """A case for each row of the table, whose forces superpose: half the table, half the peak."""
    with (site.folder / "peaks.csv").open(newline="") as file:
        peaks = [row for row in csv.DictReader(file) if row["quantity"] == "von_mises"]
    table = (ROOT / "examples/spreadsheet_factors/crane_positions.csv").read_text("utf-8-sig")
    names = [line.split(";")[0] for line in table.splitlines()[1:]]
    assert [row["case"] for row in peaks if row["case"] in names] == names


@pytest.mark.server
@pytest.mark.slow
def test_the_program_example_files_the_sheet_of_its_choice(site: Site) -> None:
    """Stress goes with one over the thickness: whoever knows one knows all."""
    assert "Slipway fairlead plate" in (site.folder / "chosen.html").read_text()
    done = site.run(
        "python", "examples/plain_http/choose_thickness.py", "--url", site.url
    )  # the same documents: answered from the jobs that are there
    found = re.findall(r"^ *(\d+) mm: +(\d+)% of yield", done.stdout, re.M)
    uses = {int(thickness): int(use) for thickness, use in found}
    assert len(uses) == 6
    for thickness, use in uses.items():
        rounding = 0.5 / uses[20] + 0.5 / use
        assert use * thickness == pytest.approx(uses[20] * 20, rel=rounding)
    assert "Chosen: 20 mm" in done.stdout

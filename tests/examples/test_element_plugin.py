"""The example plug-in: installed by pip, found by its entry point, sound, better in bending."""

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

PLUGIN = Path(__file__).resolve().parents[2] / "examples" / "element_plugin"
BEAM_THEORY = 0.1081  # MacNeal & Harder 1985 (from memory): with shear, unit tip load

PROGRAM = """
import json, sys, tempfile
from pathlib import Path
from elements.conformance import check
from elements.registry import available, get, problems
from workers import pipeline

document = json.loads(Path(sys.argv[1]).read_text())
moves = {}
for element in ("Q4", "QM6"):
    document["meshing"]["element"] = element
    with tempfile.TemporaryDirectory() as folder:
        results = pipeline.run(json.dumps(document).encode(), Path(folder), pictures=0)
    moves[element] = results["probes"]["tip"]["tip load"]["displacement"][1]
print(json.dumps({"names": sorted(available()), "problems": problems(), "moves": moves,
                  "faults": check(get("QM6"))}))
"""


@pytest.fixture(scope="module")
def installed(tmp_path_factory: pytest.TempPathFactory) -> dict:
    """What a Python that has the plug-in beside Fishplate says."""
    target = tmp_path_factory.mktemp("site")
    source = tmp_path_factory.mktemp("source")  # pip builds beside the source; keep ours clean
    for name in ("pyproject.toml", "bending_quadrilateral.py"):
        (source / name).write_bytes((PLUGIN / name).read_bytes())
    subprocess.run(
        [sys.executable, "-m", "pip", "install", "--quiet", "--no-deps", "--no-build-isolation",
         "--disable-pip-version-check", "--target", target, source],
        check=True,
    )  # fmt: skip
    path = os.pathsep.join(filter(None, [str(target), os.environ.get("PYTHONPATH")]))
    done = subprocess.run(
        [sys.executable, "-c", PROGRAM, PLUGIN / "cantilever.json"],
        env={**os.environ, "PYTHONPATH": path}, capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    return json.loads(done.stdout)


@pytest.mark.slow
def test_the_plugin_is_found_by_its_entry_point(installed: dict) -> None:
    assert "QM6" in installed["names"]
    assert not installed["problems"]


@pytest.mark.slow
def test_the_plugin_conforms(installed: dict) -> None:
    assert installed["faults"] == []


@pytest.mark.slow
def test_the_plugin_bends_where_q4_is_stiff(installed: dict) -> None:
    """Q4 reaches 0.093 of beam theory with six rectangles, as published; QM6 0.993."""
    moves = installed["moves"]
    print({name: move / BEAM_THEORY for name, move in moves.items()})
    assert moves["Q4"] < 0.1 * BEAM_THEORY
    assert moves["QM6"] == pytest.approx(BEAM_THEORY, rel=0.01)

"""Draws the pictures in the examples' folders anew: `python -m tests.example_pictures [NAME ...]`.

Of each example the model and the stress in the state that governs; of those with many cases what
governs where. Look at them afterwards: no test compares pictures.
"""

import json
import shutil
import sys
import tempfile
from pathlib import Path
from typing import Any

from examples.rope_directions.queue_rope_directions import load_case, rope_directions
from examples.spreadsheet_factors.solve_table import as_job_table
from workers import pipeline

EXAMPLES = Path(__file__).resolve().parents[1] / "examples"
MODEL, STRESS, GOVERNING, CONVERGENCE = "model", "von_mises", "governing", "convergence"
PICTURES = {
    "lug": (MODEL, STRESS),
    "gusset": (MODEL, STRESS),
    "web_with_openings": (MODEL, STRESS),
    "cradle_bracket": (MODEL, STRESS, CONVERGENCE),
    "heated_plate": (MODEL, STRESS),
    "plain_http": (MODEL, STRESS),
    "curl": (MODEL, STRESS),
    "spreadsheet_factors": (MODEL, GOVERNING),
    "rope_directions": (STRESS,),
}


def document(name: str) -> dict[str, Any]:
    """The job that the example sends."""
    if name == "rope_directions":
        lug = document("lug")
        cases = {case: load_case(force) for case, force in rope_directions(300)}
        return {**lug, "load_cases": cases, "combinations": {}}
    found: dict[str, Any] = json.loads((EXAMPLES / name / "job.json").read_text())
    if name == "spreadsheet_factors":
        table = (EXAMPLES / name / "crane_positions.csv").read_text(encoding="utf-8")
        found["cases"] = as_job_table(table)
    return found


def draw(name: str) -> None:
    """Solve the example and put its pictures into its folder."""
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        results = pipeline.run(json.dumps(document(name)).encode(), folder, pictures=0)
        worst = results["envelope"]["von_mises"]["governs"]
        for picture in PICTURES[name]:
            if picture == CONVERGENCE:
                made = folder / "convergence.png"
            elif picture == GOVERNING:
                made = pipeline.write_envelope(folder, "von_mises")
            else:
                made = pipeline.render(folder, worst, picture)
            shutil.copy(made, EXAMPLES / name / f"{picture}.png")
            print(EXAMPLES / name / f"{picture}.png")


if __name__ == "__main__":
    for name in sys.argv[1:] or PICTURES:
        draw(name)

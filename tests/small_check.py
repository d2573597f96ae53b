"""A check as a worker leaves it, invented and small, for tests of what serves it."""

from pathlib import Path
from typing import Any

import orjson

from tests.small_results import AT, CAUTION, RESULTS
from workers.cautions import STANDING
from workers.checks import Checks
from workers.outputs.names import file_name

STATE = {"factors": {"pull": 1.0}, "force": [32_000.0, 0.0], "moment": 0.0}
CHECK: dict[str, Any] = {
    "job": RESULTS["job"],
    "units": RESULTS["units"],
    "mesh": RESULTS["mesh"],
    "plate": {
        "from": [0.0, 0.0],
        "to": [100.0, 40.0],
        "size": [100.0, 40.0],
        "area": 4000.0,
        "centroid": AT,
        "mass": {"value": 0.2512, "unit": "kg"},
    },
    "supports": {"left": {"on": "left", "holds": "ux = 0", "nodes": 5, "length": 40.0}},
    "load_cases": {"pull": {"loads": [{"on": "right", "load": "force (32 000, 0) N"}]}},
    "cases": {"pull": STATE},
    "combinations": {"pull, factored": STATE},
    "estimate": {
        "dofs": 16,
        "factor_entries": 100,
        "factor_counted": True,
        "memory": {"bytes": 1_000_000, "by_stage": {"factorising": 1_000_000}},
        "time": {"seconds": 0.1, "by_stage": {"factorising": 0.1}, "machine": 1.0},
        "finest": None,
        "basis": "invented",
    },
    "cautions": [CAUTION, *(caution.as_json() for caution in STANDING)],
    "previews": {"pull": "previews/pull.png"},
    "pictures": {"available": True},
}


def answer_check(store: Path, check_id: str, case: str = "pull") -> None:
    """Do to a check what a worker does: answer it, and draw a case."""
    checks = Checks(store)
    found = store / "found"
    found.mkdir(exist_ok=True)
    (found / "check.json").write_bytes(orjson.dumps(CHECK))
    (found / "previews").mkdir(exist_ok=True)
    checks.publish(check_id, found)
    folder = checks.answer(check_id)
    assert folder is not None
    (folder / "previews" / f"{file_name(case)}.png").write_bytes(f"a picture of {case}".encode())

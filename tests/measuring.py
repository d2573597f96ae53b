"""What the benchmarks share: the child process, ratios of paired runs, and the printed rows.

Goals are goals, not limits: what a shared machine does to a ratio must not fail a build, so only
an order of magnitude beyond the goal does. A missed goal is printed beside what was measured.
"""

import json
import os
import statistics
import subprocess
import sys
from collections.abc import Sequence
from importlib.util import find_spec
from pathlib import Path
from typing import Any

# One thread, as in the workers: the many small fronts run slower with two.
CHILD_ENVIRONMENT = {
    **os.environ,
    "OMP_NUM_THREADS": "1",
    "OPENBLAS_NUM_THREADS": "1",
    "MKL_NUM_THREADS": "1",
}
CHILD = Path(__file__).parent / "benchmarks" / "measure_job.py"
# Half an hour and sizes up to a million unknowns instead of minutes; not a setting of a server.
LONG = os.environ.get("BENCHMARKS") == "long"
HAS_PARDISO = find_spec("pypardiso") is not None
ROUNDS = 5
ROOM = 10.0  # beyond the goal before a test fails


def in_child(**order: Any) -> dict[str, Any]:
    """What `measure_job.py` prints about an order."""
    done = subprocess.run(
        [sys.executable, CHILD, json.dumps(order)],
        check=False,
        capture_output=True,
        text=True,
        env=CHILD_ENVIRONMENT,
        cwd=Path(__file__).parent.parent,
    )
    assert done.returncode == 0, done.stderr
    found: dict[str, Any] = json.loads(done.stdout)
    return found


def paired(one: Sequence[float], other: Sequence[float]) -> float:
    """Median of the ratios of paired runs."""
    assert len(one) == len(other) >= ROUNDS
    return statistics.median(a / b for a, b in zip(one, other, strict=True))


def at_most(what: str, measured: float, goal: float, unit: str = "times") -> None:
    """Print a figure beside its goal; fails an order of magnitude beyond it."""
    print(f"\n{what}: {measured:.3g} {unit} (goal: at most {goal:g})")
    assert measured < ROOM * goal


def at_least(what: str, measured: float, goal: float, unit: str = "times") -> None:
    print(f"\n{what}: {measured:.3g} {unit} (goal: at least {goal:g})")
    assert measured > goal / ROOM


def not_measured(what: str, goal: str) -> None:
    missing = "BENCHMARKS=long" if HAS_PARDISO else "fishplate[mkl]"
    print(f"\n{what}: not measured, needs {missing} (goal: {goal})")

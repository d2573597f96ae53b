"""What the benchmarks share: the child process, ratios of paired runs, and the table of figures.

Goals are those of a quiet machine. A missed goal is printed beside what was measured; a build fails
only beyond `ROOM` times the goal, or the room that a goal states for itself. Ratios of our own work
are of processor time, which other users of the machine stretch little.
"""

import json
import os
import statistics
import subprocess
import sys
from collections.abc import Iterator, Sequence
from importlib.util import find_spec
from pathlib import Path
from typing import Any, NamedTuple

# One thread, as in the workers: the many small fronts run slower with two. Memory that was touched
# once is kept, by both sides of a comparison: having it anew from the system costs seconds per GB.
CHILD_ENVIRONMENT = {
    **os.environ,
    "OMP_NUM_THREADS": "1",
    "OPENBLAS_NUM_THREADS": "1",
    "MKL_NUM_THREADS": "1",
}
TOUCHED = {"MALLOC_MMAP_THRESHOLD_": str(8 << 30), "MALLOC_TRIM_THRESHOLD_": str(16 << 30)}
CHILD = Path(__file__).parent / "benchmarks" / "measure_job.py"
# Half an hour and sizes up to a million unknowns instead of minutes; not a setting of a server.
LONG = os.environ.get("BENCHMARKS") == "long"
HAS_PARDISO = find_spec("pypardiso") is not None
ROUNDS = 5
ROOM = 2.5  # beyond the goal before a test fails


class Row(NamedTuple):
    """One figure beside its goal."""

    what: str
    measured: str
    goal: str
    met: bool | None


rows: list[Row] = []


def table() -> Iterator[str]:
    """All figures so far as lines of a Markdown table."""
    yield "| what | measured | goal | met |"
    yield "|---|---|---|---|"
    for row in rows:
        met = {True: "yes", False: "no", None: ""}[row.met]
        yield f"| {row.what} | {row.measured} | {row.goal} | {met} |"


def in_child(*, touched: bool = True, **order: Any) -> dict[str, Any]:
    """What `measure_job.py` prints about an order.

    touched : memory that was given back is kept for what comes next; not where memory is measured
    """
    done = subprocess.run(
        [sys.executable, CHILD, json.dumps(order)],
        check=False,
        capture_output=True,
        text=True,
        env=CHILD_ENVIRONMENT | (TOUCHED if touched else {}),
        cwd=Path(__file__).parent.parent,
    )
    assert done.returncode == 0, done.stderr
    found: dict[str, Any] = json.loads(done.stdout)
    return found


def peak_of(**order: Any) -> dict[str, Any]:
    """The same for peak memory: of a process that has done nothing else."""
    return in_child(touched=False, rounds=0, **order)


def paired(one: Sequence[float], other: Sequence[float]) -> float:
    """Median of the ratios of paired runs."""
    assert len(one) == len(other) >= ROUNDS
    return statistics.median(a / b for a, b in zip(one, other, strict=True))


def at_most(
    what: str, measured: float, goal: float, unit: str = "times", *, room: float = ROOM
) -> None:
    """Note a figure beside its goal; fails beyond `room` times the goal."""
    note(Row(what, f"{measured:.3g} {unit}", f"at most {goal:g}", measured <= goal))
    assert measured <= room * goal


def at_least(
    what: str, measured: float, goal: float, unit: str = "times", *, room: float = ROOM
) -> None:
    """Note a figure beside its goal; fails below the goal over `room`."""
    note(Row(what, f"{measured:.3g} {unit}", f"at least {goal:g}", measured >= goal))
    assert measured >= goal / room


def not_measured(what: str, goal: str) -> None:
    note(Row(what, "needs `fishplate[mkl]`", goal, None))


def note(row: Row) -> None:
    rows.append(row)
    print(f"\n{row.what}: {row.measured} (goal: {row.goal})")

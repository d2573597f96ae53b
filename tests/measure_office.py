"""Measures the figures of deploy/OFFICE.md: memory by unknowns, disk and time for each job.

    python -m tests.measure_office [JOBS]

Prints two tables as Markdown. Processor time is what counts where others use the machine as well:
an hour of a processor over the processor time of a job is how many it does.
"""

import json
import os
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

from tests.job_documents import strip
from tests.running_server import running_server
from workers.housekeeping import disk_usage

ROOT = Path(__file__).resolve().parent.parent
EXAMPLES = ("lug", "gusset", "cradle_bracket", "web_with_openings")
ONE_THREAD = {f"{name}_NUM_THREADS": "1" for name in ("OMP", "OPENBLAS", "MKL")}


def square(divisions: int, cases: int) -> dict[str, Any]:
    """A square plate of so many Q8 elements along each side: 6 unknowns for each, about."""
    document = strip(length=100.0, height=100.0)
    document["geometry"]["patches"][0]["divisions"] = [divisions, divisions]
    (load,) = document["load_cases"].values()
    document["load_cases"] = {f"case {n}": load for n in range(cases)}
    return document


def print_sizes() -> None:
    """Memory beyond the resting worker, and processor time, without pictures."""
    print("| unknowns | load cases | memory [MiB] | kB for each unknown | processor time [s] |")
    print("|---|---|---|---|---|")
    for divisions, cases in ((58, 1), (58, 50), (130, 1), (260, 1), (260, 20), (410, 1)):
        with tempfile.TemporaryDirectory() as folder:
            job = Path(folder, "job.json")
            job.write_text(json.dumps(square(divisions, cases)))
            said = subprocess.run(
                [sys.executable, "-m", "tests.measure_cost", job, "0"],
                cwd=ROOT, env={**os.environ, **ONE_THREAD}, check=True, stdout=subprocess.PIPE,
            ).stdout  # fmt: skip
        cost = json.loads(said)
        dofs = 2 * (3 * divisions**2 + 4 * divisions + 1)
        memory = cost["memory"]
        print(f"| {dofs} | {cases} | {memory / 2**20:.0f} | {memory / 1e3 / dofs:.1f} | "
              f"{cost['seconds']:.1f} |", flush=True)  # fmt: skip


def print_jobs(count: int) -> None:
    """Disk, processor time and clock of the examples, with a server of two workers."""
    print("\n| example | jobs | disk for each [MiB] | processor time for each [s] | took [s] |")
    print("|---|---|---|---|---|")
    starting, _, _ = run([])
    for name in EXAMPLES:
        document = json.loads((ROOT / "examples" / name / "job.json").read_text())
        seconds, took, disk = run([another(document, number) for number in range(count)])
        print(f"| {name} | {count} | {disk / count / 2**20:.1f} | "
              f"{(seconds - starting) / count:.1f} | {took:.0f} |", flush=True)  # fmt: skip


def another(document: dict[str, Any], number: int) -> dict[str, Any]:
    """Another thickness is another model: nothing is shared but the mesh."""
    plate = document["plate"]
    return {**document, "plate": {**plate, "thickness": plate["thickness"] + 0.01 * number}}


def run(documents: list[dict[str, Any]]) -> tuple[float, float, int]:
    """Processor seconds, seconds and bytes that the jobs take, the server's start included."""
    with tempfile.TemporaryDirectory() as folder:
        store = Path(folder, "store")
        before = processor_seconds()
        with running_server(store, "--workers", "2") as server:
            began = time.monotonic()
            for address in [server.submit(document) for document in documents]:
                server.finished(address)
            took = time.monotonic() - began
        disk = sum(map(disk_usage, store.glob("jobs/*/*")))
        return processor_seconds() - before, took, disk


def processor_seconds() -> float:
    """Of all processes that have been started and ended."""
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


if __name__ == "__main__":
    print_sizes()
    print_jobs(int(sys.argv[1]) if len(sys.argv) > 1 else 12)

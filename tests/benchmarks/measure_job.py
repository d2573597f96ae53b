"""Measures one job in a process of its own, so that the peak of its memory is that of the job.

    python measure_job.py LARGE.json SMALL.json ROUNDS

Prints times of the whole job and of SuperLU on the same matrix, and peak memory, as JSON.
"""

import json
import resource
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from workers import pipeline
from workers.analysis.model import build_model
from workers.analysis.solver import SuperLUFactor
from workers.analysis.stopwatch import Stopwatch
from workers.analysis.supports import resolve_supports
from workers.analysis.system import System, build_system
from workers.document.read import read_document


def run(document: bytes) -> float:
    """Time of one job, pictures left out [s]."""
    with tempfile.TemporaryDirectory() as folder:
        start = time.perf_counter()
        pipeline.run(document, Path(folder), pictures=0)
        return time.perf_counter() - start


def build(document: bytes) -> System:
    job = read_document(document)
    model = build_model(job, pipeline.prepare(job))
    supports = resolve_supports(job, model.mesh)
    return build_system(model, supports, Stopwatch(), pipeline.silent)


def factorise_and_solve(system: System) -> float:
    """Time of SuperLU alone on the matrix of a job, one right-hand side [s]."""
    right = np.random.default_rng(0).standard_normal((system.matrix.shape[0], 1))
    start = time.perf_counter()
    SuperLUFactor(system.matrix).solve(right)
    return time.perf_counter() - start


def peak_memory() -> int:
    """Of this process so far [kB]."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss


def main() -> None:
    large, small = (Path(name).read_bytes() for name in sys.argv[1:3])
    rounds = int(sys.argv[3])
    run(small)  # imports, first calls
    resting = peak_memory()
    whole = [run(large)]
    peak = peak_memory()
    system = build(large)
    alone = [factorise_and_solve(system)]
    for _ in range(rounds - 1):  # in turns, so that a slow spell of the machine meets both
        whole.append(run(large))
        alone.append(factorise_and_solve(system))
    dofs = system.matrix.shape[0]
    memory = (peak - resting) / dofs
    print(json.dumps({"whole": whole, "alone": alone, "dofs": dofs, "kB per dof": memory}))


if __name__ == "__main__":
    main()

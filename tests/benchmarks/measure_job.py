"""Measures the sides of a comparison in a process of its own: processor times, peak memory.

    python measure_job.py '{"element": "Q8", "dofs": 100000, "rounds": 5, "sides": [["whole", 1]]}'

Each side is a kind of work and its number of load cases; in every round each is done once, so that
a slow spell of the machine meets all. Processor time, one thread on every side: whoever else uses
the machine counts little. Prints JSON.
"""

import json
import os
import sys
import tempfile
import time
from collections.abc import Callable
from functools import cached_property
from pathlib import Path
from typing import Any

sys.path.insert(0, os.getcwd())  # noqa: PTH109  the tests are no package

import numpy as np
from scipy.sparse import csr_matrix, triu

from tests.benchmarks import naive_script
from tests.panels import cells_for, panel
from workers import pipeline
from workers.analysis.loads.cases import resolve_loads
from workers.analysis.model import build_model
from workers.analysis.solution import solve
from workers.analysis.solver import SuperLUFactor
from workers.analysis.stopwatch import Stopwatch
from workers.analysis.supports import resolve_supports
from workers.analysis.system import System, build_system
from workers.document.read import read_document
from workers.filing import Filing, Work

NAIVE_CASES = 2  # at most that many are solved by the naive script


class Sides:
    """The kinds of work on one panel."""

    def __init__(self, element: str, dofs: int) -> None:
        self.element, self.cells = element, cells_for(dofs, element)

    def document(self, cases: int) -> bytes:
        return json.dumps(panel(self.cells, self.element, cases)).encode()

    @cached_property
    def system(self) -> System:
        job = read_document(self.document(1))
        model = build_model(job, pipeline.prepare(job))
        supports = resolve_supports(job, model.mesh)
        return build_system(model, supports, Stopwatch(), pipeline.silent)

    def right(self, cases: int) -> np.ndarray:
        rows = self.system.matrix.shape[0]
        return np.random.default_rng(0).standard_normal((rows, cases))

    def whole(self, cases: int) -> float:
        """Document to results.json, fields, tables and sheet; pictures left out [s]."""
        document = self.document(cases)
        with tempfile.TemporaryDirectory() as folder:
            return _seconds(lambda: pipeline.run(document, Path(folder), pictures=0))

    def analysis(self, cases: int) -> float:
        """Parse, mesh, solve, recover, summarise, write the fields; no review, no tables [s]."""
        document = self.document(cases)

        def work(folder: Path) -> None:
            job = read_document(document)
            solved = pipeline.solve(job, pipeline.silent, None, 0.0)
            solution = solved.solution
            files = Work(
                solution.model, solution.displacement, solution.temperature, solved.envelope,
                solved.recovery,
            )  # fmt: skip
            results = {**solved.results, "convergence": None}
            Filing(folder, files, [], results).write_some(pipeline.silent)

        with tempfile.TemporaryDirectory() as folder:
            return _seconds(lambda: work(Path(folder)))

    def superlu(self, cases: int) -> float:
        """Factorisation and solution of the same matrix in the same order alone [s]."""
        matrix, right = self.system.matrix, self.right(cases)
        return _seconds(lambda: SuperLUFactor(matrix).solve(right))

    def pardiso(self, cases: int) -> float:
        """Ordering, factorisation and blocked solution by PARDISO alone [s]."""
        import pypardiso  # noqa: PLC0415  optional

        upper, right = self._upper, np.asfortranarray(self.right(cases))
        solver = pypardiso.PyPardisoSolver(mtype=2)

        def work() -> None:
            solver.factorize(upper)
            solver.solve(upper, right)

        taken = _seconds(work)
        solver.free_memory(everything=True)
        return taken

    @cached_property
    def naive(self) -> dict[str, Any]:
        """What the naive script starts from: arrays, and the loads that it is spared to make."""
        job = read_document(self.document(NAIVE_CASES))
        model = build_model(job, pipeline.prepare(job))
        mesh, material = model.mesh, job.materials["S355"]
        held = mesh.facet_nodes(mesh.sides["sill"])
        return {
            "mesh": (mesh.nodes, mesh.blocks[0].connectivity),
            "D": naive_script.elasticity(material.youngs_modulus, material.poissons_ratio),
            "loads": resolve_loads(model).applied.reshape(mesh.dof_count, -1),
            "fixed": np.concatenate((2 * held, 2 * held + 1)),
            "displacement": solve(job, mesh).displacement.reshape(mesh.dof_count, -1),
        }

    @cached_property
    def naive_matrix(self) -> Any:
        return naive_script.assemble(*self.naive["mesh"], self.naive["D"], 10.0)

    def naive_assembly(self, _cases: int) -> float:
        start = self.naive
        return _seconds(lambda: naive_script.assemble(*start["mesh"], start["D"], 10.0))

    def naive_cases(self, cases: int) -> float:
        """Solutions and stresses of some cases; the displacements must be ours [s]."""
        start, matrix = self.naive, self.naive_matrix
        found = []

        def work() -> None:
            for load in start["loads"].T[:cases]:
                u = naive_script.solve_case(matrix, load, start["fixed"])
                naive_script.nodal_stress(*start["mesh"], start["D"], u)
                found.append(u)

        taken = _seconds(work)
        ours = start["displacement"][:, :cases]
        difference = np.abs(np.stack(found, axis=1) - ours).max() / np.abs(ours).max()
        assert difference < 1e-8, difference
        return taken

    @cached_property
    def _upper(self) -> object:
        return csr_matrix(triu(self.system.matrix, format="csr"))


def _seconds(work: Callable[[], object]) -> float:
    start = time.process_time()
    work()
    return time.process_time() - start


def peak_memory() -> int:
    """Of this process so far [bytes].

    From the kernel's page about it: `getrusage` begins with the peak of the process that started
    this one.
    """
    status = Path("/proc/self/status").read_text()
    (line,) = (line for line in status.splitlines() if line.startswith("VmHWM"))
    return 1024 * int(line.split()[1])


def main() -> None:
    order = json.loads(sys.argv[1])
    work = Sides(order["element"], order["dofs"])
    small = Sides(order["element"], 500)
    for side, cases in order["sides"]:  # imports, first calls
        getattr(small, side.replace(" ", "_"))(min(cases, 3))
    resting = peak_memory()
    first, cases = order["sides"][0]
    getattr(work, first.replace(" ", "_"))(cases)
    peak = peak_memory() - resting
    times: dict[str, list[float]] = {f"{side} {cases}": [] for side, cases in order["sides"]}
    for _ in range(order["rounds"]):
        for side, cases in order["sides"]:
            times[f"{side} {cases}"].append(getattr(work, side.replace(" ", "_"))(cases))
    dofs = pipeline.prepare(read_document(work.document(1))).dof_count
    print(json.dumps({"times": times, "dofs": dofs, "peak": peak}))


if __name__ == "__main__":
    main()

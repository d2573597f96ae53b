"""Solving a job on finer and finer meshes: to a target error, or for a convergence record.

The results are those of the last mesh, with the record of all of them in `convergence`.
"""

import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from workers.analysis.combine import States, load_states
from workers.analysis.convergence import Record
from workers.analysis.mesh import Mesh
from workers.analysis.recovery import Recovery
from workers.analysis.refiner import Refiner
from workers.analysis.singularities import find_singular_places
from workers.analysis.sizes_wanted import SizesWanted
from workers.analysis.solution import Solution, solve
from workers.analysis.summary import summarise
from workers.errors import Fault, MeshError
from workers.job import Job

Json = dict[str, Any]
Progress = Callable[[str, float], None]
Stop = Literal["target", "max_dofs", "steps", "time", "no-gain", "mesh"]

LEAST_MESHES = 3  # a series of fewer tells nothing of convergence
MOST_MESHES = 10
MOST_DOFS = 400_000  # where the job does not say
SECONDS = 300.0  # for all meshes together; a third of the time that a job is usually given
# An estimate on a coarse mesh is rough: a step asks for no more than this part of its error, ...
STEP = 0.4
MARGIN = 0.9  # ... and the last one for a little less than the target.
LEAST_STEP = 0.7  # part of the error that a mesh beyond the target asks for, to make a series
LEAST_GROWTH = 1.25  # of the dofs: a mesh that may only be so much finer is not worth it
LEAST_GAIN = 1.02  # error before over error after, below which refining leads nowhere
GROWTH = 1.2  # exponent of the time of a solution over its dofs, with some reserve

MESSAGES: dict[Stop, str] = {
    "target": "the target error is reached",
    "max_dofs": "a finer mesh would have more unknowns than allowed",
    "steps": f"the target error is not reached on {MOST_MESHES} meshes",
    "time": f"a finer mesh would take longer than {SECONDS:.0f} s",
    "no-gain": "finer meshes no longer reduce the error",
    "mesh": "the plate could not be meshed finer",
}


@dataclass(frozen=True, eq=False)
class Solved:
    """A job on one mesh. results : as `summarise` makes them."""

    solution: Solution
    recovery: Recovery
    wanted: SizesWanted
    results: Json

    @property
    def mesh(self) -> Mesh:
        return self.solution.model.mesh

    @property
    def error(self) -> float:
        """Largest relative error of any state."""
        states = {**self.results["cases"], **self.results["combinations"]}
        return max(float(state["error_estimate"]["relative"]) for state in states.values())


def solve_series(job: Job, refiner: Refiner, mesh: Mesh, progress: Progress) -> Solved:
    """Solve a job on its own mesh and two finer ones.

    Raises
    ------
    MeshError       the finest mesh would have too many unknowns, or cannot be made.
    AnalysisError   as `solution.solve`.
    """
    states = load_states(job)
    record = Record(job.meshing.element)
    solved = _solve(job, mesh, states, progress)
    record.add(solved.mesh, solved.results)
    for number in (1, 2):
        finer = refiner.series(number)
        limit = job.meshing.max_dofs or MOST_DOFS
        if finer.dof_count > limit:
            raise MeshError([_too_many(finer.dof_count, limit)])
        solved = _solve(job, finer, states, progress)
        record.add(solved.mesh, solved.results)
    record.write(solved.results, kind="series")
    return solved


def _too_many(dofs: int, limit: int) -> Fault:
    return Fault(
        "/requests/convergence",
        f"one of the three meshes would have {dofs} unknowns, more than {limit}: coarsen the "
        "job's own mesh, or leave the record out",
    )


def solve_adaptively(
    job: Job, refiner: Refiner, mesh: Mesh, progress: Progress, seconds: float = SECONDS
) -> Solved:
    """Refine until the estimated error of every state is below `meshing.target_error`.

    Stops earlier where a limit is met, which the record names.

    Parameters
    ----------
    mesh : the first one
    seconds : for all meshes together

    Raises
    ------
    MeshError, AnalysisError   on the first mesh; later ones end the run with the last good mesh.
    """
    run = _Run(job, refiner, progress, seconds)
    solved = run.solve(mesh)
    while (stop := run.stop(solved)) is None:
        try:
            finer = run.refine(solved)
            if isinstance(finer, str):
                stop = finer
                break
            solved = run.solve(finer)
        except MeshError as error:
            run.reason = str(error)
            stop = "mesh"
            break
    run.record.write(
        solved.results,
        kind="adaptive",
        target_error=run.target,
        max_dofs=run.most_dofs,
        stopped_by=stop,
        message=MESSAGES[stop] + (f": {run.reason}" if run.reason else ""),
    )
    return solved


class _Run:
    """One adaptive run: its limits, and what its meshes have shown so far."""

    def __init__(self, job: Job, refiner: Refiner, progress: Progress, seconds: float) -> None:
        assert job.meshing.target_error is not None
        self.target = job.meshing.target_error
        self.most_dofs = job.meshing.max_dofs or MOST_DOFS
        self.record = Record(job.meshing.element)
        self.reason = ""
        self._job, self._refiner, self._progress = job, refiner, progress
        self._states = load_states(job)
        self._end = time.monotonic() + seconds
        self._errors: list[float] = []
        self._goal = 0.0  # asked of the mesh that comes
        self._last = (0, 0.0)  # dofs of the last mesh, and the seconds that it took

    def solve(self, mesh: Mesh) -> Solved:
        start = time.monotonic()
        solved = _solve(self._job, mesh, self._states, self._progress)
        self._last = (mesh.dof_count, time.monotonic() - start)
        self.record.add(solved.mesh, solved.results)
        self._errors.append(solved.error)
        return solved

    def stop(self, solved: Solved) -> Stop | None:
        """Why no further mesh is wanted."""
        errors = self._errors
        if solved.error <= self.target and (len(errors) >= LEAST_MESHES or solved.error == 0):
            return "target"
        if len(errors) >= MOST_MESHES:
            return "steps"
        if len(errors) > LEAST_MESHES and max(errors[-3:-1]) < LEAST_GAIN * errors[-1]:
            return "no-gain"
        return None

    def refine(self, solved: Solved) -> Mesh | Stop:
        """The next mesh, or the limit that it would break.

        Raises
        ------
        MeshError   it cannot be made.
        """
        error = solved.error
        # Meshes that came out worse than asked are asked for more.
        missed = float(np.clip(error / self._goal, 1.0, 2.0)) if self._goal else 1.0
        if error <= self.target:
            self._goal = LEAST_STEP * error
        else:
            self._goal = max(STEP * error, MARGIN * self.target / missed)
        ratios = solved.wanted.ratios(self._goal)
        dofs = solved.mesh.dof_count
        expected = float((1 / ratios**2).mean()) * dofs
        most, limit = self._most()
        if expected > most:
            if most < LEAST_GROWTH * dofs:
                return limit
            ratios *= (expected / most) ** 0.5
        places = find_singular_places(solved.solution.model)
        corners = solved.wanted.at_corners(solved.mesh, ratios, places)
        finer = self._refiner.finer(solved.mesh, ratios, corners)
        return finer if finer.dof_count <= self.most_dofs else "max_dofs"

    def _most(self) -> tuple[float, Stop]:
        """How many dofs the next mesh may have, and which limit says so."""
        left = max(self._end - time.monotonic(), 0.0)
        dofs, seconds = self._last
        affordable = dofs * (left / max(seconds, 1e-3)) ** (1 / GROWTH)
        if affordable < MARGIN * self.most_dofs:
            return affordable, "time"
        return MARGIN * self.most_dofs, "max_dofs"


def _solve(job: Job, mesh: Mesh, states: States, progress: Progress) -> Solved:
    solution = solve(job, mesh, progress)
    recovery = Recovery.build(solution.model)
    wanted = SizesWanted(mesh.blocks[0].element.order)
    results = summarise(solution, recovery, states, progress, wanted=wanted)
    return Solved(solution, recovery, wanted, results)

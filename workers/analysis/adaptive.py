"""Solving a job on meshes that follow its errors, until a target error is reached.

The results are those of the last mesh, with the record of all of them in `convergence`.
"""

import time
from typing import Literal

import numpy as np

from workers.analysis.convergence import Record
from workers.analysis.mesh import Mesh
from workers.analysis.refiner import Refiner
from workers.analysis.singularities import find_singular_places
from workers.analysis.solved import Progress, Solved, solve_on
from workers.errors import MeshError
from workers.job import Job

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
    "time": "a finer mesh would take longer than allowed",
    "no-gain": "finer meshes no longer reduce the error",
    "mesh": "the plate could not be meshed finer",
}


def solve_adaptively(
    job: Job,
    refiner: Refiner,
    mesh: Mesh,
    progress: Progress,
    *,
    most_dofs: int | None = None,
    seconds: float = SECONDS,
) -> Solved:
    """Refine until the estimated error of every state is below `meshing.target_error`.

    Stops earlier where a limit is met, which the record names.

    Parameters
    ----------
    mesh : the first one
    most_dofs : beside `meshing.max_dofs`; the smaller one counts
    seconds : for all meshes together

    Raises
    ------
    MeshError, AnalysisError   on the first mesh; later ones end the run with the last good mesh.
    """
    run = _Run(job, refiner, progress, most_dofs, seconds)
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
    if solved.error <= run.target:
        stop, run.reason = "target", ""  # the limit only cut short the series
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

    def __init__(
        self,
        job: Job,
        refiner: Refiner,
        progress: Progress,
        most_dofs: int | None,
        seconds: float,
    ) -> None:
        assert job.meshing.target_error is not None
        self.target = job.meshing.target_error
        limits = (job.meshing.max_dofs or MOST_DOFS, most_dofs)
        self.most_dofs = min(limit for limit in limits if limit is not None)
        self.record = Record(job.meshing.element)
        self.reason = ""
        self._job, self._refiner, self._progress = job, refiner, progress
        self._end = time.monotonic() + seconds
        self._errors: list[float] = []
        self._goal = 0.0  # asked of the mesh that comes
        self._last = (0, 0.0)  # dofs of the last mesh, and the seconds that it took

    def solve(self, mesh: Mesh) -> Solved:
        start = time.monotonic()
        solved = solve_on(self._job, mesh, self._progress)
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
        self._progress("meshing", 0.0)
        places = find_singular_places(solved.solution.model)
        corners = solved.wanted.at_corners(ratios, places)
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

"""A job solved on one mesh, with everything that is made from the solution at once."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Protocol

from workers.analysis.combine import load_states
from workers.analysis.envelope import Envelope
from workers.analysis.finite import require_numbers
from workers.analysis.mesh import Mesh
from workers.analysis.model import Model
from workers.analysis.recovery import Recovery
from workers.analysis.sizes_wanted import SizesWanted
from workers.analysis.solution import Kept, Solution, solve
from workers.analysis.summary import summarise
from workers.job import Job

Json = dict[str, Any]
Progress = Callable[[str, float], None]

KEPT_BYTES = 200e6  # for operators that serve the summary and the field files of all states


@dataclass(frozen=True, eq=False)
class Solved:
    """results : as `summarise` makes them."""

    solution: Solution
    recovery: Recovery
    envelope: Envelope
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


class Shared(Protocol):
    """What jobs of one model have in common, see `workers/shared_model.py`."""

    kept: Kept

    def recovery(self, model: Model) -> Recovery: ...


def solve_on(
    job: Job,
    mesh: Mesh,
    progress: Progress,
    shared: Shared | None = None,
    memory: float | None = None,
) -> Solved:
    """Solve and summarise.

    memory : for the factor, see `solution.solve` [bytes]

    Raises
    ------
    MeshError, AnalysisError   as `solution.solve`, `summarise` and `require_numbers`.
    """
    solution = solve(job, mesh, progress, kept=shared.kept if shared else None, memory=memory)
    progress("recovering", 0.0)
    model = solution.model
    recovery = shared.recovery(model) if shared else Recovery.build(model, KEPT_BYTES)
    envelope, wanted = Envelope(), SizesWanted(mesh)
    results = summarise(solution, recovery, load_states(job), progress, envelope, wanted)
    require_numbers(results)
    return Solved(solution, recovery, envelope, wanted, results)

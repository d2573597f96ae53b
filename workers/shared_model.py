"""What jobs of one model have in common while they are worked on one after the other.

The first job fills it; the next ones spare themselves meshing, factorisation and the operators of
stress recovery. Each job still has its own loads, checks, results and files.
"""

from dataclasses import dataclass, field, replace

from workers.analysis.mesh import Mesh
from workers.analysis.model import Model
from workers.analysis.recovery import Recovery
from workers.analysis.solution import Kept

KEPT_BYTES = 400e6  # for operators that serve one job after another


@dataclass(eq=False)
class SharedModel:
    """Mesh, factorised system and stress recovery of a model; empty at first."""

    mesh: Mesh | None = None
    kept: Kept = field(default_factory=Kept)
    _recovery: Recovery | None = None

    def recovery(self, model: Model) -> Recovery:
        """Stress recovery on the shared mesh, for the job of this model."""
        if self._recovery is None:
            self._recovery = Recovery.build(model, KEPT_BYTES)
        return replace(self._recovery, model=model)

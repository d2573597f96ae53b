"""What the supports of a job ask of a mesh: rows and springs, with the faults of all at once.

How the rows are put into the equations is in `supports.py`.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.selection import Finder
from workers.analysis.springs import SpringBlocks, spring_blocks
from workers.analysis.support_rows import ALL, Rows, support_rows
from workers.errors import Fault, FaultyError, MeshError
from workers.job import Job


@dataclass(frozen=True, eq=False)
class Held:
    """Rows of all supports, and for each support its springs."""

    rows: Rows
    springs: tuple[SpringBlocks, ...]

    def directions(self) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
        """Every node (r,) and direction (r, 2) in which a row or a spring resists."""
        parts = [(self.rows.node, self.rows.direction)]
        parts += [spring.directions() for spring in self.springs]
        nodes, directions = zip(*parts, strict=True)
        return np.concatenate(nodes), np.concatenate(directions)


def held_by(job: Job, finder: Finder) -> Held:
    """Put the supports of a job on a mesh.

    Raises
    ------
    MeshError   supports catch nothing, or have no direction there; carries all faults.
    """
    case_numbers = {case.name: number for number, case in enumerate(job.load_cases)}
    faults: list[Fault] = []
    rows: list[Rows] = []
    springs: list[SpringBlocks] = []
    for number, support in enumerate(job.supports):
        try:
            selection = finder.find(support.on, f"{support.pointer}/on")
            case = ALL if support.case is None else case_numbers[support.case]
            rows.extend(support_rows(support, selection, finder.mesh, number, case))
            springs.append(spring_blocks(support, selection, finder.mesh))
        except FaultyError as error:
            faults.extend(error.faults)
    if faults:
        raise MeshError(faults)
    return Held(Rows.join(rows), tuple(springs))

"""What the supports hold along the boundary: nothing, both directions, or one of them.

Springs count as nothing: they yield, and do not make a stress infinite.
"""

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh
from workers.analysis.selection import Finder
from workers.analysis.wedge import Condition
from workers.job import Job, Support

Array = NDArray[np.float64]

ALONG = np.cos(np.radians(45.0))  # a held direction this near to the normal holds across
PARALLEL = 1e-6  # sine of the angle between two directions that count as one


class SideConditions:
    """Which directions are held along each facet of the boundary."""

    def __init__(self, mesh: Mesh, held: Mapping[int, list[Array | None]]) -> None:
        self._mesh = mesh
        self._held = held  # by row of the boundary; None stands for the facet's normal
        self._table = mesh.facet_table(mesh.boundary)

    @classmethod
    def of(cls, job: Job, finder: Finder) -> "SideConditions":
        mesh = finder.mesh
        row = {tuple(facet): n for n, facet in enumerate(mesh.boundary.tolist())}
        held: dict[int, list[Array | None]] = {}
        for support in job.supports:
            directions = _directions(support)
            if not directions:
                continue
            for facet in finder.find(support.on, f"{support.pointer}/on").facets.tolist():
                if tuple(facet) in row:
                    held.setdefault(row[tuple(facet)], []).extend(directions)
        return cls(mesh, held)

    def at(self, rows: NDArray[np.intp], *, end: bool) -> list[Condition]:
        """Condition of facets at their ends or starts."""
        return [self._condition(int(row), end) for row in rows]

    def _condition(self, row: int, end: bool) -> Condition:
        directions = self._held.get(row)
        if not directions:
            return "free"
        a, b = self._mesh.nodes[self._table[row, :2]]
        along = b - a
        if self._table[row, 2] >= 0:
            middle = self._mesh.nodes[self._table[row, 2]]
            along = 3 * b + a - 4 * middle if end else 4 * middle - 3 * a - b
        along = along / np.linalg.norm(along)
        normal = np.array([along[1], -along[0]])
        unit = [normal if d is None else d / np.linalg.norm(d) for d in directions]
        if any(abs(unit[0][0] * d[1] - unit[0][1] * d[0]) > PARALLEL for d in unit[1:]):
            return "fixed"
        return "roller" if abs(unit[0] @ normal) >= ALONG else "slider"


def _directions(support: Support) -> list[Array | None]:
    """Directions that a support holds stiffly; None is the normal of the side."""
    found: list[Array | None] = []
    if support.ux is not None:
        found.append(np.array([1.0, 0.0]))
    if support.uy is not None:
        found.append(np.array([0.0, 1.0]))
    if support.normal is not None:
        found.append(None)
    if support.along is not None:
        found.append(np.array(support.along))
    return found

"""The nodal forces of all load cases, in the form in which they arise.

Loads on sides touch few nodes, loads in the volume are combinations of a few unit loads. Written
out, hundreds of cases would take as much memory as their displacements; here they are written out
for some cases, or at some nodes, when they are needed.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from workers.analysis.loads.volume import VolumeTotals

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class NodalForces:
    """direct : (2N, c) sparse, loads at points and on sides [F]; volumes : the others."""

    direct: csr_array
    volumes: tuple[VolumeTotals, ...]

    @property
    def case_count(self) -> int:
        return int(self.direct.shape[1])

    @property
    def node_count(self) -> int:
        return int(self.direct.shape[0]) // 2

    def of_cases(self, cases: slice, order: NDArray | None = None) -> Array:
        """Forces on all nodes in some cases, (N, 2, k) [F].

        order (N,) : the node of each row; the mesh's own order if not given.
        """
        return self._written_out(np.arange(self.node_count) if order is None else order, cases)

    def at(self, nodes: NDArray) -> Array:
        """Forces on some nodes in all cases, (n, 2, c) [F]."""
        return self._written_out(nodes, slice(0, self.case_count))

    def _written_out(self, nodes: NDArray, cases: slice) -> Array:
        dofs = (2 * np.asarray(nodes)[:, None] + np.arange(2)).ravel()
        direct = self.direct[:, cases][dofs].toarray()
        forces = direct.reshape(len(nodes), 2, direct.shape[1])
        rows = np.full(self.node_count, -1)
        rows[nodes] = np.arange(len(nodes))
        for totals in self.volumes:
            totals.add_forces(forces, cases, rows)
        return forces

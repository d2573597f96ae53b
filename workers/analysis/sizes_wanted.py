"""How large the elements of the next mesh should be, from the element errors of all states.

A mesh of given error has the fewest elements when all of them have the same error. If an element
whose squared error is e^2 is replaced by elements r times its size, there are r^-2 of them, with a
squared error of e^2 r^(2p) together for displacements of order p; the least number for a total of
E^2 needs

    r = (E^2 / sum of e^(2 / (p + 1)))^(1 / 2p)  e^(-1 / (p + 1))

Each state asks for its sizes; the smallest is taken. At a singular place the error falls with
r^lambda only (`wedge.py`), so that the same gain takes r^(p / lambda) there.

References
----------
Zienkiewicz & Zhu, Int. J. Numer. Meth. Engng 24 (1987), for sizes from the element errors and for
the exponent at a singular place. The rule itself, with equal errors of the new elements instead of
the old ones: Li & Bettess, Comm. Numer. Meth. Engng 11 (1995).
"""

from collections.abc import Iterable

import numpy as np
from numpy.typing import NDArray

from workers.analysis.error_estimate import ErrorEstimate
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.size_field import element_sizes
from workers.analysis.singularities import SingularPlace

Array = NDArray[np.float64]

# Change of the size in one step: errors on a coarse mesh are rough.
SMALLEST, LARGEST = 0.1, 2.0
SMALLEST_AT_CORNER = 0.02


class SizesWanted:
    """Grows as states stream by; then gives the sizes for any error that is asked for."""

    def __init__(self, mesh: Mesh) -> None:
        self._mesh = mesh
        self._order = mesh.blocks[0].element.order  # one for all of a mesh that can be refined
        self._need: Array | None = None  # 1 / r for E = the energy norm of the solution

    def include(self, estimate: ErrorEstimate) -> None:
        """Take in the estimate of some states."""
        p = self._order
        error = np.sqrt(np.concatenate(estimate.element))  # (m, k)
        total = estimate.strain + (error**2).sum(axis=0)
        stressed = estimate.relative > 0
        share = error[:, stressed] ** (1 / (p + 1))
        weight = ((share**2).sum(axis=0) / total[stressed]) ** (1 / (2 * p))
        need = (share * weight).max(axis=1, initial=0.0)
        self._need = need if self._need is None else np.maximum(self._need, need)

    def ratios(self, error: float) -> Array:
        """New size over old for all elements, block after block, (m,).

        error : relative energy norm wanted in every state
        """
        assert self._need is not None
        with np.errstate(divide="ignore"):
            ratio = error ** (1 / self._order) / self._need
        return np.clip(ratio, SMALLEST, LARGEST)

    def at_corners(self, ratios: Array, places: Iterable[SingularPlace]) -> Array:
        """x, y and size wanted at the singular places themselves, (s, 3) [L]."""
        sizes, points = element_sizes(self._mesh), []
        for place in places:
            touching = np.concatenate(
                [(b.connectivity == place.node).any(axis=1) for b in self._mesh.blocks]
            )
            ratio = min(float(ratios[touching].min()), 1.0)
            if place.exponent > 0:
                ratio = max(ratio ** (self._order / place.exponent), SMALLEST_AT_CORNER)
            points.append((*place.at, ratio * sizes[touching].min()))
        return np.array(points).reshape(-1, 3)

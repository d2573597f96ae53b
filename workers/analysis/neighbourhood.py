"""How far around a singular place the stress is not reported.

    radius = max(2 element sizes, min(thickness / 2, feature / 10)), at most feature / 2

Within about half a thickness of a notch or a concentrated force the plate is not in plane stress,
whatever the mesh says. Within two elements of the place the mesh shows its own size and not the
plate. The feature is what lies nearest: it keeps the neighbourhood from hiding another detail. Once
the elements are small enough the radius no longer depends on them, so that the stress outside
converges.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.connected import label_components
from workers.analysis.model import Model
from workers.analysis.turns import Turns

Array = NDArray[np.float64]

ELEMENTS = 2.0
OF_THICKNESS = 0.5
OF_FEATURE = 0.1
MOST = 0.5  # of the feature


@dataclass(frozen=True, eq=False)
class Surroundings:
    """What the radius of a node follows from.

    ends : (b, 2) nodes of the boundary facets; stretch : (b,) which smooth piece of the boundary
    each belongs to; corners : nodes at which the boundary has corners
    size, thickness : (N,) longest side and greatest thickness of the elements at each node [L]
    """

    model: Model
    ends: NDArray[np.int32]
    stretch: NDArray[np.int32]
    corners: NDArray[np.intp]
    size: Array
    thickness: Array

    @classmethod
    def of(cls, model: Model, boundary: Turns) -> "Surroundings":
        """boundary : turns of `mesh.boundary`"""
        mesh = model.mesh
        smooth = ~boundary.is_corner
        size, thickness = np.zeros(mesh.node_count), np.zeros(mesh.node_count)
        for number, (block, section) in enumerate(zip(mesh.blocks, model.sections, strict=True)):
            corners = mesh.coords(number)[:, : block.element.corners]
            sides = np.linalg.norm(corners - np.roll(corners, 1, axis=1), axis=2)
            for column in block.connectivity.T:
                np.maximum.at(size, column, sides.max(axis=1))
                np.maximum.at(thickness, column, section.thickness)
        return cls(
            model=model,
            ends=mesh.facet_ends(mesh.boundary),
            stretch=label_components(
                len(mesh.boundary), boundary.incoming[smooth], boundary.outgoing[smooth]
            ),
            corners=np.unique(boundary.node[boundary.is_corner]),
            size=size,
            thickness=thickness,
        )

    def element_size(self, node: int) -> float:
        """Longest side of the elements at a node [L]."""
        return float(self.size[node])

    def radius(self, node: int) -> float:
        """Of the neighbourhood of a node [L]."""
        feature = self.feature(node)
        own = min(OF_THICKNESS * float(self.thickness[node]), OF_FEATURE * feature)
        return min(max(ELEMENTS * self.element_size(node), own), MOST * feature)

    def feature(self, node: int) -> float:
        """Distance to the nearest corner, or piece of boundary that does not start here [L]."""
        nodes = self.model.mesh.nodes
        own = np.unique(self.stretch[(self.ends == node).any(axis=1)])
        others = np.union1d(self.ends[~np.isin(self.stretch, own)], self.corners)
        others = others[others != node]
        if len(others):
            return float(np.linalg.norm(nodes[others] - nodes[node], axis=1).min())
        # A point on a round plate without holes: its far side.
        return float(np.linalg.norm(nodes[self.ends] - nodes[node], axis=2).max())

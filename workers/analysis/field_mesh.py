"""Where fields live: one point for each node in each region that meets there.

Stress jumps where the thickness or the material changes, so a node on the border of two regions
carries one value per region. Recovery, fields and VTK files share these points; displacements are
the node's own at each of them.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh

Array = NDArray[np.float64]
Indices = NDArray[np.int32]


@dataclass(frozen=True, eq=False)
class FieldMesh:
    """The (node, region) pairs of a mesh and the elements on them.

    mesh : Mesh
    points : (P, 2) array               positions [L]
    origin : (P,) int32 array           node number of each point, ascending
    region : (P,) int32 array           index into mesh.regions
    connectivity : tuple of (m, n)      per block of the mesh, numbers of points instead of nodes
    """

    mesh: Mesh
    points: Array
    origin: Indices
    region: Indices
    connectivity: tuple[Indices, ...]

    @classmethod
    def build(cls, mesh: Mesh) -> "FieldMesh":
        count = len(mesh.regions)
        keys = [
            block.connectivity.astype(np.int64) * count + block.region[:, None]
            for block in mesh.blocks
        ]
        used = np.zeros(mesh.node_count * count, dtype=bool)
        for key in keys:
            used[key] = True
        pairs = np.flatnonzero(used)
        number = np.cumsum(used, dtype=np.int32) - 1
        origin = (pairs // count).astype(np.int32)
        return cls(
            mesh=mesh,
            points=mesh.nodes[origin],
            origin=origin,
            region=(pairs % count).astype(np.int32),
            connectivity=tuple(number[key].astype(np.int32) for key in keys),
        )

    @property
    def point_count(self) -> int:
        return len(self.origin)

    @cached_property
    def on_border(self) -> NDArray[np.bool_]:
        """(P,) True where a point lies on the border of its region, the plate's edge included."""
        edges = self.mesh.edges
        first, counts = edges.first[:-1], edges.counts
        lone = edges.facets[first[counts == 1]]
        one, other = (self.mesh.facet_of(edges.facets[first[counts == 2] + i]) for i in (0, 1))
        parted = self._facet_region(one) != self._facet_region(other)
        border = np.zeros(self.point_count, dtype=bool)
        for group in self.mesh.facet_groups(
            np.concatenate((self.mesh.facet_of(lone), one[parted], other[parted]))
        ):
            side = list(self.mesh.blocks[group.block].element.sides[group.side])
            border[self.connectivity[group.block][group.elements][:, side]] = True
        return border

    def _facet_region(self, facets: NDArray[np.int32]) -> Indices:
        region = np.empty(len(facets), np.int32)
        for number, block in enumerate(self.mesh.blocks):
            here = facets[:, 0] == number
            region[here] = block.region[facets[here, 1]]
        return region

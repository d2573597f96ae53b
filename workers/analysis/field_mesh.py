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
        sides = [
            points[:, list(side)]
            for block, points in zip(self.mesh.blocks, self.connectivity, strict=True)
            for side in block.element.sides
        ]
        ends = np.concatenate([np.sort(side[:, :2], axis=1) for side in sides]).astype(np.int64)
        keys = ends[:, 0] * self.point_count + ends[:, 1]
        _, inverse, owners = np.unique(keys, return_inverse=True, return_counts=True)
        lone = owners[inverse] == 1
        border = np.zeros(self.point_count, dtype=bool)
        start = 0
        for side in sides:
            border[side[lone[start : start + len(side)]]] = True
            start += len(side)
        return border

"""A side as integration points: where side loads are formed and turned into nodal forces."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csr_array

from workers.analysis.mesh import Facets
from workers.analysis.model import Model

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Side:
    """The p integration points of some facets, on k nodes.

    nodes : (k,) int          node numbers
    shape : (k, p) sparse     shape functions at the points
    position : (p, 2)         [L]
    normal, tangent : (p, 2)  unit vectors: outward; along, with the material on the left
    length : (p,)             share of each point in the length of the side [L]
    thickness : (p,)          [L]
    facet : (p,) int          row of the facet in `facets`
    within : (p,)             0 to 1 from the start to the end of the point's facet
    facets : (f, 3)           block, element, local side
    """

    nodes: NDArray[np.int64]
    shape: csr_array
    position: Array
    normal: Array
    tangent: Array
    length: Array
    thickness: Array
    facet: NDArray[np.int64]
    within: Array
    facets: Facets

    def nodal(self, force: Array) -> Array:
        """Consistent nodal forces (k, 2) [F] of a force per length (p, 2) [F/L]."""
        return self.shape @ (force * self.length[:, None])


def side_of(model: Model, facets: Facets) -> Side:
    """Gather the integration points of facets (f, 3), element types mixed."""
    mesh = model.mesh
    nodes = mesh.facet_nodes(facets).astype(np.int64)
    parts: list[tuple[Array, ...]] = []
    entries: list[tuple[Array, ...]] = []
    count = 0
    for group in mesh.facet_groups(facets):
        block = mesh.blocks[group.block]
        element, side = block.element, group.side
        connectivity = block.connectivity[group.elements]
        coords = mesh.nodes[connectivity]
        position, tangent = element.side_points(coords, side)
        size = np.linalg.norm(tangent, axis=2)
        m, q = size.shape
        start, end = coords[:, element.sides[side][0]], coords[:, element.sides[side][1]]
        parts.append(
            (
                position.reshape(-1, 2),
                (tangent / size[..., None]).reshape(-1, 2),
                (size * element.side_rule().weights).ravel(),
                np.repeat(model.sections[group.block].thickness[group.elements], q),
                np.repeat(group.rows, q),
                _within(position, start, end).ravel(),
            )
        )
        local = list(element.sides[side])
        N = element.shape_functions(element.side_natural_points(side))[:, local]
        points = count + np.arange(m * q).reshape(m, q, 1)
        rows = np.searchsorted(nodes, connectivity[:, local])[:, None, :]
        shape = (m, q, len(local))
        entries.append(tuple(np.broadcast_to(a, shape).ravel() for a in (N[None], rows, points)))
        count += m * q
    position, tangent, length, thickness, facet, within = (
        np.concatenate(arrays) for arrays in zip(*parts, strict=True)
    )
    N, rows, points = (np.concatenate(arrays) for arrays in zip(*entries, strict=True))
    normal = np.stack([tangent[:, 1], -tangent[:, 0]], axis=1)
    shape_matrix = coo_array((N, (rows, points)), shape=(len(nodes), count)).tocsr()
    return Side(
        nodes, shape_matrix, position, normal, tangent, length, thickness, facet, within, facets
    )


def _within(position: Array, start: Array, end: Array) -> Array:
    """Fraction of the way along each facet; exact where the facet is straight."""
    from_start = np.linalg.norm(position - start[:, None], axis=2)
    to_end = np.linalg.norm(position - end[:, None], axis=2)
    return from_start / (from_start + to_end)


def fractions(side: Side, model: Model) -> Array:
    """How far along the whole side each point lies, (p,) from 0 to 1.

    Raises
    ------
    BrokenChainError   the facets do not form one side from a start to an end.
    """
    start, end = model.mesh.chain(side.facets)
    return start[side.facet] + side.within * (end - start)[side.facet]

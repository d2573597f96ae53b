"""The mesh: nodes, blocks of elements, facets (element sides), named sides and points.

Whoever makes a mesh (the client's own, mapped patches, the free mesher) makes one of these. It is
taken as correct here; `meshing/explicit.py` checks one that comes from outside.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from elements.contract import ElementType
from workers.analysis.connected import label_components

PLATE = "plate"  # the region of whatever belongs to no named region
MOST_SIDES = 4  # of an element

Facets = NDArray[np.int32]  # (f, 3): block, element, local side


@dataclass(frozen=True, eq=False, repr=False)
class Block:
    """Elements of one type.

    connectivity : (m, n) int32   node numbers, corners counter-clockwise, then mid-sides
    region : (m,) int32           index into `Mesh.regions`
    """

    element: ElementType
    connectivity: NDArray[np.int32]
    region: NDArray[np.int32]

    @property
    def element_count(self) -> int:
        return len(self.connectivity)


class FacetGroup(NamedTuple):
    """Facets of one block on the same local side, for batch work.

    elements : (k,) int   element numbers in the block
    rows : (k,) int       where these facets stand in the array that was grouped
    """

    block: int
    side: int
    elements: NDArray[np.intp]
    rows: NDArray[np.intp]


class Edges(NamedTuple):
    """Element sides gathered by the two corners that they join.

    Edge e is shared by the facets `facets[first[e]:first[e + 1]]`, flat numbers that
    `Mesh.facet_of` turns into (block, element, side).
    """

    facets: NDArray[np.int32]  # (f,)
    first: NDArray[np.int32]  # (e + 1,)

    @property
    def counts(self) -> NDArray[np.int32]:
        """How many elements share each edge, (e,)."""
        return np.diff(self.first)


class BrokenChainError(ValueError):
    """Facets do not follow each other from one start to one end (or around one loop)."""


@dataclass(frozen=True, eq=False, repr=False)
class Mesh:
    """A plane mesh.

    nodes : (N, 2) float64   positions [L]
    regions : names; index 0 need not be "plate"
    sides : name -> (f, 3) int32 facets (block, element, local side)
    points : name -> node number
    """

    nodes: NDArray[np.float64]
    blocks: tuple[Block, ...]
    regions: tuple[str, ...] = (PLATE,)
    sides: Mapping[str, Facets] = field(default_factory=dict)
    points: Mapping[str, int] = field(default_factory=dict)

    def __repr__(self) -> str:
        kinds = ", ".join(f"{block.element_count} {block.element.name}" for block in self.blocks)
        return f"Mesh({self.node_count} nodes, {kinds})"

    # --- sizes -----------------------------------------------------------------------------

    @property
    def node_count(self) -> int:
        return len(self.nodes)

    @property
    def element_count(self) -> int:
        return sum(block.element_count for block in self.blocks)

    @property
    def dof_count(self) -> int:
        return 2 * len(self.nodes)

    @cached_property
    def diagonal(self) -> float:
        """Diagonal of the upright box around all nodes [L]: the measure for tolerances."""
        return float(np.linalg.norm(np.ptp(self.nodes, axis=0)))

    def coords(self, block: int) -> NDArray[np.float64]:
        """Node positions of every element of a block, (m, n, 2) [L]."""
        return self.nodes[self.blocks[block].connectivity]

    # --- facets ----------------------------------------------------------------------------

    @cached_property
    def _facet_offsets(self) -> NDArray[np.int64]:
        counts = [block.element_count * len(block.element.sides) for block in self.blocks]
        return np.concatenate(([0], np.cumsum(counts, dtype=np.int64)))

    def facet_of(self, flat: NDArray) -> Facets:
        """(block, element, side) of flat facet numbers (block by block, element by element)."""
        flat = np.asarray(flat)
        facets = np.empty((len(flat), 3), np.int32)
        facets[:, 0] = np.searchsorted(self._facet_offsets, flat, side="right") - 1
        sides = np.array([len(block.element.sides) for block in self.blocks])[facets[:, 0]]
        facets[:, 1], facets[:, 2] = np.divmod(flat - self._facet_offsets[facets[:, 0]], sides)
        return facets

    def flat_table(self) -> NDArray[np.int32]:
        """Start, end and mid-side node (or -1) of every facet, by flat number, (F, 3)."""
        tables = []
        for block in self.blocks:
            sides = block.element.sides
            table = np.full((block.element_count, len(sides), 3), -1, np.int32)
            for number, local in enumerate(sides):
                table[:, number, : len(local)] = block.connectivity[:, list(local)]
            tables.append(table.reshape(-1, 3))
        return np.concatenate(tables)

    @cached_property
    def edges(self) -> Edges:
        """All element sides, gathered by edge; within an edge by flat facet number."""
        start, end, _ = self.flat_table().T
        low, high = np.minimum(start, end), np.maximum(start, end)
        key = low.astype(np.int64) * self.node_count + high
        order = np.argsort(key)
        key = key[order]
        first = np.flatnonzero(np.concatenate(([True], key[1:] != key[:-1], [True])))
        facets = order.astype(np.int32)
        # The sort is not stable (a stable one is slower): put the pairs in order afterwards.
        pairs = first[:-1][np.diff(first) == 2]
        one, other = facets[pairs], facets[pairs + 1]
        facets[pairs], facets[pairs + 1] = np.minimum(one, other), np.maximum(one, other)
        return Edges(facets, first.astype(np.int32))

    @cached_property
    def boundary(self) -> Facets:
        """Facets that belong to one element only, (f, 3)."""
        edges = self.edges
        return self.facet_of(np.sort(edges.facets[edges.first[:-1][edges.counts == 1]]))

    def shared_facets(self) -> tuple[Facets, Facets]:
        """The two facets of every edge inside the mesh, (e, 3) each; the lower one first."""
        edges = self.edges
        pairs = edges.first[:-1][edges.counts == 2]
        return self.facet_of(edges.facets[pairs]), self.facet_of(edges.facets[pairs + 1])

    def find_facets(self, pairs: NDArray) -> Facets:
        """The facet between two corner nodes each, (k, 3); block -1 where there is none.

        Inside the mesh an edge has two facets: the one that runs from the first node to the
        second is taken, with its element on the left.
        """
        pairs = np.asarray(pairs).reshape(-1, 2)
        start, end, _ = self.flat_table().T
        wanted = np.zeros(self.node_count, bool)
        wanted[pairs] = True
        near = np.flatnonzero(wanted[start] & wanted[end])
        key = start[near].astype(np.int64) * self.node_count + end[near]
        order = np.argsort(key, kind="stable")
        near, key = near[order], key[order]
        found = np.full((len(pairs), 3), -1, np.int32)
        for one, other in ((1, 0), (0, 1)):
            sought = pairs[:, one].astype(np.int64) * self.node_count + pairs[:, other]
            place = np.minimum(np.searchsorted(key, sought), max(len(key) - 1, 0))
            hit = key[place] == sought if len(key) else np.zeros(len(pairs), bool)
            found[hit] = self.facet_of(near[place[hit]])
        return found

    def facet_groups(self, facets: Facets) -> Iterator[FacetGroup]:
        """The facets, gathered by block and local side."""
        facets = np.asarray(facets).reshape(-1, 3)
        kind = facets[:, 0] * MOST_SIDES + facets[:, 2]
        for number in np.unique(kind):
            rows = np.flatnonzero(kind == number)
            block, side = divmod(int(number), MOST_SIDES)
            yield FacetGroup(block, side, facets[rows, 1].astype(np.intp), rows)

    def facet_ends(self, facets: Facets) -> NDArray[np.int32]:
        """Start and end node of each facet, (f, 2); the material is on the left."""
        return self.facet_table(facets)[:, :2]

    def facet_table(self, facets: Facets) -> NDArray[np.int32]:
        """Start, end and mid-side node of each facet, (f, 3); -1 where there is no third."""
        table = np.full((len(facets), 3), -1, np.int32)
        for group in self.facet_groups(facets):
            block = self.blocks[group.block]
            local = list(block.element.sides[group.side])
            table[group.rows, : len(local)] = block.connectivity[group.elements][:, local]
        return table

    def facet_nodes(self, facets: Facets) -> NDArray[np.int32]:
        """Numbers of all nodes on the facets, mid-side nodes included; sorted, each once."""
        numbers = np.unique(self.facet_table(facets))
        return numbers[numbers >= 0]

    def facet_regions(self, facets: Facets) -> NDArray[np.int32]:
        """Region of the element that each facet belongs to, (f,)."""
        regions = np.empty(len(facets), np.int32)
        for number, block in enumerate(self.blocks):
            rows = facets[:, 0] == number
            regions[rows] = block.region[facets[rows, 1]]
        return regions

    def facet_lengths(self, facets: Facets) -> NDArray[np.float64]:
        """Length of each facet, along its curve, (f,) [L]."""
        lengths = np.empty(len(facets))
        for group in self.facet_groups(facets):
            block = self.blocks[group.block]
            coords = self.nodes[block.connectivity[group.elements]]
            _, tangent = block.element.side_points(coords, group.side)
            _, weights = block.element.side_rule()
            lengths[group.rows] = np.linalg.norm(tangent, axis=2) @ weights
        return lengths

    def chain(self, facets: Facets) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Where each facet lies along the side that the facets form.

        The side is traversed with the material on the left. A closed side starts at its corner
        node of greatest x (of those, the one of least y).

        Returns
        -------
        (f,), (f,)   distance of each facet's start and end along the side, over its length

        Raises
        ------
        BrokenChainError   the facets do not form one open or closed side.
        """
        order = self._chain_order(self.facet_ends(facets))
        length = self.facet_lengths(facets)[order]
        reached = np.cumsum(length)
        start, end = np.empty(len(order)), np.empty(len(order))
        start[order], end[order] = (reached - length) / reached[-1], reached / reached[-1]
        return start, end

    def _chain_order(self, ends: NDArray[np.int32]) -> NDArray[np.intp]:
        """Rows of `ends` in the order in which they follow each other."""
        if not len(ends):
            raise BrokenChainError("there are no facets")
        starting = {int(node): row for row, node in enumerate(ends[:, 0])}
        if len(starting) < len(ends) or len(np.unique(ends[:, 1])) < len(ends):
            raise BrokenChainError("the side branches, or doubles back on itself")
        heads = np.setdiff1d(ends[:, 0], ends[:, 1])
        if len(heads) > 1:
            x, y = self.nodes[heads[1]]
            raise BrokenChainError(
                f"the side has {len(heads)} separate pieces, one of which starts at ({x:g}, {y:g})"
            )
        if len(heads) == 0:
            corners = ends[:, 0]
            heads = corners[np.lexsort((self.nodes[corners, 1], -self.nodes[corners, 0]))[:1]]
        order, node, following = [], int(heads[0]), ends[:, 1].tolist()
        while (row := starting.pop(node, None)) is not None:
            order.append(row)
            node = following[row]
        if starting:
            raise BrokenChainError("the side has a closed loop beside its other pieces")
        return np.array(order, np.intp)

    # --- connection --------------------------------------------------------------------------

    @cached_property
    def components(self) -> NDArray[np.int32]:
        """Part number of each node, (N,); nodes that share an element are in one part."""
        first, second = [], []
        for block in self.blocks:
            others = block.connectivity[:, 1:]
            first.append(np.repeat(block.connectivity[:, 0], others.shape[1]))
            second.append(others.ravel())
        return label_components(self.node_count, np.concatenate(first), np.concatenate(second))

    @property
    def component_count(self) -> int:
        return int(self.components.max()) + 1

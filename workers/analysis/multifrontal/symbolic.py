"""Which nodes are eliminated together, and what each such front borders on.

A front (supernode) is a run of consecutive nodes that are eliminated at once in one dense matrix.
Its border are the later nodes that share an element with it, directly or through the fronts below.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from workers.analysis.assembly import NodePairs
from workers.analysis.mesh import Mesh
from workers.analysis.multifrontal.tree import (
    elimination_tree,
    postorder,
    renumber,
    subtree_sums,
)
from workers.analysis.ordering import (
    NAME,
    NodeOrder,
    corner_graph,
    dissected_corners,
    with_mid_sides,
)

Indices = NDArray[np.int64]

# Measured on plates of 100 000 dofs: smaller leaves cost calls, larger ones arithmetic.
LEAF_DOFS = 100
# Two fronts are joined if the zeros that they then store are at most this part of the entries:
# generous where fronts are small and calls cost more than arithmetic.
ZEROS_SMALL, SMALL_NODES = 0.3, 64
ZEROS_LARGE = 0.05
ALWAYS_JOIN = 20  # nodes


@dataclass(frozen=True, eq=False)
class Fronts:
    """The fronts of a factorisation, children before parents.

    first : (s + 1,)         front i eliminates the nodes first[i] ... first[i + 1] - 1
    border : (b,)            border nodes of all fronts, front by front, ascending
    border_first : (s + 1,)  where the border of each front starts
    """

    first: Indices
    border: Indices
    border_first: Indices

    @property
    def count(self) -> int:
        return len(self.first) - 1

    @property
    def node_count(self) -> int:
        return int(self.first[-1])

    @cached_property
    def front_of(self) -> Indices:
        """Front of each node."""
        return np.repeat(np.arange(self.count), np.diff(self.first))

    @cached_property
    def parent(self) -> Indices:
        """Front of the first border node, which takes over what a front leaves; -1 for a root."""
        parent = np.full(self.count, -1, np.int64)
        some = np.flatnonzero(np.diff(self.border_first))
        parent[some] = self.front_of[self.border[self.border_first[some]]]
        return parent

    @cached_property
    def entries(self) -> int:
        """Numbers on and below the diagonal of the factor (two dofs for each node)."""
        own, border = 2 * np.diff(self.first), 2 * np.diff(self.border_first)
        return int((own * (own + 1) // 2 + own * border).sum())


@dataclass(frozen=True, eq=False)
class Analysis:
    """The order of the nodes and the fronts in that order."""

    order: NodeOrder
    fronts: Fronts


def analyse(mesh: Mesh) -> Analysis:
    """Order the nodes of a mesh and find the fronts of its stiffness matrix."""
    corners = dissected_corners(mesh)
    graph = corner_graph(mesh, corners)
    parent = elimination_tree(graph.indptr, graph.indices)
    position = postorder(parent)
    parent = renumber(parent, position)
    placed = np.empty_like(corners)
    placed[position] = corners
    order = NodeOrder.from_order(NAME, with_mid_sides(mesh, placed))
    last = order.position[placed]  # every corner ends the run of mid-side nodes before it
    last[-1] = mesh.node_count - 1
    first = _front_starts(parent, last)
    pattern = NodePairs.build(
        [order.position[block.connectivity] for block in mesh.blocks], mesh.node_count
    )
    fronts = _join(first, _borders(first, pattern))
    return _along_separators(order, fronts, mesh)


def _front_starts(parent: Indices, last: Indices) -> Indices:
    """First node of each front, and the number of nodes at the end.

    Small subtrees are one front each; above them a vertex stays in the front of the vertex before
    it if that is its only child.
    """
    n = len(parent)
    weights = 2 * np.diff(last, prepend=-1)
    small = subtree_sums(parent, weights) <= LEAF_DOFS
    sizes = subtree_sums(parent, np.ones(n, np.int64))
    above = np.append(small, False)[parent]  # a root's parent -1 is the appended one
    top_of_small = small & ~above
    counted = (parent >= 0) & (top_of_small | ~small)
    children = np.bincount(parent[counted], minlength=n)
    follows = np.zeros(n, dtype=bool)
    follows[1:] = (parent[:-1] == np.arange(1, n)) & (children[1:] == 1) & ~small[:-1]
    starts = ~small & ~follows
    tops = np.flatnonzero(top_of_small)
    starts[tops - sizes[tops] + 1] = True
    starting = np.flatnonzero(starts)
    return np.concatenate(([0], last[starting[1:] - 1] + 1, [last[-1] + 1]))


def _borders(first: Indices, pattern: NodePairs) -> list[Indices]:
    """Border of each front: later neighbours of its nodes, and what its children border on."""
    count = len(first) - 1
    front_of = np.repeat(np.arange(count), np.diff(first))
    row = np.repeat(front_of, np.diff(pattern.indptr))
    later = front_of[pattern.indices] > row
    keys = np.unique(row[later] * pattern.node_count + pattern.indices[later])
    owner, node = np.divmod(keys, pattern.node_count)
    starts = np.searchsorted(owner, np.arange(count + 1)).tolist()
    ends = first[1:].tolist()
    inherited: list[list[Indices]] = [[] for _ in range(count)]
    borders = []
    for front in range(count):
        border = node[starts[front] : starts[front + 1]]
        if inherited[front]:
            border = _union((border, *inherited[front]))
            border = border[np.searchsorted(border, ends[front]) :]
        borders.append(border)
        if len(border):
            inherited[front_of[border[0]]].append(border)
        inherited[front] = []
    return borders


def _union(sets: tuple[Indices, ...]) -> Indices:
    """Ascending union of ascending sets; np.unique takes several times as long on small ones."""
    together = np.concatenate(sets)
    together.sort(kind="stable")  # merges ascending runs
    new = np.ones(len(together), dtype=bool)
    np.not_equal(together[1:], together[:-1], out=new[1:])
    return together[new]


def _join(first: Indices, borders: list[Indices]) -> Fronts:
    """Join a front with its last child where that stores few zeros (relaxed amalgamation).

    References
    ----------
    Ashcraft & Grimes, "The influence of relaxed supernode partitions on the multifrontal method",
    ACM Trans. Math. Softw. 15 (1989).
    """
    count = len(borders)
    start, end = first[:-1].tolist(), first[1:].tolist()
    size = [len(border) for border in borders]
    front_of = np.repeat(np.arange(count), np.diff(first))
    children: list[list[int]] = [[] for _ in range(count)]
    alive, zeros = [True] * count, [0] * count
    for front in range(count):
        while children[front]:
            child = max(children[front], key=end.__getitem__)
            if end[child] != start[front]:
                break
            below, own = end[child] - start[child], end[front] - start[front]
            both = below + own
            empty = zeros[child] + zeros[front] + below * (own + size[front] - size[child])
            entries = both * (both + 1) / 2 + both * size[front]
            allowed = ZEROS_SMALL if both <= SMALL_NODES else ZEROS_LARGE
            if both > ALWAYS_JOIN and empty > allowed * entries:
                break
            alive[child] = False
            start[front], zeros[front] = start[child], empty
            children[front].remove(child)
            children[front] += children[child]
        if size[front]:
            children[front_of[borders[front][0]]].append(front)
    kept = [front for front in range(count) if alive[front]]
    border = [borders[front] for front in kept]
    lengths = np.array([len(nodes) for nodes in border], np.int64)
    return Fronts(
        first=np.array([*(start[front] for front in kept), first[-1]], np.int64),
        border=np.concatenate([np.empty(0, np.int64), *border]),
        border_first=np.concatenate(([0], np.cumsum(lengths))),
    )


def _along_separators(order: NodeOrder, fronts: Fronts, mesh: Mesh) -> Analysis:
    """Sort the nodes within each front along its longest direction.

    A separator is a line across the plate, and what a child borders on is then a few contiguous
    runs of it: the child is added as slices (half the time of adding by index lists).
    """
    front = fronts.front_of
    points = mesh.nodes[order.order]
    number = np.bincount(front)
    mean = np.stack([np.bincount(front, points[:, i]) / number for i in (0, 1)], axis=1)
    x, y = (points - mean[front]).T
    xx, yy, xy = (np.bincount(front, product) for product in (x * x, y * y, x * y))
    angle = 0.5 * np.arctan2(2 * xy, xx - yy)
    along = x * np.cos(angle)[front] + y * np.sin(angle)[front]
    sorted_within = np.lexsort((along, front))
    moved = np.empty_like(sorted_within)
    moved[sorted_within] = np.arange(len(moved))
    owner = np.repeat(np.arange(fronts.count), np.diff(fronts.border_first))
    border = moved[fronts.border]
    border = border[np.lexsort((border, owner))]
    return Analysis(
        NodeOrder.from_order(order.name, order.order[sorted_within]),
        Fronts(fronts.first, border, fronts.border_first),
    )

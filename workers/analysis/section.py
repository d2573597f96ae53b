"""Where a straight cut crosses the mesh: the stepped line of element sides nearest to it.

The plate is parted along the infinite line through the cut: an element belongs to the side on
which its centre lies, left or right of the direction from start to end. The stepped line between
left and right elements, as far as the cut runs, is the section.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Block, Mesh
from workers.errors import Fault, MeshError
from workers.job import Cut

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

ON_LINE = 1e-9  # of the mesh's diagonal: such nodes lie on the cut
LONGEST = 1e6  # of a cut, over the size of the plate: digits of moments about its middle
# A cut should run from border to border. It may fall short by half an element, but by no more
# than this part of the length that it crosses (chords of arcs, rounded figures).
SHORT = 0.05


@dataclass(frozen=True, eq=False)
class Section:
    """A cut on a mesh.

    direction, normal : (2,) unit vectors along the cut and to its right
    middle : (2,)             [L]
    distance : (N,)           of the nodes from the line, positive on the right [L]
    nodes : (k,)              on the stepped line
    left : (b masks (m,))     elements left of the stepped line, for each block
    straddling : (b arrays)   elements with nodes on both sides of the straight line, in the part
                              that is cut, for each block
    """

    direction: Array
    normal: Array
    middle: Array
    distance: Array
    nodes: NDArray[np.int64]
    left: tuple[Mask, ...]
    straddling: tuple[NDArray[np.intp], ...]

    @property
    def node_on_left(self) -> Mask:
        """(N,) Whether a node lies left of the straight line; nodes on it do."""
        return self.distance <= 0


def find_section(mesh: Mesh, cut: Cut) -> Section:
    """Find the section of a cut.

    Raises
    ------
    MeshError   the cut has no length, does not cross the plate, ends inside it, or passes a notch
        so closely that the mesh cannot tell what it cuts.
    """
    start, end = np.array(cut.start, float), np.array(cut.end, float)
    length = float(np.linalg.norm(end - start))
    tolerance = ON_LINE * mesh.diagonal
    if length <= tolerance:
        raise _fault(cut, "the cut has no length; give two different ends")
    if length > LONGEST * mesh.diagonal:
        text = f"the cut is {length / mesh.diagonal:.2g} times as long as the plate is across, "
        raise _fault(cut, text + "and moments are about its middle; give ends near the plate")
    direction = (end - start) / length
    normal = np.array([direction[1], -direction[0]])
    along, across = (mesh.nodes - start) @ direction, (mesh.nodes - start) @ normal
    across[np.abs(across) <= tolerance] = 0.0
    left = tuple(across[_corners(b)].mean(axis=1) <= 0 for b in mesh.blocks)
    crossed = tuple(_crossing(along[_corners(b)], across[_corners(b)]) for b in mesh.blocks)
    steps = _find_steps(mesh, left, crossed, along, across)
    stretches = _merge(np.concatenate((*crossed, steps.on_line)), tolerance)
    chosen = stretches.within(cut, length)
    return Section(
        direction=direction,
        normal=normal,
        middle=(start + end) / 2,
        distance=across,
        nodes=steps.nodes_of(chosen[stretches.number(steps.along)], cut, mesh),
        left=left,
        straddling=tuple(
            _straddling(b, along, across, c, chosen, stretches)
            for b, c in zip(mesh.blocks, crossed, strict=True)
        ),
    )


def _corners(block: Block) -> NDArray[np.int32]:
    return block.connectivity[:, : block.element.corners]


def _crossing(along: Array, across: Array) -> Array:
    """From where to where the line is in each element, (m, corners) -> (m, 2); nan where it is not.

    An element that the line only touches is not crossed. Curved sides count as chords.
    """
    next_along, next_across = np.roll(along, -1, axis=1), np.roll(across, -1, axis=1)
    through = across * next_across < 0
    fraction = np.divide(across, across - next_across, out=np.zeros_like(across), where=through)
    at_side = np.where(through, along + fraction * (next_along - along), np.nan)
    at_corner = np.where(across == 0, along, np.nan)
    crossed = (across > 0).any(axis=1) & (across < 0).any(axis=1)
    interval = np.full((len(along), 2), np.nan)
    points = np.concatenate((at_side, at_corner), axis=1)[crossed]
    interval[crossed] = np.column_stack((np.nanmin(points, axis=1), np.nanmax(points, axis=1)))
    return interval


@dataclass(frozen=True, eq=False)
class _Steps:
    """Element sides between a left and a right element.

    along (k,) : where on the line each belongs
    nodes : node numbers of each, mid-side nodes included
    on_line (j, 2) : from where to where those lie that are on the line itself
    """

    along: Array
    nodes: tuple[NDArray[np.int32], ...]
    on_line: Array

    def nodes_of(self, chosen: Mask, cut: Cut, mesh: Mesh) -> NDArray[np.int64]:
        inside = [n for n, take in zip(self.nodes, chosen, strict=True) if take]
        outside = [n for n, take in zip(self.nodes, chosen, strict=True) if not take]
        if not inside:
            raise _fault(cut, "no element lies on the other side of the cut; move it inwards")
        nodes = np.unique(np.concatenate(inside)).astype(np.int64)
        if outside and (shared := np.intersect1d(nodes, np.concatenate(outside))).size:
            x, y = mesh.nodes[shared[0]]
            message = f"the cut cannot be told from its continuation near ({x:g}, {y:g}); move it"
            raise _fault(cut, message)
        return nodes


def _find_steps(
    mesh: Mesh, left: tuple[Mask, ...], crossed: tuple[Array, ...], along: Array, across: Array
) -> _Steps:
    edges = mesh.edges
    first = edges.first[:-1][edges.counts == 2]
    one, other = (mesh.facet_of(edges.facets[first + i]) for i in (0, 1))
    parted = _by_facet(left, one) != _by_facet(left, other)
    one, other = one[parted], other[parted]
    nodes: list[NDArray[np.int32]] = [np.empty(0, np.int32)] * len(one)
    for group in mesh.facet_groups(one):
        block = mesh.blocks[group.block]
        of_group = block.connectivity[group.elements][:, list(block.element.sides[group.side])]
        for row, numbers in zip(group.rows, of_group, strict=True):
            nodes[row] = numbers
    ends = mesh.facet_ends(one)
    on_line = np.sort(along[ends][(across[ends] == 0).all(axis=1)], axis=1)
    middle = tuple(interval.mean(axis=1) for interval in crossed)
    where = _by_facet(middle, one)
    where = np.where(np.isnan(where), _by_facet(middle, other), where)
    where = np.where(np.isnan(where), along[ends].mean(axis=1), where)
    return _Steps(where, tuple(nodes), on_line)


def _by_facet(values: tuple[NDArray, ...], facets: NDArray[np.int32]) -> NDArray:
    """Values of the elements, given for each block, at facets (f, 3)."""
    first = np.cumsum([0, *(len(v) for v in values)])
    return np.concatenate(values)[first[facets[:, 0]] + facets[:, 1]]


@dataclass(frozen=True, eq=False)
class _Stretches:
    """Where the infinite line runs in the plate, from one border to the next.

    ends (s, 2) : in ascending order [L]; slack (s, 2) : half an element at each end [L].
    """

    ends: Array
    slack: Array

    def number(self, along: Array) -> NDArray[np.intp]:
        """Which stretch is nearest to a position on the line."""
        between = (self.ends[:-1, 1] + self.ends[1:, 0]) / 2
        return np.searchsorted(between, along)

    def within(self, cut: Cut, length: float) -> Mask:
        """Which stretches the cut parts, (s,)."""
        start, end = self.ends.T
        short = np.minimum(self.slack, SHORT * (end - start)[:, None])
        apart = (end <= short[:, 1]) | (start >= length - short[:, 0])
        parted = (start >= -short[:, 0]) & (end <= length + short[:, 1])
        if (unclear := ~(apart | parted)).any():
            low, high = self.ends[unclear][0]
            at = [_point(cut, length, position) for position in (low, high)]
            message = (
                f"the cut ends inside the plate, which it crosses from {at[0]} to {at[1]}; "
                "let it run from border to border"
            )
            raise _fault(cut, message)
        if not (parted & ~apart).any():
            raise _fault(cut, "the cut does not cross the plate")
        return parted & ~apart


def _merge(intervals: Array, tolerance: float) -> _Stretches:
    """Join the intervals (j, 2) of single elements; rows of nan are left out."""
    intervals = intervals[~np.isnan(intervals[:, 0])]
    intervals = intervals[np.lexsort((intervals[:, 1], intervals[:, 0]))]
    reached = np.maximum.accumulate(intervals[:, 1]) if len(intervals) else np.empty(0)
    starts = np.flatnonzero(
        np.concatenate(([True], intervals[1:, 0] > reached[:-1] + tolerance))[: len(intervals)]
    )
    stops = np.concatenate((starts[1:], [len(intervals)])) - 1
    stops = stops[: len(starts)]
    ends = np.column_stack((intervals[starts, 0], reached[stops]))
    size = intervals[:, 1] - intervals[:, 0]
    return _Stretches(ends, np.column_stack((size[starts], size[stops])) / 2)


def _straddling(
    block: Block, along: Array, across: Array, crossed: Array, chosen: Mask, stretches: _Stretches
) -> NDArray[np.intp]:
    """Elements of a block with nodes left (or on the line) and right of it, in chosen stretches."""
    right = across[block.connectivity] > 0
    found = np.flatnonzero(right.any(axis=1) & ~right.all(axis=1))
    middle = crossed[found].mean(axis=1)
    nodes = block.connectivity[found]
    touching = np.where(right[found], np.nan, along[nodes])
    where = np.where(np.isnan(middle), np.nanmean(touching, axis=1), middle)
    return found[chosen[stretches.number(where)]]


def _point(cut: Cut, length: float, position: float) -> str:
    fraction = position / length
    x, y = ((1 - fraction) * a + fraction * b for a, b in zip(cut.start, cut.end, strict=True))
    return f"({x:g}, {y:g})"


def _fault(cut: Cut, message: str) -> MeshError:
    return MeshError([Fault(cut.pointer, message)])

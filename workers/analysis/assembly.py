"""Sparse assembly: element matrices in, one symmetric matrix of 2x2 node blocks out.

The pattern is found once from the connectivity and can be used again when only values change.
Supports are applied in `supports.py`, not here.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import bsr_array, csr_array

from workers.analysis.model import Model

Array = NDArray[np.float64]
Indices = NDArray[np.int32]

# Elements at once: the temporaries of about 1000 elements stay in the cache (measured: four times
# as many are 20 % slower, all at once twice as slow).
CHUNK = 1024


class Chunk(NamedTuple):
    """Some elements of one block, for batch work that stays in the cache."""

    block: int
    elements: slice


def chunks(model: Model, size: int = CHUNK) -> Iterator[Chunk]:
    """All elements of the model, block by block."""
    for number, block in enumerate(model.mesh.blocks):
        for start in range(0, block.element_count, size):
            yield Chunk(number, slice(start, min(start + size, block.element_count)))


@dataclass(frozen=True, eq=False)
class NodePairs:
    """Which node pairs share an element, and which element blocks add up to each.

    indptr (N + 1,), indices (b,) : the symmetric pattern by rows, columns ascending.
    gather : (b, p) sparse 0/1 matrix; row k picks the element blocks of pair k out of the p = sum
        of m n^2 that `element_blocks` lists.
    """

    indptr: Indices
    indices: Indices
    gather: csr_array

    @classmethod
    def build(cls, connectivity: Sequence[NDArray], node_count: int) -> "NodePairs":
        """Pattern of elements given by their node numbers, one (m, n) array for each block.

        Two linear bucket passes (a transposition each) sort the pairs by column and by row; a
        comparison sort of the pairs takes three times as long.
        """
        rows = np.concatenate([_repeat_each(nodes) for nodes in connectivity])
        columns = np.concatenate([_repeat_whole(nodes) for nodes in connectivity])
        pairs = np.arange(len(rows), dtype=np.int32)
        each = np.arange(len(rows) + 1, dtype=np.int32)
        by_column = csr_array((pairs, columns, each), shape=(len(rows), node_count)).tocsc()
        by_row = csr_array(
            (by_column.data, rows[by_column.indices], by_column.indptr),
            shape=(node_count, node_count),
        ).tocsc()
        return cls._merge(by_row.indptr, by_row.indices, by_row.data)

    @classmethod
    def _merge(cls, indptr: Indices, columns: Indices, pairs: Indices) -> "NodePairs":
        """Join equal columns of each row."""
        first = np.empty(len(columns), dtype=bool)
        first[:1] = True
        np.not_equal(columns[1:], columns[:-1], out=first[1:])
        first[indptr[:-1][np.diff(indptr) > 0]] = True
        starts = np.flatnonzero(first).astype(np.int32)
        ends = np.append(starts, np.int32(len(columns)))
        gather = csr_array(
            (np.ones(len(pairs)), pairs, ends), shape=(len(starts), len(pairs)), copy=False
        )
        return cls(np.searchsorted(starts, indptr).astype(np.int32), columns[starts], gather)

    @property
    def node_count(self) -> int:
        return len(self.indptr) - 1

    def add_up(self, element_blocks: Array) -> bsr_array:
        """Sum (p, 2, 2) element blocks into the (2N, 2N) matrix."""
        blocks = (self.gather @ element_blocks.reshape(-1, 4)).reshape(-1, 2, 2)
        size = 2 * self.node_count
        return bsr_array((blocks, self.indices, self.indptr), shape=(size, size), copy=False)


def _repeat_each(nodes: NDArray) -> Indices:
    return np.repeat(nodes.astype(np.int32, copy=False), nodes.shape[1], axis=1).ravel()


def _repeat_whole(nodes: NDArray) -> Indices:
    return np.tile(nodes.astype(np.int32, copy=False), (1, nodes.shape[1])).ravel()


def element_blocks(model: Model) -> Array:
    """Stiffness of every element as node blocks, (p, 2, 2) with p = sum of m n^2 [F/L].

    Raises
    ------
    DegenerateElementError   det J <= 0 in an element.
    """
    sizes = [block.element_count * block.element.node_count**2 for block in model.mesh.blocks]
    offsets = np.concatenate(([0], np.cumsum(sizes)))
    blocks = np.empty((offsets[-1], 2, 2))
    for number, elements in chunks(model):
        block, section = model.mesh.blocks[number], model.sections[number]
        n = block.element.node_count
        stiffness = block.element.stiffness(
            model.mesh.nodes[block.connectivity[elements]],
            section.constitutive[elements],
            section.thickness[elements],
        )
        start = offsets[number] + elements.start * n * n
        target = blocks[start : start + len(stiffness) * n * n].reshape(-1, n, n, 2, 2)
        target[...] = stiffness.reshape(-1, n, 2, n, 2).transpose(0, 1, 3, 2, 4)
    return blocks


def assemble_stiffness(
    model: Model, position: NDArray | None = None, pairs: NodePairs | None = None
) -> bsr_array:
    """Stiffness matrix of the plate, without supports.

    Parameters
    ----------
    position : (N,) int array   row of each node; the mesh's own numbers if not given
    pairs : the pattern in those rows, if it is known already

    Returns
    -------
    (2N, 2N) bsr_array   symmetric, blocks 2x2, dofs u, v of each node [F/L]
    """
    if pairs is None:
        pairs = NodePairs.build(numbered(model, position), model.mesh.node_count)
    return pairs.add_up(element_blocks(model))


def numbered(model: Model, position: NDArray | None) -> list[NDArray]:
    """Connectivity of each block with the nodes' rows in place of their numbers."""
    blocks = [block.connectivity for block in model.mesh.blocks]
    return blocks if position is None else [position[nodes] for nodes in blocks]


def pair_positions(matrix: bsr_array, rows: NDArray, columns: NDArray) -> NDArray[np.int64]:
    """Where the blocks of given node pairs stand in `matrix.data`.

    Raises
    ------
    LookupError   a pair is not in the pattern.
    """
    size = len(matrix.indptr) - 1
    row_of = np.repeat(np.arange(size, dtype=np.int64), np.diff(matrix.indptr))
    keys = row_of * size + matrix.indices
    wanted = np.asarray(rows, np.int64) * size + columns
    found = np.searchsorted(keys, wanted)
    missing = (found >= len(keys)) | (keys[np.minimum(found, len(keys) - 1)] != wanted)
    if missing.any():
        row, column = np.asarray(rows)[missing][0], np.asarray(columns)[missing][0]
        raise LookupError(f"nodes {row} and {column} share no element")
    return found

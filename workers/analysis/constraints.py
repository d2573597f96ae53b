"""Held dofs in the matrix: nodes turned into their own axes, held dofs decoupled in place.

The pattern of the matrix stays as it is; which dofs are held is decided in `supports.py`.
"""

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import bsr_array

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


def turn_matrix(matrix: bsr_array, nodes: NDArray, axes: Array) -> None:
    """Write the matrix in the nodes' own axes, Q^T K Q, in place.

    nodes (t,) are block rows of the matrix, axes (t, 2, 2) the Q of each.
    """
    if not len(nodes):
        return
    size = len(matrix.indptr) - 1
    Q = np.full(size, -1)
    Q[nodes] = np.arange(len(nodes))
    rows = np.repeat(np.arange(size), np.diff(matrix.indptr))
    left = np.flatnonzero(Q[rows] >= 0)
    matrix.data[left] = axes[Q[rows[left]]].transpose(0, 2, 1) @ matrix.data[left]
    right = np.flatnonzero(Q[matrix.indices] >= 0)
    matrix.data[right] = matrix.data[right] @ axes[Q[matrix.indices[right]]]


def decouple(matrix: bsr_array, held: Mask) -> None:
    """Zero the rows and columns of held dofs (N, 2) in place; keep their diagonal as the scale."""
    size = len(matrix.indptr) - 1
    rows = np.repeat(np.arange(size), np.diff(matrix.indptr))
    at_node = held[:, 0] | held[:, 1]
    touched = np.flatnonzero(at_node[rows] | at_node[matrix.indices])
    row, column = rows[touched], matrix.indices[touched]
    gone = held[row][:, :, None] | held[column][:, None, :]
    on_diagonal: Mask = np.asarray(row == column)
    gone &= ~(on_diagonal[:, None, None] & np.eye(2, dtype=bool))
    matrix.data[touched] = np.where(gone, 0.0, matrix.data[touched])


def turn_vectors(vectors: Array, nodes: NDArray, axes: Array, *, back: bool = False) -> None:
    """Turn (N, 2, c) vectors at the given nodes into their own axes, or back; in place."""
    if len(nodes):
        turn = axes if back else axes.transpose(0, 2, 1)
        vectors[nodes] = turn @ vectors[nodes]

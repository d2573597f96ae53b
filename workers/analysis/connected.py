"""Connected components of a graph, with numpy alone."""

import numpy as np
from numpy.typing import NDArray


def label_components(count: int, first: NDArray, second: NDArray) -> NDArray[np.int32]:
    """Number the connected components of a graph.

    Parameters
    ----------
    count : int                     vertices, numbered from 0
    first, second : (e,) int        the two ends of each edge

    Returns
    -------
    (count,) int32   component of each vertex; components are numbered from 0 in the order of
        their lowest vertex

    References
    ----------
    Hooking to the lowest neighbouring root, then pointer jumping: Shiloach & Vishkin, "An
    O(log n) parallel connectivity algorithm", J. Algorithms 3 (1982).
    """
    root = np.arange(count, dtype=np.int32)
    first, second = np.asarray(first, np.int32), np.asarray(second, np.int32)
    while len(first):
        np.minimum.at(root, np.maximum(first, second), np.minimum(first, second))
        root = _jump(root)
        first, second = root[first], root[second]
        apart = first != second
        first, second = first[apart], second[apart]
    is_root = root == np.arange(count)
    return (np.cumsum(is_root, dtype=np.int32) - 1)[root]


def _jump(root: NDArray[np.int32]) -> NDArray[np.int32]:
    """Let every vertex point straight at its root."""
    while True:
        above = root[root]
        if np.array_equal(above, root):
            return root
        root = above

"""The elimination tree of a symmetric matrix: who is updated first by the elimination of whom."""

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import minimum_spanning_tree

Indices = NDArray[np.int64]


def elimination_tree(indptr: NDArray, indices: NDArray) -> Indices:
    """Parent of each vertex, -1 for a root.

    Parameters
    ----------
    indptr (n + 1,), indices : symmetric pattern by rows, in elimination order

    Whether two vertices are joined within the first k vertices decides the tree, and a minimum
    spanning tree with the later end as the weight of an edge keeps just that; so the walk in plain
    Python sees n - 1 edges instead of all.

    References
    ----------
    Liu, "The role of elimination trees in sparse factorization", SIAM J. Matrix Anal. Appl. 11
    (1990), algorithm 4.2 (with path compression).
    """
    n = len(indptr) - 1
    row = np.repeat(np.arange(n), np.diff(indptr))
    lower = indices < row
    later, earlier = row[lower], indices[lower]
    graph = csr_array((later.astype(float), (later, earlier)), shape=(n, n))
    tree = minimum_spanning_tree(graph, overwrite=True).tocoo()
    later, earlier = np.maximum(tree.row, tree.col), np.minimum(tree.row, tree.col)
    order = np.lexsort((earlier, later))
    parent, ancestor = [-1] * n, [-1] * n
    for i, k in zip(later[order].tolist(), earlier[order].tolist(), strict=True):
        while (above := ancestor[k]) != i:
            ancestor[k] = i
            if above < 0:
                parent[k] = i
                break
            k = above  # noqa: PLW2901  the walk towards the root
    return np.array(parent, np.int64)


def subtree_sums(parent: Indices, weights: NDArray) -> Indices:
    """Sum of the weights over each vertex and everything below it."""
    total = weights.tolist()
    for i, above in enumerate(parent.tolist()):
        if above >= 0:
            total[above] += total[i]
    return np.array(total, np.int64)


def postorder(parent: Indices) -> Indices:
    """Position of each vertex in a postorder: every subtree stands together, its root last.

    Nested dissection does not give one, and without it supernodes are short: nine times the
    entries (measured).
    """
    n = len(parent)
    sizes = subtree_sums(parent, np.ones(n, np.int64)).tolist()
    above = parent.tolist()
    end = [0] * n  # where the part of a vertex's range that is not yet given away ends
    position = [0] * n
    left = n
    for i in range(n - 1, -1, -1):
        if above[i] < 0:
            last, left = left, left - sizes[i]
        else:
            last = end[above[i]]
            end[above[i]] = last - sizes[i]
        position[i] = end[i] = last - 1
    return np.array(position, np.int64)


def renumber(parent: Indices, position: Indices) -> Indices:
    """The same tree with vertex i called position[i]."""
    renamed = np.full(len(parent), -1, np.int64)
    below = parent >= 0
    renamed[position[below]] = position[parent[below]]
    return renamed

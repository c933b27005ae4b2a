"""Network matrices, whatever the order and signs of their rows and columns.

The places of the nonzeros give a tree, if there is one (`graph_realisation`). A matrix of 0, 1
and -1 has at most one set of signs that makes it TU, up to negating rows and columns (Camion
1965). So the signs of the tree's paths either become the given ones by turning arcs, or the
matrix is not TU, let alone a network matrix.
"""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.sparse.csgraph import connected_components, depth_first_order

from ..certificates import Network
from ..deadline import Deadline
from ..forms.numbers import Integers
from .graph_realisation import realise


def recognise(matrix: sp.csc_array, deadline: Deadline | None = None) -> Network | None:
    """Recognise a network matrix.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Canonical: sorted indices, no stored zeros.
    deadline : Deadline, optional

    Returns
    -------
    Network or None
        None if the matrix is no network matrix, or if the time ran out.

    Examples
    --------
    >>> star = sp.csc_array([[1, 0, 1], [-1, 1, 0], [0, -1, -1]])
    >>> recognise(star).check(star)
    >>> recognise(abs(star)) is None
    True
    """
    if (np.abs(matrix.data) != 1).any():
        return None
    found = realise(matrix, deadline)
    if found is None:
        return None
    tree, arcs = found
    turned = _turned(matrix, _path_signs(matrix, tree, arcs))
    if turned is None:
        return None
    m = matrix.shape[0]
    tree, arcs = (
        np.where(turn[:, None], ends[:, ::-1], ends)
        for turn, ends in ((turned[:m], tree), (turned[m:], arcs))
    )
    return Network(tree, arcs)


def _path_signs(matrix: sp.csc_array, tree: Integers, arcs: Integers) -> Integers:
    """Per nonzero: +1 where the path of its column runs along the tree arc of its row, else -1."""
    m = matrix.shape[0]
    links = sp.coo_array((np.ones(m), tree.T), shape=(m + 1, m + 1)).tocsr()
    order, above = depth_first_order(links, 0, directed=False)
    first = np.empty(m + 1, np.int64)
    first[order] = np.arange(m + 1)
    size, parent = [1] * (m + 1), above.tolist()
    for node in order[:0:-1].tolist():
        size[parent[node]] += size[node]
    # Numbered in this order, all that lies beyond a tree arc has consecutive numbers.
    down = above[tree[:, 1]] == tree[:, 0]
    lower = np.where(down, tree[:, 1], tree[:, 0])[matrix.indices]
    column = np.repeat(np.arange(matrix.shape[1]), np.diff(matrix.indptr))
    tail = first[arcs[column, 0]] - first[lower]
    from_beyond = (tail >= 0) & (tail < np.array(size)[lower])
    return np.where(from_beyond != down[matrix.indices], 1, -1)


def _turned(matrix: sp.csc_array, signs: Integers) -> NDArray[np.bool_] | None:
    """Which rows and columns to negate to get from these signs to those of the matrix, if any do.

    In a graph with two copies of each row and column, one for each sign, the copies that go
    together are linked. Signs contradict where both copies of a line are connected.
    """
    m, n = matrix.shape
    size = m + n
    column = np.repeat(m + np.arange(n), np.diff(matrix.indptr))
    apart = np.where(matrix.data != signs, size, 0)
    to, back = column + apart, column + size - apart
    ends = np.concatenate((matrix.indices, matrix.indices + size)), np.concatenate((to, back))
    links = sp.coo_array((np.ones(ends[0].size), ends), shape=(2 * size, 2 * size))
    _, half = connected_components(links.tocsr(), directed=False)
    if (half[:size] == half[size:]).any():
        return None
    return np.asarray(half[:size] > half[size:])

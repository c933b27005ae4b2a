"""Interval matrices: the nonzeros of each column are consecutive in the order of the rows.

They are the network matrices of a path: rows are the arcs of the path, in their order, and a
column is a further arc that spans its interval. Signs follow from parity: two neighbours on the
path point the same way if and only if the columns over both have equal signs there.

Other orders than the given one are left to the general recogniser of networks, which finds them.
"""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from ..certificates import Network
from ..forms.numbers import Integers


def recognise(matrix: sp.csc_array) -> Network | None:
    """Recognise a matrix whose columns are intervals in the given order of its rows.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64

    Returns
    -------
    Network or None
        On the path with nodes 0 to m in the order of the rows.

    Examples
    --------
    >>> recognise(sp.csc_array([[1, 0], [1, 1], [0, 1]])).arcs.tolist()
    [[0, 2], [1, 3]]
    """
    m, n = matrix.shape
    width = np.diff(matrix.indptr)
    full = np.flatnonzero(width)
    place, along = np.arange(m), matrix.indices.astype(np.int64)
    if (np.abs(matrix.data) != 1).any() or not full.size:
        return None
    first, last = np.zeros(n, np.int64), np.zeros(n, np.int64)
    at = matrix.indptr[full]
    first[full], last[full] = np.minimum.reduceat(along, at), np.maximum.reduceat(along, at)
    if (last - first + 1 != width)[full].any():
        return None
    turned = _turned(matrix, along, m)
    if turned is None:
        return None
    ahead = np.where(turned[along[at]], -matrix.data[at], matrix.data[at]) == 1
    path = np.column_stack((place, place + 1))
    tree = np.where(turned[:, None], path[:, ::-1], path)
    ends = np.column_stack((first, last + (width > 0)))
    forward = np.full(n, True)
    forward[full] = ahead
    return Network(tree, np.where(forward[:, None], ends, ends[:, ::-1]))


def _turned(matrix: sp.csc_array, along: Integers, m: int) -> NDArray[np.bool_] | None:
    """Which places on the path must point backwards, or None where signs contradict."""
    column = np.repeat(np.arange(matrix.shape[1]), np.diff(matrix.indptr))
    if not matrix.nnz or (matrix.data == matrix.data[0]).all():
        return np.zeros(m, np.bool_)
    order = np.argsort(column * np.int64(m) + along, kind="stable")
    along, column, value = along[order], column[order], matrix.data[order]
    within = np.flatnonzero(column[1:] == column[:-1])
    alike = value[within] == value[within + 1]
    same, differ = np.zeros(m, np.bool_), np.zeros(m, np.bool_)
    same[along[within[alike]]] = True
    differ[along[within[~alike]]] = True
    if (same & differ).any():
        return None
    return np.concatenate(([False], np.cumsum(differ[:-1]) % 2 == 1))

"""Interval matrices: the nonzeros of each column are consecutive in some order of the rows.

They are the network matrices of a path: rows are the arcs of the path, in their order, and a
column is a further arc that spans its interval. Signs follow from parity: two neighbours on the
path point the same way if and only if the columns over both have equal signs there.

Other orders than the given one are found by the spectral sorting of Atkins, Boman and
Hendrickson (1998): wherever some order of the rows makes all columns intervals, sorting by the
Fiedler vector of A A' finds it, ties being sorted in turn.
"""

from __future__ import annotations

import numpy as np
import scipy.linalg
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.sparse.csgraph import connected_components

from ..certificates import Network
from ..forms.numbers import Integers

#: Sorting takes dense eigenvectors: more rows than these, or as many products, take too long.
MOST_ROWS = 500
MOST_PRODUCTS = 50_000_000


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
    return _along(matrix, np.arange(matrix.shape[0]))


def recognise_hidden(matrix: sp.csc_array) -> Network | None:
    """Recognise a matrix whose columns are intervals in some order of its rows.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Best without zero and copied rows and columns.

    Returns
    -------
    Network or None
        None as well where there are too many rows for sorting.

    Examples
    --------
    >>> middle_last = sp.csc_array([[1, 0], [0, 1], [1, 1]])
    >>> recognise(middle_last) is None, recognise_hidden(middle_last) is None
    (True, False)
    """
    width = np.diff(matrix.indptr).astype(np.float64)
    if matrix.shape[0] > MOST_ROWS or (width**2).sum() > MOST_PRODUCTS:
        return None
    if (np.abs(matrix.data) != 1).any():
        return None
    # Along the path, rows change only where a column begins or ends.
    pattern = abs(matrix)
    weight = np.random.default_rng(0).integers(2**62, size=matrix.shape[1])
    if np.unique(pattern @ weight).size > 2 * matrix.shape[1] + 1:
        return None
    similarity = (pattern @ pattern.T).toarray().astype(np.float64)
    return _along(matrix, _spectral_order(similarity))


def _along(matrix: sp.csc_array, order: Integers) -> Network | None:
    """The network of a path along the rows in this order, if the matrix is one."""
    m, n = matrix.shape
    width = np.diff(matrix.indptr)
    full = np.flatnonzero(width)
    place = np.empty(m, np.int64)
    place[order] = np.arange(m)
    along = place[matrix.indices]
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
    tree = np.where(turned[place][:, None], path[:, ::-1], path)
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


def _spectral_order(similarity: NDArray[np.float64]) -> Integers:
    """Order of the rows in which similarity falls off on both sides, if there is one."""
    size = len(similarity)
    if size <= 2:
        return np.arange(size)
    # What all have in common tells nothing; without it, the Fiedler value is simple.
    apart = similarity - similarity[~np.eye(size, dtype=np.bool_)].min()
    np.fill_diagonal(apart, 0.0)
    count, piece = connected_components(sp.csr_array(apart), directed=False)
    if count > 1:
        groups = [np.flatnonzero(piece == k) for k in range(count)]
    else:
        laplacian = np.diag(apart.sum(axis=0)) - apart
        _, vectors = scipy.linalg.eigh(laplacian, subset_by_index=[1, 1])
        fiedler = vectors[:, 0]
        order = np.argsort(fiedler)
        rise = np.diff(fiedler[order])
        tied = rise <= 1e-9 * np.ptp(fiedler)
        groups = np.split(order, np.flatnonzero(~tied) + 1)
    ordered = [
        group[_spectral_order(similarity[np.ix_(group, group)])] if group.size > 2 else group
        for group in groups
    ]
    return np.concatenate(ordered)

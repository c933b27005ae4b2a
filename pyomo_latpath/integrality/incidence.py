"""Matrices with at most two nonzeros in each column, as those of graphs and digraphs.

Heller and Tompkins (1956): such a matrix of 0, 1 and -1 is TU if and only if its rows can be
put on two sides such that two nonzeros of a column lie on the same side just when their signs
differ. Then it is the matrix of a star: all rows are tree arcs between a centre and a leaf,
towards the centre on one side, away from it on the other.
"""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.sparse.csgraph import connected_components

from ..certificates import Network
from ..forms.numbers import Integers


def recognise(matrix: sp.csc_array) -> Network | None:
    """Recognise a matrix with at most two nonzeros in each column.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64

    Returns
    -------
    Network or None
        On a star whose centre is node m; leaf i belongs to row i.

    Examples
    --------
    >>> recognise(sp.csc_array([[1, 1], [1, -1]])) is None
    True
    >>> recognise(sp.csc_array([[1, 1], [1, 0]])).arcs.tolist()
    [[0, 1], [0, 2]]
    """
    width = np.diff(matrix.indptr)
    if (width > 2).any() or (np.abs(matrix.data) != 1).any():
        return None
    part, fits = star(matrix)
    return part if fits.all() else None


def star(matrix: sp.csc_array) -> tuple[Network, NDArray[np.bool_]]:
    """Lay a star through the rows that fits as many blocks as possible.

    A connected block of the matrix is recognised if and only if all of its columns fit, so
    thousands of small blocks can be judged in one go.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64

    Returns
    -------
    part : Network
        On the star with centre m; the arcs of columns that do not fit mean nothing.
    fits : ndarray, shape (n,), bool
        Columns with at most two nonzeros, +-1, that agree with the sides of their rows.
    """
    m = matrix.shape[0]
    start, width = matrix.indptr[:-1], np.diff(matrix.indptr)
    rows, values = np.append(matrix.indices, m), np.append(matrix.data, 0)
    first = np.where(width > 0, start, rows.size - 1)
    second = np.where(width > 1, start + 1, rows.size - 1)
    fits = (width <= 2) & (np.abs(values[first]) <= 1) & (np.abs(values[second]) <= 1)
    pairs = np.flatnonzero(fits & (width == 2))
    one, other = rows[first[pairs]], rows[second[pairs]]
    odd = values[first[pairs]] == values[second[pairs]]
    side = _sides(m, one, other, odd)
    fits[pairs] = (side[one] != side[other]) == odd
    leaf, centre = np.arange(m), np.full(m, m)
    tree = np.where(side[:, None], np.column_stack((centre, leaf)), np.column_stack((leaf, centre)))
    # On the first side +1 lets the path start at the leaf, on the other side -1 does.
    side = np.append(side, False)
    starts = (values[first] == 1) != side[rows[first]]
    one, other = rows[first], rows[second]
    arcs = np.where(starts[:, None], np.column_stack((one, other)), np.column_stack((other, one)))
    return Network(tree.astype(np.int64), arcs.astype(np.int64)), fits


def _sides(m: int, one: Integers, other: Integers, odd: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Put rows on two sides; linked ones apart where `odd`, together elsewhere, if possible.

    In a graph with two copies of each row, the copies that go together are linked. A connected
    set of rows then falls into two halves, each the mirror image of the other, unless the rows
    cannot be put on sides.
    """
    if not odd.any():
        return np.zeros(m, np.bool_)
    to = np.where(odd, other + m, other)
    back = np.where(odd, other, other + m)
    ends = np.concatenate((one, one + m)), np.concatenate((to, back))
    links = sp.coo_array((np.ones(2 * one.size), ends), shape=(2 * m, 2 * m))
    _, half = connected_components(links.tocsr(), directed=False)
    return np.asarray(half[:m] > half[m:])

"""R10, in whatever order and with whatever signs its two matrices come.

Seymour (1980), Decomposition of regular matroids.
"""

from __future__ import annotations

from itertools import permutations

import numpy as np
import scipy.sparse as sp

from ...certificate_sums import R10, R10_MATRICES
from ...forms.numbers import Integers


def recognise(matrix: sp.csc_array) -> R10 | None:
    """Recognise one of the two matrices of R10.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64

    Examples
    --------
    >>> disguised = sp.csc_array(-R10_MATRICES[0].T)
    >>> recognise(disguised).check(disguised)
    >>> recognise(abs(disguised)) is None
    True
    """
    found = find(matrix)
    if found is None:
        return None
    known, rows, columns = found
    signs = _signs(matrix.toarray()[rows][:, columns] * known)
    return R10(rows, columns, *signs) if signs else None


def find(matrix: sp.csc_array) -> tuple[Integers, Integers, Integers] | None:
    """Find the order in which nonzeros are those of a matrix of R10; returns that matrix first."""
    if matrix.shape != (5, 5):
        return None
    support = matrix.toarray() != 0
    for known in R10_MATRICES:
        if sorted(support.sum(axis=1)) != sorted(np.abs(known).sum(axis=1)):
            continue
        for rows in map(list, permutations(range(5))):
            # With the rows in order, each column's nonzeros tell which one it is.
            places = {tuple(column): k for k, column in enumerate(support[rows].T.tolist())}
            columns = [places.get(tuple(column), -1) for column in (known != 0).T.tolist()]
            if -1 not in columns:
                return known, np.array(rows), np.array(columns)
    return None


def _signs(ratio: Integers) -> tuple[Integers, Integers] | None:
    """Signs of rows and columns whose products are these where they are not 0, if there are any.

    Where there are, more and more of the signs are known in each round, and all after a few.
    """
    row_signs, column_signs = np.array([1, 0, 0, 0, 0]), np.zeros(5, np.int64)
    for _ in range(5):
        column_signs = np.sign(row_signs @ ratio)
        row_signs = np.sign(ratio @ column_signs)
    same = np.outer(row_signs, column_signs) * np.abs(ratio) == ratio
    return (row_signs, column_signs) if same.all() else None

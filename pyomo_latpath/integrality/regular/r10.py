"""R10, in whatever order and with whatever signs its two matrices come.

Seymour (1980), Decomposition of regular matroids. The automorphisms of R10 can take every line to
every other, but few orders of five rows and columns are all that must be tried.
"""

from __future__ import annotations

from itertools import permutations

import numpy as np
import scipy.sparse as sp

from ...certificate_sums import R10, R10_MATRICES
from .splitting import Contradiction


def recognise_r10(matrix: sp.csc_array) -> R10:
    """Tell in which order and with which signs a matrix is one of those of R10.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (5, 5), int64
        Its nonzeros are those of R10.

    Raises
    ------
    Contradiction
        If the signs are others, with all lines.

    Examples
    --------
    >>> part = recognise_r10(sp.csc_array(-R10_MATRICES[1].T))
    >>> part.check(sp.csc_array(-R10_MATRICES[1].T))
    """
    table = matrix.toarray()
    for known in R10_MATRICES:
        for rows in map(list, permutations(range(5))):
            # With the rows in order, each column's nonzeros tell which one it is.
            places = {tuple(column): k for k, column in enumerate((table[rows] != 0).T.tolist())}
            columns = [places.get(tuple(column)) for column in (known != 0).T.tolist()]
            if None in columns:
                continue
            signs = _signs(table[np.ix_(rows, columns)] * known)
            if signs is not None:
                return R10(np.array(rows), np.array(columns), *signs)
    raise Contradiction(range(10))


def _signs(ratio: np.ndarray) -> tuple[np.ndarray, np.ndarray] | None:
    """Signs of rows and columns whose products are these where they are not 0."""
    row_signs, column_signs = np.zeros(5, np.int64), np.zeros(5, np.int64)
    row_signs[0] = 1
    for _ in range(5):
        column_signs = np.sign(row_signs @ ratio)
        row_signs = np.sign(ratio @ column_signs)
    same = np.outer(row_signs, column_signs) * (ratio != 0) == ratio
    return (row_signs, column_signs) if same.all() else None

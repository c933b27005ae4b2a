"""From lines that contradict each other to a smallest submatrix that is not totally unimodular.

By Camion (1965), Characterization of totally unimodular matrices, such a submatrix is square and
its determinant is 2 or -2. Lines are left out while the rest is still not totally unimodular (TU);
what a decision about the rest finds is often far smaller than the rest.
"""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp

from ...deadline import Deadline
from ...forms.numbers import Integers
from .decompose import take_apart
from .minors import rows_and_columns
from .summand import Contradiction


def smallest_conflict(
    matrix: sp.csc_array, found: Contradiction, deadline: Deadline
) -> tuple[Integers, Integers]:
    """Find rows and columns of a smallest submatrix that is not TU.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Entries 0, 1 and -1.
    found : Contradiction
        Lines of the matrix to begin with.
    deadline : Deadline

    Returns
    -------
    rows, columns : ndarray, shape (k,), int64
        Ascending.

    Raises
    ------
    OutOfTime

    Examples
    --------
    >>> matrix = sp.csc_array([[1, 1, 0, 1], [1, 0, 1, 1], [0, 1, 1, 1]])
    >>> rows, columns = smallest_conflict(matrix, Contradiction(range(7)), Deadline(None))
    >>> determinant(matrix[rows, :][:, columns].toarray()) in (2, -2)
    True
    """
    if not found.minimal:
        found = _contradiction(matrix, found.lines, deadline) or found
    needed: set[int] = set()
    while not found.minimal:
        line = next((line for line in sorted(found.lines) if line not in needed), None)
        if line is None:
            break
        smaller = _contradiction(matrix, found.lines - {line}, deadline)
        if smaller is None:
            needed.add(line)
        else:
            found = smaller
    return rows_and_columns(found.lines, matrix.shape[0])


def _contradiction(
    matrix: sp.csc_array, lines: frozenset[int], deadline: Deadline
) -> Contradiction | None:
    """What speaks against these lines being TU, if anything does."""
    rows, columns = rows_and_columns(lines, matrix.shape[0])
    try:
        take_apart(matrix[:, columns][rows, :], deadline)
    except Contradiction as found:
        places = np.concatenate((rows, matrix.shape[0] + columns))
        return Contradiction(places[list(found.lines)], found.minimal)
    return None


def determinant(table: Integers) -> int:
    """Determinant of a square matrix all of whose proper submatrices are TU.

    All pivots but the last are 1 or -1, so that elimination stays within small whole numbers.

    Examples
    --------
    >>> determinant(np.array([[0, 1, 1], [1, 0, 1], [1, 1, 0]]))
    2
    """
    table, value = table.astype(np.int8), 1
    size = len(table)
    for k in range(size - 1):
        rows = k + np.flatnonzero(table[k:, k])
        if not rows.size:
            return 0
        if rows[0] != k:
            table[[k, rows[0]]] = table[[rows[0], k]]
            value = -value
            rows = k + np.flatnonzero(table[k:, k])
        pivot = int(table[k, k])
        value *= pivot
        table[rows[1:]] -= pivot * np.outer(table[rows[1:], k], table[k])
        assert abs(pivot) == 1
        assert np.abs(table[rows[1:]]).max(initial=0) <= 2
    return value * int(table[-1, -1]) if size else 1

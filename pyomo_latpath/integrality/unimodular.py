"""Equality systems with whole vertices although their entries are not all 0, 1 and -1.

With a slack for each inequality, all rows are a system Mx = b. Take any basis B of what its rows
generate over the integers: if B has determinant +-1 and B^-1 M is TU, M is unimodular; and then
every basis is such, so one look decides (Schrijver 1986, section 19.1). If B^-1 M is TU but B^-1
is not whole, B^-1 b may still be: the vertices are whole for these sides alone.

Slacks are in every basis chosen here, which leaves one for the equations to be found. Row
operations with equations make it unit columns (`hermite`); what comes out is B^-1 M without the
slacks' columns, themselves unit columns.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from ..certificates import Part, Unimodular
from ..deadline import Deadline
from ..forms.numbers import Integers
from .hermite import diagonalise, triangulate
from .sparse_system import GivenUp, SparseSystem

#: Entries that may be changed on the way: so many, and so many times those that are there.
#: Networks in disguise take 2 to 6 times theirs; what fills up takes seconds before it is given up.
MOST_WORK = 2_000_000
MOST_TIMES = 8


def recognise(
    matrix: sp.csc_array,
    equality: NDArray[np.bool_],
    sides: Integers,
    rest: Callable[[sp.csc_array], Part | None],
    deadline: Deadline,
) -> Unimodular | None:
    """Recognise a system whose basis turns it into a TU one.

    Where `rest` decides every matrix, so does this: the answer is None if and only if B^-1 M is
    not TU, or B^-1 b not whole, for some and so for every B. It is also None where time, work
    (`MOST_WORK`, `MOST_TIMES`) or the size of numbers (62 bits for a factor) ran out. Systems
    without equations are left to others: there, M is unimodular if and only if `matrix` is TU.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Canonical: sorted indices, no stored zeros.
    equality : ndarray, shape (m,), bool
        Rows without a slack.
    sides : ndarray, shape (m,), int64
        Sides of the equality rows; anything elsewhere.
    rest : callable
        Proves a matrix TU, or returns None.
    deadline : Deadline

    Returns
    -------
    Unimodular or None

    Examples
    --------
    >>> from pyomo_latpath.integrality import reductions
    >>> system = sp.csc_array([[2, 3], [1, 1]])
    >>> part = recognise(system, np.full(2, True), np.array([5, 2]), reductions.recognise,
    ...                  Deadline(None))
    >>> part.operations.tolist(), part.needs_sides
    ([[0, 1, -2], [1, 0, -1]], False)
    """
    if not equality.any():
        return None
    work = MOST_WORK + MOST_TIMES * matrix.nnz
    system = SparseSystem(matrix, sides, np.flatnonzero(equality), work, deadline)
    try:
        if not diagonalise(system, triangulate(system)):
            return None
    except GivenUp:
        return None
    part = rest(system.matrix())
    if part is None:
        return None
    return Unimodular(np.array(system.operations, dtype=np.int64).reshape(-1, 3), part)

"""Equality systems with whole vertices although their entries are not all 0, 1 and -1.

With a slack for each inequality, all rows are a system Mx = b. Take any basis B of M: if its
determinant is +-1 and B^-1 M is TU, M is unimodular; and then every basis is such, so one look
decides (Schrijver 1986, section 19.1). If B^-1 M is TU but B^-1 is not whole, B^-1 b may still
be: the vertices are whole for these sides alone.

B^-1 M is found by Gauss-Jordan elimination in whole numbers, on a dense table: systems of a few
hundred rows. Rows that depend on others are dropped such that the rest generates them over the
integers, where single steps find how: of x + y, x - y and x one of the first two, never x.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from ..certificates import Part, Unimodular
from ..deadline import Deadline
from ..forms.numbers import Integers

#: Limits on rows, on table entries times rows, and on the size of entries.
MOST_ROWS = 400
MOST_WORK = 400_000_000
LARGEST = 2**30


def recognise(
    matrix: sp.csc_array,
    equality: NDArray[np.bool_],
    sides: Integers,
    rest: Callable[[sp.csc_array], Part | None],
    deadline: Deadline,
) -> Unimodular | None:
    """Recognise a system whose basis turns it into a TU one.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
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
        None as well where the table would be too large.

    Examples
    --------
    >>> from pyomo_latpath.integrality import reductions
    >>> system = sp.csc_array([[2, 3], [1, 1]])
    >>> part = recognise(system, np.full(2, True), np.array([5, 2]), reductions.recognise,
    ...                  Deadline(None))
    >>> part.inverse, part.denominator
    (((-1, 3), (1, -2)), 1)
    """
    m, n = matrix.shape
    slacks = np.flatnonzero(~equality)
    width = n + slacks.size
    if m > MOST_ROWS or m * m * (width + m) > MOST_WORK or not equality.any():
        return None
    table = np.zeros((m, width + m), np.int64)
    table[:, :n] = matrix.toarray()
    table[slacks, n + np.arange(slacks.size)] = 1
    table[:, width:] = np.eye(m, dtype=np.int64)
    basic = np.full(m, -1)
    basic[slacks] = n + np.arange(slacks.size)
    if not _eliminate(table, basic, np.arange(n), deadline):
        return None
    independent = np.flatnonzero(basic >= 0)
    basis = basic[independent]
    pivots = table[independent, basis][:, None]
    reduced = table[independent, :width]
    if (reduced % pivots).any() or (np.abs(reduced) > np.abs(pivots)).any():
        return None
    part = rest(sp.csc_array(reduced // pivots))
    # What is left of dependent rows says how they depend: each drops one of the rows involved.
    dropped = basic.copy()
    if part is None or not _eliminate(table, dropped, width + np.flatnonzero(equality), deadline):
        return None
    kept = np.setdiff1d(np.arange(m), dropped[basic < 0] - width)
    pivots = table[independent, basis].astype(object)
    inverse = table[np.ix_(independent, width + kept)].astype(object)
    denominator = math.lcm(
        *(p // math.gcd(p, *row) for p, row in zip(pivots.tolist(), inverse.tolist(), strict=True))
    )
    inverse = inverse * denominator // pivots[:, None]
    b = np.where(equality, sides, 0)[kept].astype(object)
    if denominator > 1 and ((inverse @ b) % denominator).any():
        return None
    whole = tuple(tuple(row) for row in inverse.tolist())
    return Unimodular(kept, slacks, basis, whole, denominator, part)


def _eliminate(
    table: NDArray[np.int64], basic: Integers, columns: Integers, deadline: Deadline
) -> bool:
    """Make one of the columns basic in each row where none is (basic < 0), where that can be.

    Rows stay multiples of what exact elimination would give. False if numbers grow too large
    or time runs out.
    """
    for row in np.flatnonzero(basic < 0):
        entries = np.abs(table[row, columns])
        if not entries.any():
            continue
        column = int(columns[np.argmin(np.where(entries > 0, entries, LARGEST))])
        pivot = table[row, column]
        others = np.flatnonzero(table[:, column])
        others = others[others != row]
        changed = pivot * table[others] - table[others, column][:, None] * table[row]
        if abs(pivot) > 1 and others.size:
            changed //= np.maximum(np.gcd.reduce(changed, axis=1), 1)[:, None]
        if deadline.passed or np.abs(changed).max(initial=0) > LARGEST:
            return False
        table[others] = changed
        basic[row] = column
    return True

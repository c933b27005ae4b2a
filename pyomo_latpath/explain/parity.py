"""Equations that no whole numbers satisfy, because of their parity.

If the sum of some equations has even coefficients and an odd side, no whole numbers satisfy them
(Schrijver 1986, corollary 4.1a: with y = 1/2 at these rows, yA is whole and yb is not).
"""

from __future__ import annotations

import numpy as np

from ..forms.normalise import NormalForm
from ..forms.numbers import EXACT, Integers

#: Systems with more equations, or with more entries on the way, are not looked at.
MOST_ROWS, MOST_WORK = 20_000, 5_000_000


def parity_conflict(normal: NormalForm) -> Integers | None:
    """Find equations of integer columns that contradict each other modulo 2.

    Parameters
    ----------
    normal : NormalForm

    Returns
    -------
    ndarray, int64, or None
        Indices into the normalised form; no proper subset of these rows contradicts itself like
        that. None as well where the elimination grew too large.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> triangle = LinearForm.from_arrays([[1, 1, 0], [0, 1, 1], [1, 0, 1]], row_lower=1,
    ...                                   row_upper=1, col_lower=0, col_upper=1, cost=0)
    >>> parity_conflict(normalise(triangle))
    array([0, 1, 2])
    """
    mixed = np.zeros(normal.rows.size, np.bool_)
    of_continuous = ~np.repeat(normal.integer, np.diff(normal.matrix.indptr))
    mixed[normal.matrix.indices[of_continuous]] = True
    usable = (normal.row_lower == normal.row_upper) & normal.whole_rows & ~mixed
    usable &= normal.whole_sides & (np.abs(normal.row_upper) < EXACT)
    rows = np.flatnonzero(usable)
    if not rows.size or rows.size > MOST_ROWS:
        return None
    by_row = normal.matrix.tocsr()
    odd = by_row.data % 2 != 0
    pivots: dict[int, tuple[set[int], set[int], int]] = {}
    work = 0
    for i in rows.tolist():
        here = slice(by_row.indptr[i], by_row.indptr[i + 1])
        left = set(by_row.indices[here][odd[here]].tolist())
        summed, side = {i}, int(normal.row_upper[i]) % 2
        while left and (met := next((j for j in left if j in pivots), None)) is not None:
            others, those, other_side = pivots[met]
            left, summed, side = left ^ others, summed ^ those, side ^ other_side
            work += len(others)
            if work > MOST_WORK:
                return None
        if left:
            pivots[min(left)] = left, summed, side
        elif side:
            return np.array(sorted(summed), np.int64)
    return None

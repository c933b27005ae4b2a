"""Rows that contradict each other within the bounds, in exact arithmetic.

Farkas' lemma (Schrijver 1986, section 7.3): no x satisfies the rows if, for some multipliers y,
the largest y A x over the bounds lies below what the sides of the rows ask of it.
"""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np

from ..forms.linear_form import Floats
from ..forms.normalise import NormalForm
from ..forms.numbers import Integers, nearby_fraction, simplest_fraction
from ..proof import prove_infeasible

#: Multipliers below this share of the largest one count as 0; the others are read this closely.
READING = 1e-9


def conflicting_rows(piece: NormalForm, farkas: Floats | None) -> Integers | None:
    """Return the rows with multipliers that prove a block infeasible, if they do.

    Parameters
    ----------
    piece : NormalForm
        A block.
    farkas : ndarray, shape (m,), float64, or None
        Multipliers as a solver gives them, up to sign.

    Returns
    -------
    ndarray, int64, or None
        Local indices.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 1], [1, 1]], row_lower=[0, 3], row_upper=[2, 9],
    ...                               col_lower=0, col_upper=9, cost=0)
    >>> conflicting_rows(normalise(form), np.array([1.0, -1.0]))
    array([0, 1])
    """
    if farkas is None or not np.isfinite(farkas).all() or not farkas.any():
        return None
    scaled = farkas / np.abs(farkas).max()
    rows = np.flatnonzero(np.abs(scaled) > READING)
    if piece.whole_rows.all():
        return rows if prove_infeasible(piece, farkas) else None
    multipliers = [nearby_fraction(value, READING) for value in scaled[rows].tolist()]
    for sign in (1, -1):
        if _contradict(piece, rows, [sign * y for y in multipliers]):
            return rows
    return None


def _contradict(piece: NormalForm, rows: Integers, multipliers: list[Fraction]) -> bool:
    """Whether no point within the bounds gives as much as the sides ask, in fractions."""
    by_row = piece.matrix.tocsr()
    asked, total = Fraction(0), dict[int, Fraction]()
    for i, y in zip(rows.tolist(), multipliers, strict=True):
        side = piece.row_lower[i] if y > 0 else piece.row_upper[i]
        if not math.isfinite(side):
            return False
        asked += y * simplest_fraction(float(side))
        here = slice(by_row.indptr[i], by_row.indptr[i + 1])
        for j, a in zip(by_row.indices[here].tolist(), by_row.data[here].tolist(), strict=True):
            total[j] = total.get(j, Fraction(0)) + y * simplest_fraction(a)
    given = Fraction(0)
    for j, a in total.items():
        if a:
            bound = piece.col_upper[j] if a > 0 else piece.col_lower[j]
            if not math.isfinite(bound):
                return False
            given += a * simplest_fraction(float(bound))
    return given < asked

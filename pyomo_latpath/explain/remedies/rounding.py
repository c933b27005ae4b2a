"""Sides and bounds rounded inwards, as normalisation does it, written back into the model's units.

At whole plans a row of integer columns takes only multiples of a unit: the reciprocal of the
factor that makes its coefficients coprime whole numbers. A side between two of them says no more
than the inner one.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ...forms.linear_form import Floats
from ...forms.normalise import NormalForm
from ...forms.numbers import SNAP, Integers


@dataclass(frozen=True, eq=False)
class Rounded:
    """Rows and columns of a form whose sides and bounds were rounded inwards.

    Attributes
    ----------
    rows : ndarray, shape (p,), int64
    row_lower, row_upper : ndarray, shape (p,), float64
        The new sides, in the form's units.
    units : ndarray, shape (p,), float64
        What the row's value is a multiple of at whole plans, up to its fixed columns.
    columns : ndarray, shape (q,), int64
    col_lower, col_upper : ndarray, shape (q,), float64
    """

    rows: Integers
    row_lower: Floats
    row_upper: Floats
    units: Floats
    columns: Integers
    col_lower: Floats
    col_upper: Floats


def rounded_inwards(normal: NormalForm) -> Rounded:
    """Find the rows and columns whose limits normalisation has rounded inwards.

    Parameters
    ----------
    normal : NormalForm
        Without a conflict.

    Returns
    -------
    Rounded

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[0.5, 0.5]], row_lower=-np.inf, row_upper=0.75,
    ...                               col_lower=0, col_upper=[1, 2.5], cost=0)
    >>> found = rounded_inwards(normalise(form))
    >>> found.row_upper.tolist(), found.columns.tolist(), found.col_upper.tolist()
    ([0.5], [1], [2.0])
    """
    form = normal.form
    shift = (form.matrix @ normal.fixed_value)[normal.rows]
    low, high = (
        side * normal.row_den / normal.row_num + shift
        for side in (normal.row_lower, normal.row_upper)
    )
    declared = form.row_lower[normal.rows], form.row_upper[normal.rows]
    moved = _inside(declared[0], low) | _inside(high, declared[1])
    rows = normal.rows[moved]
    col_lower, col_upper = form.col_lower.copy(), form.col_upper.copy()
    whole = normal.columns[normal.integer]
    col_lower[whole] = normal.col_lower[normal.integer]
    col_upper[whole] = normal.col_upper[normal.integer]
    fixed = np.setdiff1d(np.flatnonzero(form.integer), whole)
    col_lower[fixed] = col_upper[fixed] = normal.fixed_value[fixed]
    shrunk = _inside(form.col_lower, col_lower) | _inside(col_upper, form.col_upper)
    columns = np.flatnonzero(shrunk)
    row_upper = np.where(_inside(high, declared[1]), high, declared[1])
    row_lower = np.where(_inside(declared[0], low), low, declared[0])
    return Rounded(
        rows=rows,
        row_lower=np.minimum(row_lower, row_upper)[moved],  # noise does not cross them
        row_upper=row_upper[moved],
        units=(normal.row_den / normal.row_num)[moved],
        columns=columns,
        col_lower=col_lower[columns],
        col_upper=col_upper[columns],
    )


def _inside(lower: Floats, upper: Floats) -> np.ndarray:
    """Where one value lies below another by more than noise."""
    with np.errstate(invalid="ignore"):
        return np.asarray(upper - lower > 2 * SNAP * np.maximum(1.0, np.abs(upper)))

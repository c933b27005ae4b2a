"""The box around a polytope: how far each column can move, which bounds every walk."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..forms.normalise import NormalForm

Floats = NDArray[np.float64]

#: Rounds of implied bounds; what three do not bound is hardly ever bounded by more.
ROUNDS = 3


@dataclass(frozen=True, eq=False)
class Box:
    """Sizes that the step bounds speak of.

    Attributes
    ----------
    dimension : int
        n: columns that can move.
    side : int
        k: the longest side.
    total : int or None
        W: sum of the side lengths; None where some column has no known limit.
    max_entry : int
        alpha: largest |entry| of the rows, at least 1.
    lower, upper : ndarray, shape (n,), float64
        Its corners.
    """

    dimension: int
    side: int
    total: int | None
    max_entry: int
    lower: Floats
    upper: Floats


def box_of(normal: NormalForm) -> Box:
    """Measure the box of a block with whole bounds.

    Columns without a bound of their own get the one that the rows imply, if there is one.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> box = box_of(normalise(LinearForm.from_arrays(
    ...     [[1, 1]], row_lower=-np.inf, row_upper=4, col_lower=0, col_upper=np.inf, cost=1)))
    >>> box.dimension, box.side, box.total
    (2, 4, 8)
    """
    low, high = normal.col_lower, normal.col_upper
    for _ in range(ROUNDS):
        if np.isfinite(low).all() and np.isfinite(high).all():
            break
        low, high = _implied(normal, low, high)
    sides = np.floor(high) - np.ceil(low)
    alpha = int(max(1.0, np.abs(normal.matrix.data).max(initial=1.0)))
    movable = sides > 0
    if not np.isfinite(sides).all():
        return Box(int(movable.sum()), 0, None, alpha, low, high)
    side = int(sides.max(initial=0.0))
    total = int(np.maximum(sides, 0).sum())
    return Box(int(movable.sum()), max(side, 0), total, alpha, low, high)


def _implied(normal: NormalForm, low: Floats, high: Floats) -> tuple[Floats, Floats]:
    """Bounds that single rows imply: a x_j <= U - (least activity of the other columns)."""
    matrix = normal.matrix
    m, n = matrix.shape
    row = matrix.indices
    column = np.repeat(np.arange(n), np.diff(matrix.indptr))
    entry = matrix.data
    least = entry * np.where(entry > 0, low[column], high[column])
    most = entry * np.where(entry > 0, high[column], low[column])
    above = (normal.row_upper[row] - _of_the_others(least, row, m)) / entry
    below = (normal.row_lower[row] - _of_the_others(most, row, m)) / entry
    new_low, new_high = low.copy(), high.copy()
    with np.errstate(invalid="ignore"):
        np.fmin.at(new_high, column, np.where(entry > 0, above, below))
        np.fmax.at(new_low, column, np.where(entry > 0, below, above))
    return np.maximum(low, np.ceil(new_low - 1e-9)), np.minimum(high, np.floor(new_high + 1e-9))


def _of_the_others(terms: Floats, row: NDArray[np.int32], m: int) -> Floats:
    """For each entry the sum of its row's terms without its own; NaN where that is infinite."""
    endless = np.isinf(terms)
    finite = np.where(endless, 0.0, terms)
    total = np.bincount(row, weights=finite, minlength=m)[row]
    count = np.bincount(row, weights=endless, minlength=m)[row]
    return np.where(count - endless > 0, np.nan, total - finite)

"""A plan held against its model: what it misses, and whether it may serve as a start."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from .linear_form import Floats, LinearForm

#: What a plan from floating-point numbers may miss a row or bound by, whatever their size.
TOLERANCE = 1e-6


def rounding_room(magnitude: Floats, relative: float) -> Floats:
    """How much a row's value may be off for want of digits.

    A share of the numbers added up, but never more than `TOLERANCE` beyond what the sum itself
    loses: a budget of 10**10 that is overrun by 3 is overrun.

    Parameters
    ----------
    magnitude : ndarray, float64
        Sum of the sizes of what a row adds up.
    relative : float

    Examples
    --------
    >>> rounding_room(np.array([1.0, 1e10]), 1e-9) < 1e-4
    array([ True,  True])
    """
    share = relative * np.maximum(1.0, magnitude)
    return np.minimum(share, TOLERANCE) + 8 * np.finfo(np.float64).eps * magnitude


def largest_violation(form: LinearForm, x: Floats) -> float:
    """Largest amount by which a plan misses a row, a bound or a declaration of the model.

    Parameters
    ----------
    form : LinearForm
    x : ndarray, shape (n,), float64

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=0, integer=False)
    >>> largest_violation(form, np.array([0.75, 0.5]))
    0.25
    """
    activity = form.matrix @ x
    below, above = form.col_lower - x, x - form.col_upper
    if form.semicontinuous.any():
        off = form.semicontinuous & (x == 0.0)
        below, above = np.where(off, 0.0, below), np.where(off, 0.0, above)
    fraction = np.where(form.integer, np.abs(x - np.rint(x)), 0.0)
    missed = [form.row_lower - activity, activity - form.row_upper, below, above, fraction]
    return max(0.0, *(float(values.max(initial=0.0)) for values in missed))


def feasible_start(form: LinearForm, start: ArrayLike) -> Floats:
    """Check that a start is a whole feasible plan.

    Raises
    ------
    ValueError
        Names the first column or row that is missed, and by how much.
    """
    x = np.asarray(start, dtype=np.float64)
    if x.shape != (form.shape[1],):
        raise ValueError(f"the start has shape {x.shape}; it needs {form.shape[1]} values")
    bad = ~np.isfinite(x)
    bad |= form.integer & (np.abs(x - np.rint(x)) > 1e-6)
    if bad.any():
        j = int(np.argmax(bad))
        raise ValueError(
            f"the start has the value {x[j]:g} at column {form.col_names[j]!r}, "
            "which must be a whole number"
        )
    x = np.where(form.integer, np.rint(x), x)
    size = np.abs(x)
    for kind, names, value, magnitude, low, high in (
        ("column", form.col_names, x, size, form.col_lower, form.col_upper),
        (
            "row",
            form.row_names,
            form.matrix @ x,
            abs(form.matrix) @ size,
            form.row_lower,
            form.row_upper,
        ),
    ):
        slack = rounding_room(magnitude, TOLERANCE)
        missed = (value < low - slack) | (value > high + slack)
        if kind == "column":
            missed &= ~(form.semicontinuous & (value == 0))
        if missed.any():
            i = int(np.argmax(missed))
            raise ValueError(
                f"the start is not feasible: {kind} {names[i]!r} is at {value[i]:g}, outside "
                f"[{low[i]:g}, {high[i]:g}]"
            )
    return x

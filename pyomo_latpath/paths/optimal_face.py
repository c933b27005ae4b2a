"""The search for a whole vertex on the face of all optima of a relaxation.

Where the relaxation's optimum is fractional, another optimum may be whole: columns with a
reduced cost and rows with a price stay where they are, other objectives choose among what is
left. A whole vertex found there is as good as any plan can be.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..highs import LinearProgram, LpResult

Floats = NDArray[np.float64]

#: How near to a whole number HiGHS's whole values come.
NEAR = 1e-6
#: Prices above this share of the largest cost hold their row or column.
PRICED = 1e-7
#: Objectives tried at most.
MOST_TRIES = 24


def is_whole(x: Floats, integer: NDArray[np.bool_]) -> bool:
    """Whether all integer columns are within HiGHS's tolerance of whole numbers."""
    values = x[integer]
    return bool((np.abs(values - np.rint(values)) <= NEAR).all())


def whole_optimum(
    normal: NormalForm, lp: LinearProgram, optimum: LpResult, seed: int, deadline: Deadline
) -> Floats | None:
    """Look for an optimal vertex that is whole.

    Two kinds of objective take turns: one that pulls each fractional column to its nearer
    whole value, and random ones.

    Parameters
    ----------
    normal : NormalForm
        A block.
    lp : LinearProgram
        Of the block, with the basis of `optimum`; its limits and costs are changed.
    optimum : LpResult
        Fractional.
    seed : int
    deadline : Deadline

    Returns
    -------
    ndarray, shape (n,), float64, or None
        Integer columns hold exact whole numbers.
    """
    rng = np.random.default_rng(seed)
    size = max(1.0, float(np.abs(normal.cost).max(initial=0.0)))
    columns = np.abs(optimum.reduced_cost) > PRICED * size
    rows = np.abs(optimum.row_dual) > PRICED * size
    if _is_the_only_one(normal, lp, rows, columns):
        return None
    activity = normal.matrix @ optimum.x
    lp.set_col_bounds(
        np.where(columns & (optimum.reduced_cost < 0), normal.col_upper, normal.col_lower),
        np.where(columns & (optimum.reduced_cost > 0), normal.col_lower, normal.col_upper),
    )
    lp.set_row_bounds(
        np.where(rows, np.minimum(activity, normal.row_upper), normal.row_lower),
        np.where(rows, np.maximum(activity, normal.row_lower), normal.row_upper),
    )
    x = optimum.x
    for attempt in range(MOST_TRIES):
        if deadline.passed:
            return None
        part = x - np.floor(x)
        pulled = normal.integer & (part > NEAR) & (part < 1 - NEAR)
        cost = np.where(pulled, np.where(part < 0.5, 1.0, -1.0), 0.0)
        if attempt % 2:
            cost = rng.standard_normal(x.size) * normal.integer
        elif attempt:
            cost += 0.1 * rng.standard_normal(x.size) * normal.integer
        lp.set_cost(cost)
        result = lp.solve(method="primal", deadline=deadline)
        if result.status == "optimal":
            x = result.x
            if is_whole(x, normal.integer):
                return np.where(normal.integer, np.rint(x), x)
    return None


def _is_the_only_one(
    normal: NormalForm,
    lp: LinearProgram,
    rows: NDArray[np.bool_],
    columns: NDArray[np.bool_],
) -> bool:
    """Whether every nonbasic column and row that could move has a price: then none may."""
    basis = lp.basis()
    free_columns = (basis.col_status != 1) & (normal.col_lower < normal.col_upper)
    free_rows = (basis.row_status != 1) & (normal.row_lower < normal.row_upper)
    return not ((free_columns & ~columns).any() or (free_rows & ~rows).any())

"""The search for a whole vertex on the face of all optima of a relaxation.

Where the relaxation's optimum is fractional, another optimum may be whole: columns with a
reduced cost and rows with a price stay where they are, other objectives choose among what is
left. A whole vertex found there is as good as any plan can be.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..highs import LinearProgram, LpResult
from ..proof import whole_costs

Floats = NDArray[np.float64]

#: How near to a whole number HiGHS's whole values come.
NEAR = 1e-6
#: Prices above this share of the largest cost hold their row or column.
PRICED = 1e-7
#: Objectives tried before the dive, and columns it rounds at most.
MOST_TRIES, MOST_DIVES = 4, 200


def is_whole(x: Floats, integer: NDArray[np.bool_]) -> bool:
    """Whether all integer columns are within HiGHS's tolerance of whole numbers."""
    values = x[integer]
    return bool((np.abs(values - np.rint(values)) <= NEAR).all())


def attainable(normal: NormalForm, value: float) -> bool | None:
    """Whether whole plans can have this objective at all.

    Costs of integer columns alone have a common unit; a value between its multiples is out of
    reach.

    Returns
    -------
    bool or None
        None where a continuous column has a cost.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> normal = normalise(LinearForm.from_arrays([[1, 1]], row_lower=0, row_upper=1, col_lower=0,
    ...                                           col_upper=1, cost=[2, 4]))
    >>> attainable(normal, 6.0), attainable(normal, 5.0)
    (True, False)
    """
    costs = whole_costs(normal)
    if (~normal.integer & (costs.numerators != 0)).any():
        return None
    unit = math.gcd(*np.unique(costs.numerators).tolist()) / costs.denominator
    if unit == 0.0:
        return True
    multiple = value / unit
    return abs(multiple - round(multiple)) <= NEAR * max(1.0, abs(multiple))


def whole_optimum(
    normal: NormalForm,
    lp: LinearProgram,
    optimum: LpResult,
    seed: int,
    most_pivots: int,
    deadline: Deadline,
) -> Floats | None:
    """Look for an optimal vertex that is whole.

    A few objectives are tried in turn: one that pulls each fractional column to its nearer
    whole value, and random ones. Then a dive rounds one fractional column after the other, the
    one nearest to its upper whole value first, and lets the others follow.

    Parameters
    ----------
    normal : NormalForm
        A block.
    lp : LinearProgram
        Of the block, with the basis of `optimum`; its limits and costs are changed.
    optimum : LpResult
        Fractional.
    seed : int
    most_pivots : int
        The effort, counted so that the outcome does not depend on the machine's speed.
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
    low = np.where(columns & (optimum.reduced_cost < 0), normal.col_upper, normal.col_lower)
    high = np.where(columns & (optimum.reduced_cost > 0), normal.col_lower, normal.col_upper)
    lp.set_col_bounds(low, high)
    lp.set_row_bounds(
        np.where(rows, np.minimum(activity, normal.row_upper), normal.row_lower),
        np.where(rows, np.maximum(activity, normal.row_lower), normal.row_upper),
    )
    x = optimum.x
    for attempt in range(MOST_TRIES):
        cost = _pull(x, normal.integer)
        if attempt % 2:
            cost = rng.standard_normal(x.size) * normal.integer
        elif attempt:
            cost += 0.1 * rng.standard_normal(x.size) * normal.integer
        lp.set_cost(cost)
        result = lp.solve(method="primal", deadline=deadline, max_pivots=most_pivots)
        most_pivots -= result.pivots
        if result.status != "optimal" or most_pivots <= 0:
            return None
        x = result.x
        if is_whole(x, normal.integer):
            return np.where(normal.integer, np.rint(x), x)
    return _dive(normal, lp, x, (low.copy(), high.copy()), most_pivots, deadline)


def _pull(x: Floats, integer: NDArray[np.bool_]) -> Floats:
    """Costs that pull each fractional column to its nearer whole value."""
    part = x - np.floor(x)
    pulled = integer & (part > NEAR) & (part < 1 - NEAR)
    return np.where(pulled, np.where(part < 0.5, 1.0, -1.0), 0.0)


def _dive(
    normal: NormalForm,
    lp: LinearProgram,
    x: Floats,
    bounds: tuple[Floats, Floats],
    most_pivots: int,
    deadline: Deadline,
) -> Floats | None:
    """Round one fractional column after the other, up if that goes, else down."""
    low, high = bounds
    for _ in range(MOST_DIVES):
        part = np.where(normal.integer, x - np.floor(x), 0.0)
        part[(part <= NEAR) | (part >= 1 - NEAR)] = 0.0
        j = int(np.argmax(part))
        if part[j] == 0.0:
            return np.where(normal.integer, np.rint(x), x)
        up = np.ceil(x[j])
        for rounded in ((up, high[j]), (low[j], up - 1)):
            if rounded[0] > rounded[1] or most_pivots <= 0:
                continue
            low[j], high[j], kept = *rounded, (low[j], high[j])
            lp.set_col_bounds(low, high)
            result = lp.solve(deadline=deadline, max_pivots=most_pivots)
            most_pivots -= result.pivots
            if result.status == "optimal":
                x = result.x
                break
            low[j], high[j] = kept
        else:
            return None
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

"""The branch-and-bound route of one part: plan, bound, and prices on request."""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from .answers import PartAnswer, without_plan
from .deadline import Deadline
from .forms.linear_form import Floats
from .forms.normalise import NormalForm
from .highs import LinearProgram, LpResult
from .highs_mip import MipSettings, branch_and_bound
from .integrality.finding import BlockFinding
from .proof import prove_optimal, whole_costs


def branch_part(
    part: NormalForm,
    findings: tuple[BlockFinding, ...],
    settings: MipSettings,
    deadline: Deadline,
    *,
    relaxation: LpResult | None = None,
    start: Floats | None = None,
    fixed_plan_prices: bool = False,
) -> PartAnswer:
    """Solve a part by HiGHS's branch and bound.

    Parameters
    ----------
    part : NormalForm
    findings : tuple of BlockFinding
        Passed on.
    settings : MipSettings
    deadline : Deadline
    relaxation : LpResult, optional
        Of the part; its prices may prove the plan optimal, its objective bounds the plan's.
    start : ndarray, shape (n,), optional
        A plan to begin with, in the form's units.
    fixed_plan_prices : bool
        Price the linear program that is left when integer columns are held at the plan.

    Returns
    -------
    PartAnswer
        Whole numbers are rounded where every row still holds, continuous columns optimised
        beside them.
    """
    result = branch_and_bound(*_as_given(part), kinds_of(part), settings, deadline, start)
    status = "limit" if result.status == "pivot_limit" else result.status
    if result.x is None or status == "unbounded":
        return without_plan(part, status, "highs", findings)
    x = _rounded(part, result.x * part.col_den / part.col_num)
    held = None if part.integer.all() else _held_plan(part, x, deadline)
    if held is not None:
        x = np.where(part.integer, x, held.x)
    elif fixed_plan_prices:
        held = _held_plan(part, x, deadline)
    bound = result.bound
    if relaxation is not None:
        bound = max(bound, relaxation.objective)
    exact = relaxation is not None and _relaxation_proves(part, x, relaxation)
    m, n = part.matrix.shape
    continuous = not kinds_of(part).any()
    priced = held if fixed_plan_prices or continuous else None
    return PartAnswer(
        normal=part,
        status=status,
        route="highs",
        findings=findings,
        x=x,
        bound=bound,
        exact=exact,
        row_dual=np.full(m, np.nan) if priced is None else priced.row_dual,
        reduced_cost=np.full(n, np.nan) if priced is None else priced.reduced_cost,
        prices="none" if priced is None else "true" if continuous else "fixed plan",
    )


def _as_given(part: NormalForm) -> tuple[sp.csc_array, Floats, Floats, Floats, Floats, Floats]:
    """Matrix, sides, bounds and cost of a part in the form's units, without the scaling.

    HiGHS scales for itself, and a user who compares meets the same search tree.
    """
    form = part.form
    shift = (form.matrix @ part.fixed_value)[part.rows]
    sign = 1.0 if form.sense == "min" else -1.0
    return (
        form.matrix[:, part.columns][part.rows, :],
        form.row_lower[part.rows] - shift,
        form.row_upper[part.rows] - shift,
        form.col_lower[part.columns],
        form.col_upper[part.columns],
        sign * form.cost[part.columns],
    )


def kinds_of(part: NormalForm) -> NDArray[np.int32]:
    """HiGHS's codes: 0 continuous, 1 integer, 2 semicontinuous, 3 semi-integer."""
    semicontinuous = part.form.semicontinuous[part.columns]
    return (part.integer + 2 * semicontinuous).astype(np.int32)


def _rounded(part: NormalForm, x: Floats) -> Floats:
    """Round whole columns where every row still holds."""
    near = np.where(part.integer, np.rint(x), x)
    activity = part.matrix @ near
    slack = 1e-9 * np.maximum(1.0, np.abs(activity))
    holds = (activity >= part.row_lower - slack) & (activity <= part.row_upper + slack)
    if holds.all():
        return near
    worse = np.maximum(part.row_lower - activity, activity - part.row_upper).max(initial=0.0)
    before = part.matrix @ x
    was = np.maximum(part.row_lower - before, before - part.row_upper).max(initial=0.0)
    return near if worse <= max(was, 1e-9) else x


def _relaxation_proves(part: NormalForm, x: Floats, relaxation: LpResult) -> bool:
    """Whether the prices of the relaxation alone prove the plan optimal."""
    value = float(part.cost @ x)
    if value > relaxation.objective + max(1.0, abs(value)):
        return False
    return prove_optimal(part, whole_costs(part), x, relaxation.row_dual).exact


def _held_plan(part: NormalForm, x: Floats, deadline: Deadline) -> LpResult | None:
    """Optimise what is left when integer columns are held at the plan, on a copy.

    Branch and bound leaves continuous columns within its tolerance of their best values; a
    vertex is sharper, and has prices: those of the fixed plan.
    """
    held = kinds_of(part) > 0
    lp = LinearProgram(
        part.matrix,
        part.row_lower,
        part.row_upper,
        np.where(held, x, part.col_lower),
        np.where(held, x, part.col_upper),
        part.cost,
    )
    result = lp.solve(deadline=deadline)
    return result if result.status == "optimal" else None

"""The branch-and-bound route of one part: plan, bound, and prices on request."""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from .answers import PartAnswer, without_plan
from .deadline import Deadline
from .forms.linear_form import Flags, Floats
from .forms.normalise import NormalForm
from .forms.plan import rounding_room
from .highs import LinearProgram, LpResult
from .highs_mip import MipResult, MipSettings, branch_and_bound
from .integrality.finding import BlockFinding
from .paths.optimal_face import is_whole
from .proof import prove_optimal, whole_costs

#: Share of the time that branch and bound may take where an LP must make its plan whole.
BRANCH_SHARE = 0.9


def branch_part(
    part: NormalForm,
    findings: tuple[BlockFinding, ...],
    settings: MipSettings,
    deadline: Deadline,
    *,
    relaxation: LpResult | None = None,
    start: Floats | None = None,
    fixed_plan_prices: bool = False,
    implied: Flags | None = None,
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
    implied : ndarray, shape (n,), bool, optional
        Integer columns that branch and bound may leave continuous: whole at each vertex of what
        is left when the others are held at whole numbers.

    Returns
    -------
    PartAnswer
        Whole numbers are rounded where every row still holds, continuous columns optimised
        beside them.
    """
    declared = kinds_of(part) > 0
    told = declared if implied is None else declared & ~implied
    result, x, held = _search(part, told, settings, deadline, start)
    if implied is not None and x is not None:
        if held is not None and is_whole(x, implied):
            x = np.where(implied, np.rint(x), x)
        elif result.status == "interrupted":
            x = None
        else:  # the solver's tolerances were in the way
            told = declared
            result, x, held = _search(part, told, settings, deadline, start)
    if x is None:
        return without_plan(part, result.status, "highs", findings, told=int(told.sum()))
    if fixed_plan_prices and (held is None or implied is not None):
        held = _held_plan(part, x, declared, deadline)
    bound = result.bound if relaxation is None else max(result.bound, relaxation.objective)
    exact = relaxation is not None and _relaxation_proves(part, x, relaxation)
    m, n = part.matrix.shape
    continuous = not declared.any()
    priced = held if fixed_plan_prices or continuous else None
    return PartAnswer(
        normal=part,
        status=result.status,
        route="highs",
        findings=findings,
        x=x,
        bound=bound,
        exact=exact,
        row_dual=np.full(m, np.nan) if priced is None else priced.row_dual,
        reduced_cost=np.full(n, np.nan) if priced is None else priced.reduced_cost,
        prices="none" if priced is None else "true" if continuous else "fixed plan",
        told=int(told.sum()),
    )


def _search(
    part: NormalForm, told: Flags, settings: MipSettings, deadline: Deadline, start: Floats | None
) -> tuple[MipResult, Floats | None, LpResult | None]:
    """Branch on the columns `told` of, and optimise the others beside them.

    Returns what branch and bound says, the plan in scaled units, and the linear program that made
    it, where there is one.
    """
    kinds = kinds_of(part)
    spared = bool((kinds[~told] > 0).any())
    limit = deadline.within(BRANCH_SHARE * deadline.left) if spared else deadline
    given = _as_given(part, rounded=spared)
    result = branch_and_bound(*given, np.where(told, kinds, 0), settings, limit, start)
    if result.x is None or result.status == "unbounded":
        return result, None, None
    plan = result.x * part.col_den / part.col_num
    x = _rounded(part, plan, told)
    if told.all():
        return result, x, None
    # What is left may make room for whole numbers where the plan as it stands does not.
    near = np.where(told & part.integer, np.rint(plan), plan)
    for fixed in (near, x):
        held = _held_plan(part, fixed, told, deadline)
        if held is not None:
            return result, np.where(told, fixed, held.x), held
    return result, x, None


def _as_given(
    part: NormalForm, *, rounded: bool
) -> tuple[sp.csc_array, Floats, Floats, Floats, Floats, Floats]:
    """Matrix, sides, bounds and cost of a part in the form's units, without the scaling.

    HiGHS scales for itself, and a user who compares meets the same search tree. Sides and bounds
    are `rounded` inwards where declarations are left out that would have seen to it.
    """
    form = part.form
    shift = (form.matrix @ part.fixed_value)[part.rows]
    sign = 1.0 if form.sense == "min" else -1.0
    limits: tuple[Floats, ...]
    if rounded:
        row, column = part.row_den / part.row_num, part.col_num / part.col_den
        limits = part.row_lower * row, part.row_upper * row
        limits += part.col_lower * column, part.col_upper * column
    else:
        limits = form.row_lower[part.rows] - shift, form.row_upper[part.rows] - shift
        limits += form.col_lower[part.columns], form.col_upper[part.columns]
    matrix = form.matrix[:, part.columns][part.rows, :]
    return matrix, *limits, sign * form.cost[part.columns]


def kinds_of(part: NormalForm) -> NDArray[np.int32]:
    """HiGHS's codes: 0 continuous, 1 integer, 2 semicontinuous, 3 semi-integer."""
    semicontinuous = part.form.semicontinuous[part.columns]
    return (part.integer + 2 * semicontinuous).astype(np.int32)


def _rounded(part: NormalForm, x: Floats, told: Flags) -> Floats:
    """Round the integer columns `told` of where every row still holds."""
    near = np.where(part.integer & told, np.rint(x), x)
    activity = part.matrix @ near
    slack = rounding_room(abs(part.matrix) @ np.abs(near), 1e-9)
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


def _held_plan(part: NormalForm, x: Floats, held: Flags, deadline: Deadline) -> LpResult | None:
    """Optimise what is left when columns are held at the plan, on a copy.

    Branch and bound leaves continuous columns within its tolerance of their best values; a
    vertex is sharper, and has prices: those of the fixed plan.
    """
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

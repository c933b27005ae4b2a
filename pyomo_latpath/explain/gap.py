"""What wholeness costs: the optimum of the relaxation against the best whole plan."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..highs import LinearProgram
from ..integrality.sampling import FRACTIONAL
from ..routing import solve
from ..solution import Solution


@dataclass(frozen=True)
class Gap:
    """The relaxation's optimum against the best whole plan.

    Attributes
    ----------
    sense : 'min' or 'max'
    declared_bound : float
        Optimum of the relaxation as the model declares it.
    rounded_bound : float
        The same after sides and bounds were rounded inwards, which loses no whole plan.
    plan : float
        Objective of the best whole plan found.
    plan_bound : float
        Best proven bound on every whole plan.
    plan_status : str
        'optimal' where `plan` is the best one, 'time_limit' where the search was cut off,
        'infeasible' where there is none, 'unbounded', 'error' or 'unknown' (not looked for).
    seconds : float
        Of the search for the plan.
    """

    sense: Literal["min", "max"]
    declared_bound: float
    rounded_bound: float
    plan: float
    plan_bound: float
    plan_status: str
    seconds: float

    @property
    def absolute(self) -> float:
        """By how much the plan is worse than the optimum of the relaxation as declared.

        NaN where no plan is known.
        """
        return float(np.maximum(0.0, self.worse_than(self.declared_bound)))

    @property
    def relative(self) -> float:
        """The same as a share of the plan's objective (of 1 where that is smaller)."""
        return self.absolute / max(1.0, abs(self.plan))

    @property
    def exact(self) -> bool:
        """Whether the plan is the best one; otherwise the gap may be smaller than told."""
        return self.plan_status == "optimal"

    def worse_than(self, objective: float) -> float:
        """By how much the plan is worse than another objective; negative where better."""
        return self.plan - objective if self.sense == "min" else objective - self.plan


@dataclass(frozen=True)
class Declared:
    """The optimum of the relaxation as declared, before sides and bounds were rounded inwards.

    Attributes
    ----------
    bound : float
        NaN where there is none, or not in time.
    fractional : int or None
        Columns declared integer that are fractional there.
    """

    bound: float
    fractional: int | None


def declared_optimum(normal: NormalForm, rounded: Declared, deadline: Deadline) -> Declared:
    """Optimise the relaxation as declared.

    Parameters
    ----------
    normal : NormalForm
    rounded : Declared
        The optimum after rounding; where nothing was rounded, it is the answer.
    deadline : Deadline

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=0, row_upper=1.5, col_lower=0,
    ...                               col_upper=9, cost=1, sense="max")
    >>> declared_optimum(normalise(form), Declared(1.0, 0), Deadline(None))
    Declared(bound=1.5, fractional=1)
    """
    form = normal.form
    if not _rounded(normal):
        return rounded
    sign = 1.0 if form.sense == "min" else -1.0
    limits = form.row_lower, form.row_upper, form.col_lower, form.col_upper
    result = LinearProgram(form.matrix, *limits, sign * form.cost).solve(deadline=deadline)
    if result.status == "unbounded":
        return Declared(-sign * float("inf"), None)
    if result.status != "optimal":
        return Declared(float("nan"), None)
    broken = form.integer & (np.abs(result.x - np.rint(result.x)) > FRACTIONAL)
    return Declared(form.offset + float(form.cost @ result.x), int(broken.sum()))


def _rounded(normal: NormalForm) -> bool:
    """Whether normalisation moved a side or a bound by more than noise."""
    form = normal.form
    shift = form.matrix @ normal.fixed_value
    factor = normal.row_num / normal.row_den
    declared = [(side - shift)[normal.rows] * factor for side in (form.row_lower, form.row_upper)]
    fixed = np.setdiff1d(np.arange(form.shape[1]), normal.columns)
    scale = normal.col_num / normal.col_den
    pairs = [
        (declared[0], normal.row_lower),
        (declared[1], normal.row_upper),
        (form.col_lower[normal.columns] / scale, normal.col_lower),
        (form.col_upper[normal.columns] / scale, normal.col_upper),
        (form.col_lower[fixed], normal.fixed_value[fixed]),
        (form.col_upper[fixed], normal.fixed_value[fixed]),
    ]
    return not all(np.allclose(was, now, rtol=1e-9, atol=1e-9) for was, now in pairs)


def best_plan(normal: NormalForm, seconds: float, seed: int) -> tuple[Solution, float]:
    """Look for the best whole plan by whichever route leads there.

    Returns
    -------
    solution : Solution
    seconds : float
        Spent.
    """
    since = time.perf_counter()
    solution = solve(normal.form, samples=0, time_limit=seconds, rel_gap=0.0, seed=seed)
    return solution, time.perf_counter() - since

"""What wholeness costs: the optimum of the relaxation against the best whole plan."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..routing import solve
from ..solution import Solution
from .declared import optimum_of
from .remedies.rounding import rounded_inwards


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
        'optimal' where `plan` is the best one, 'time_limit' or 'interrupted' where the search was
        cut off, 'infeasible' where there is none, 'unbounded', 'error' or 'unknown' (not looked
        for).
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
    found = rounded_inwards(normal)
    if not (found.rows.size or found.columns.size):
        return rounded
    optimum = optimum_of(normal.form, deadline)
    if optimum is None or not np.isfinite(optimum.bound):
        return Declared(float("nan"), None)
    return Declared(optimum.bound, optimum.fractional)


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

"""To stay or to change: what plans near today's cost, by a bonus on today's choices.

With a bonus b, a plan x is worth its cost + b sum_j |x_j - v_j|, v being today's plan: each
unit by which a variable stays as it is earns b. On the pieces of `starts.spread_around` that is a
change of costs alone, so a certified model stays certified. As b grows from 0, the best plans are
the corners of the lower convex hull of all (change, cost): from the best plan to today's. They
are found without trying bonuses at random: between two known corners lies another one if and
only if the bonus at which the two are worth the same has a better plan (the chord method for
biobjective programs; Aneja, Nair 1979). The gap next to today's plan comes first, which is
Newton's method for the bonus from which on it is best to stay; then the widest gaps.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Any

import numpy as np

from . import today
from .answers import exact_sum
from .forms.linear_form import Floats, LinearForm
from .forms.plan import feasible_start
from .starts import Spread, Start, StartError, read_start, spread_around

#: Values nearer than this (relative) are the same.
NOISE = 1e-9


@dataclass(frozen=True, eq=False)
class StayPoint:
    """A plan that is best at some bonus.

    Attributes
    ----------
    bonus : float
        Such a bonus.
    objective : float
        Of the plan, without bonus, in the model's own sense.
    changed : int
        Variables that differ from today's plan.
    distance : float
        Sum of their absolute differences.
    x : ndarray, shape (n,), float64
    """

    bonus: float
    objective: float
    changed: int
    distance: float
    x: Floats


@dataclass(frozen=True, eq=False)
class StayOrChange:
    """The trade between the objective and the number of changes.

    Attributes
    ----------
    points : tuple of StayPoint
        By rising bonus: from the best plan to today's.
    """

    points: tuple[StayPoint, ...]

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON; plans are left out."""
        fields = ("bonus", "objective", "changed", "distance")
        return {"points": [{name: getattr(p, name) for name in fields} for p in self.points]}

    def to_text(self) -> str:
        """A table for people."""
        lines = [f"{'bonus':>12}{'objective':>16}{'changed':>10}{'distance':>12}"]
        lines += [
            f"{p.bonus:>12.6g}{p.objective:>16.10g}{p.changed:>10}{p.distance:>12.6g}"
            for p in self.points
        ]
        return "\n".join(lines)

    def plot(self, axes: Any = None) -> Any:
        """Draw the objective over the number of changes.

        Parameters
        ----------
        axes : matplotlib.axes.Axes, optional
            New ones where not given.

        Returns
        -------
        matplotlib.axes.Axes

        Raises
        ------
        ImportError
            Without matplotlib (the extra `plot`).
        """
        if axes is None:
            try:
                from matplotlib.figure import Figure
            except ImportError as error:
                raise ImportError(
                    "plots need matplotlib: pip install 'pyomo_latpath[plot]'"
                ) from error
            axes = Figure(layout="constrained").add_subplot()
        changed = [point.changed for point in self.points]
        axes.plot(changed, [point.objective for point in self.points], "o-")
        axes.set_xlabel("variables changed from today's plan")
        axes.set_ylabel("objective")
        return axes


def stay_or_change(
    form: LinearForm,
    start: Start,
    bonuses: Sequence[float] | None = None,
    *,
    most: int = 12,
    **options: Any,
) -> StayOrChange:
    """Work out the trade between the objective and the number of changes from today's plan.

    Parameters
    ----------
    form : LinearForm
        Without semicontinuous columns.
    start : array_like, shape (n,), or mapping of str to float
        Today's plan: whole and feasible.
    bonuses : sequence of float, optional
        One point for each, in this order. Without them, the corners of the trade, at most
        `most` of them (a few more if it takes these to know when it is best to stay).
    most : int
    **options
        As `routing.solve`, for each of the solves.

    Returns
    -------
    StayOrChange

    Raises
    ------
    StartError
        For a start that is not a whole feasible plan.
    ValueError
        For a negative bonus, a semicontinuous column, or where a solve ends without a best plan
        (the model is unbounded, or the time is up).

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1, 0, 0], [0, 0, 1, 1]], row_lower=1, row_upper=1,
    ...                               col_lower=0, col_upper=1, cost=[5, 3, 9, 1])
    >>> print(stay_or_change(form, [1, 0, 1, 0]).to_text())
           bonus       objective   changed    distance
               0               4         4           4
             2.5               6         2           2
               4              14         0           0
    """
    values = read_start(form, start)
    try:
        values = feasible_start(form, values)
    except ValueError as reason:
        raise StartError(str(reason)) from None
    spread = spread_around(form, values)

    def best_at(bonus: float) -> StayPoint:
        return _point(form, spread, values, bonus, options)

    if bonuses is None:
        return StayOrChange(_corners(form, values, best_at, most))
    for bonus in bonuses:
        if not 0 <= bonus < np.inf:
            raise ValueError(f"a bonus is {bonus}; it must be a number from 0 on")
    return StayOrChange(tuple(best_at(float(bonus)) for bonus in bonuses))


def _corners(
    form: LinearForm, values: Floats, best_at: Callable[[float], StayPoint], most: int
) -> tuple[StayPoint, ...]:
    """The corners of the trade, by rising bonus."""
    sign = 1 if form.sense == "min" else -1
    points = [best_at(0.0)]
    if points[0].distance == 0:
        return tuple(points)
    points.append(StayPoint(np.inf, form.offset + exact_sum(form.cost * values), 0, 0.0, values))
    unsettled = [True]
    solves = 1
    while unsettled[-1] or (any(unsettled) and solves < most):
        widths = [a.distance - b.distance for a, b in pairwise(points)]
        k = len(widths) - 1
        if not unsettled[k]:
            k = max(np.flatnonzero(unsettled).tolist(), key=widths.__getitem__)
        left, right = points[k : k + 2]
        bonus = max(0.0, sign * (right.objective - left.objective) / widths[k])
        point, solves = best_at(bonus), solves + 1
        known, worth = (sign * p.objective + bonus * p.distance for p in (left, point))
        if worth < known - NOISE * max(1.0, abs(known)):
            points.insert(k + 1, point)
            unsettled.insert(k + 1, True)
        else:
            unsettled[k] = False
            if right.distance == 0:
                points[-1] = replace(right, bonus=bonus)
    return tuple(points)


def _point(
    form: LinearForm, spread: Spread, values: Floats, bonus: float, options: dict[str, Any]
) -> StayPoint:
    """The best plan at a bonus, and of equal ones one near to today's."""
    sign = 1 if form.sense == "min" else -1
    pieces = spread.form.replace(cost=spread.form.cost + sign * bonus * spread.slope)
    solution = today.solve(pieces, start=np.zeros(spread.columns.size), **options)
    if solution.x is None or solution.status != "optimal":
        raise ValueError(
            f"with a bonus of {bonus:g} the solve ended with status {solution.status!r}, "
            "not with a best plan"
        )
    x = spread.plan(solution.x)
    return StayPoint(
        bonus=bonus,
        objective=form.offset + exact_sum(form.cost * x),
        changed=int((np.abs(x - values) > NOISE * np.maximum(1.0, np.abs(values))).sum()),
        distance=float(np.abs(x - values).sum()),
        x=x,
    )

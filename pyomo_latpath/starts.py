"""Plans to start from: read, repaired at the least change, and the optimum nearest to one.

How far a plan x lies from a start v is sum_j |x_j - v_j|, in the model's own units. Each term is
linear on either side of v_j, so a column is replaced by up to three pieces, one of each slope:

    x_j = origin_j + below + between + above,   slopes  -1,  1 - 2 part,  +1,

where `between` leads from floor(v_j) to ceil(v_j) for an integer column that starts at a
fraction, part = v_j - floor(v_j). Slopes rise from left to right, so cheapest plans use the pieces
in their order, and the sum is exact at all whole values (for continuous columns everywhere).
Pieces are copies of their column with whole bounds: a certified block stays certified. A column
that starts at one of its bounds, as all binary ones do, keeps one piece: only its cost changes.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pyomo.core.base import Var

from . import routing
from .forms.linear_form import Floats, LinearForm
from .forms.numbers import snap, whole_numbers
from .forms.plan import largest_violation
from .integrality.finding import Verdict
from .proof import WholeCosts
from .solution import Solution

#: What a start may be: values in the order of the columns, or by their names.
Start = ArrayLike | Mapping[str, float]

#: Violations up to here are rounding; up to there, HiGHS's tolerance.
ROUNDING, FEASIBLE = 1e-9, 1e-6


class StartError(ValueError):
    """A start is no whole feasible plan; the sentence names what is missed."""


@dataclass(frozen=True, eq=False)
class Spread:
    """A form whose columns are cut into pieces around a start.

    Attributes
    ----------
    form : LinearForm
        The pieces, with the costs of their columns, and the rows these meet.
    columns : ndarray, shape (p,), int64
        Which column of the original form each piece belongs to.
    slope : ndarray, shape (p,), float64
        Change of the distance from the start per unit of the piece.
    origin : ndarray, shape (n,), float64
        The plan with all pieces at 0.
    """

    form: LinearForm
    columns: NDArray[np.int64]
    slope: Floats
    origin: Floats

    def plan(self, pieces: Floats) -> Floats:
        """Put the pieces together."""
        x = self.origin.copy()
        np.add.at(x, self.columns, pieces)
        return x


def read_start(form: LinearForm, start: Start) -> Floats:
    """Read the values of a start.

    Parameters
    ----------
    form : LinearForm
    start : array_like, shape (n,), or mapping of str to float
        In the latter, a value for every column by name. Variables that a Pyomo model has fixed
        are no columns; they may be named with the value they are fixed at.

    Raises
    ------
    StartError
        For a wrong shape, unknown or missing names, or a value that is no finite number.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=0, col_names=["cave", "market"])
    >>> read_start(form, {"market": 1, "cave": 0})
    array([0., 1.])
    """
    if isinstance(start, Mapping):
        start = _by_name(form, start)
    try:
        values = np.asarray(start, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise StartError(f"the start has values that are no numbers ({error})") from error
    if values.shape != (form.shape[1],):
        raise StartError(f"the start has shape {values.shape}; it needs {form.shape[1]} values")
    bad = np.flatnonzero(~np.isfinite(values))
    if bad.size:
        name = form.col_names[bad[0]]
        raise StartError(f"the start has the value {values[bad[0]]:g} at column {name!r}")
    return values


def _by_name(form: LinearForm, start: Mapping[str, float]) -> list[float]:
    names = list(form.col_names)
    others = sorted(set(start) - set(names), key=str)
    fixed = _fixed_values(form) if others else {}
    for name in others:
        if name not in fixed:
            raise StartError(f"the start names {name!r}, which is no column of the model")
        if start[name] != fixed[name]:
            told = f"which the model has fixed at {fixed[name]}"
            raise StartError(f"the start has {start[name]} for {name!r}, {told}")
    missing = next((name for name in names if name not in start), None)
    if missing is not None:
        raise StartError(f"the start has no value for column {missing!r}")
    return [start[name] for name in names]


def _fixed_values(form: LinearForm) -> dict[str, float]:
    """The variables that a form's model has fixed, by name; none where it is no Pyomo model."""
    model = getattr(form.col_names, "model", None)
    variables = () if model is None else model.component_data_objects(Var)
    return {variable.name: variable.value for variable in variables if variable.fixed}


def spread_around(form: LinearForm, start: Floats) -> Spread:
    """Cut the columns of a form into pieces around a start.

    Parameters
    ----------
    form : LinearForm
        Without semicontinuous columns.
    start : ndarray, shape (n,), float64

    Raises
    ------
    ValueError
        For a semicontinuous column.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=7, col_lower=0,
    ...                               col_upper=[1, 9], cost=0)
    >>> spread = spread_around(form, np.array([1.0, 2.5]))
    >>> spread.columns.tolist(), spread.slope.tolist(), spread.form.col_lower.tolist()
    ([0, 1, 1, 1], [-1.0, -1.0, 0.0, 1.0], [-1.0, -2.0, 0.0, 0.0])
    """
    if form.semicontinuous.any():
        name = form.col_names[int(np.argmax(form.semicontinuous))]
        raise ValueError(f"column {name!r} is semicontinuous; its distances are not convex")
    integer = form.integer
    lower = np.where(integer, np.ceil(snap(form.col_lower)), form.col_lower)
    upper = np.where(integer, np.floor(snap(form.col_upper)), form.col_upper)
    floor = np.where(integer, np.floor(start), start)
    part = start - floor
    between = (part > 0) & (floor >= lower) & (floor + 1 <= upper)
    origin = np.minimum(np.maximum(floor, lower), upper)
    top = origin + between
    below, above = np.flatnonzero(lower < origin), np.flatnonzero(top < upper)
    middle = np.flatnonzero(between)
    columns = np.concatenate([below, middle, above])
    matrix = form.matrix[:, columns]
    rows = np.unique(matrix.indices)
    shift = (form.matrix @ origin)[rows]
    pieces = LinearForm.from_arrays(
        matrix[rows, :],
        row_lower=form.row_lower[rows] - shift,
        row_upper=form.row_upper[rows] - shift,
        col_lower=np.concatenate([(lower - origin)[below], np.zeros(middle.size + above.size)]),
        col_upper=np.concatenate(
            [np.zeros(below.size), np.ones(middle.size), (upper - top)[above]]
        ),
        cost=form.cost[columns],
        offset=form.offset + float(form.cost @ origin),
        sense=form.sense,
        integer=integer[columns],
    )
    slope = np.concatenate([-np.ones(below.size), 1 - 2 * part[middle], np.ones(above.size)])
    return Spread(pieces, columns, slope, origin)


def nearest_plan(form: LinearForm, start: Floats, **options: Any) -> tuple[str, Floats | None]:
    """Find the whole feasible plan nearest to a start.

    Parameters
    ----------
    form : LinearForm
    start : ndarray, shape (n,), float64
        Need be neither whole nor feasible.
    **options
        As `routing.solve`.

    Returns
    -------
    status : str
        Of the search; the plan is nearest if 'optimal'.
    x : ndarray, shape (n,), float64, or None

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=3, row_upper=3, col_lower=0,
    ...                               col_upper=[1, 9], cost=0)
    >>> nearest_plan(form, np.array([1.0, 4.5]))
    ('optimal', array([1., 2.]))
    """
    spread = spread_around(form, start)
    distance = spread.form.replace(cost=spread.slope, offset=0, sense="min")
    found = routing.solve(distance, **options)
    if found.x is None:
        return found.status, None
    x = spread.plan(found.x)
    x = np.where(form.integer, np.rint(x), x)
    if largest_violation(form, x) > FEASIBLE:
        # A row that meets no free column is missed by every plan.
        return "infeasible", None
    return found.status, x


def nearest_optimum(
    form: LinearForm, solution: Solution, start: Floats, time_limit: float | None = None
) -> Floats | None:
    """Of all optimal plans, find the one nearest to a start.

    A plan is optimal if columns with a reduced cost stay at the bound that the optimum has
    them at, and rows with a price at their side; the search goes over these plans, in the
    blocks that are proven whole. It is exact there, but that in a block with integer columns a
    continuous one counts as starting from the nearest whole number. Other blocks stay as they
    are.

    Parameters
    ----------
    form : LinearForm
    solution : Solution
        An optimum of the form.
    start : ndarray, shape (n,), float64
        A feasible plan.
    time_limit : float, optional

    Returns
    -------
    ndarray, shape (n,), float64, or None
        Checked to be worth the same and as feasible as `solution.x`; None where that is nearest
        already, or nothing nearer was found.
    """
    x = solution.x
    if x is None or solution.status != "optimal" or form.semicontinuous.any():
        return None
    held, wanted = np.full(x.size, True), start.copy()
    for block in solution.report.finding.blocks:
        if block.verdict is Verdict.PROVEN:
            held[block.columns] = solution.reduced_cost[block.columns] != 0
            if block.structure != "trivial":
                wanted[block.columns] = np.rint(start[block.columns])
    if np.array_equal(x[~held], wanted[~held]):
        return None
    activity, tight = form.matrix @ x, solution.row_dual != 0
    face = replace(
        form,
        row_lower=np.where(tight, activity, form.row_lower),
        row_upper=np.where(tight, activity, form.row_upper),
        col_lower=np.where(held, x, form.col_lower),
        col_upper=np.where(held, x, form.col_upper),
    )
    wanted[held] = x[held]
    _, near = nearest_plan(face, wanted, time_limit=time_limit, samples=0)
    if near is None or np.abs(near - start).sum() >= np.abs(x - start).sum():
        return None
    moved = np.flatnonzero(near != x)
    if worsening(read_costs(form), moved, (near - x)[moved]) > 0:
        return None
    allowed = max(ROUNDING, largest_violation(form, x))
    return near if largest_violation(form, near) <= allowed else None


def read_costs(form: LinearForm) -> WholeCosts:
    """Read the costs of a form, to be minimised, as whole numbers over one denominator."""
    numerators, denominator = whole_numbers(form.cost)
    return WholeCosts(numerators if form.sense == "min" else -numerators, denominator)


def worsening(costs: WholeCosts, columns: NDArray[np.int64], amounts: Floats) -> Fraction:
    """By how much the objective gets worse when columns change by these amounts, exact.

    Examples
    --------
    >>> costs = WholeCosts(np.array([1, 3]), 10)
    >>> worsening(costs, np.array([0, 1]), np.array([-1.0, 1.0]))
    Fraction(1, 5)
    """
    pairs = zip(costs.numerators[columns].tolist(), amounts.tolist(), strict=True)
    total = sum((cost * Fraction(amount) for cost, amount in pairs), Fraction(0))
    return total / costs.denominator

"""Answers to the parts of a model, and how they are merged into the answer to the whole."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from .forms.linear_form import Floats, LinearForm
from .forms.normalise import NormalForm
from .integrality.finding import BlockFinding
from .paths.box import box_of
from .paths.path_solver import PathResult
from .solution import WalkReport

#: Of two parts' outcomes the earlier one is the whole model's: infeasible beats unbounded, and
#: unbounded needs every part feasible.
WORST_FIRST = ("infeasible", "error", "interrupted", "time_limit", "limit", "unbounded", "optimal")


@dataclass(frozen=True, eq=False)
class PartAnswer:
    """What is known about one part of a model, in its scaled units, minimised.

    Attributes
    ----------
    normal : NormalForm
        The part.
    status : str
        One of `solution.STATUSES`.
    route : str
        'path' or 'highs'.
    findings : tuple of BlockFinding
    x : ndarray, shape (n,), float64, or None
    bound : float
        On the minimum of the part's cost; -inf without one.
    exact : bool
        Whether the status was proven in exact arithmetic.
    row_dual, reduced_cost : ndarray, float64
        NaN without prices.
    prices : str
        'none', 'true' or 'fixed plan'.
    ray, farkas : ndarray or None
    path : PathResult or None
    pivots : int
        Of the relaxation, where `path` is None.
    short_by : Fraction or None
        For 'infeasible' by certified rows: how much more they ask for than can be had.
    told : int
        Integer declarations that branch and bound was given.
    """

    normal: NormalForm
    status: str
    route: str
    findings: tuple[BlockFinding, ...]
    x: Floats | None
    bound: float
    exact: bool
    row_dual: Floats
    reduced_cost: Floats
    prices: str = "none"
    ray: Floats | None = None
    farkas: Floats | None = None
    path: PathResult | None = None
    pivots: int = 0
    short_by: Fraction | None = None
    told: int = 0


def without_plan(
    normal: NormalForm,
    status: str,
    route: str,
    findings: tuple[BlockFinding, ...],
    *,
    exact: bool = False,
    ray: Floats | None = None,
    farkas: Floats | None = None,
    path: PathResult | None = None,
    told: int = 0,
) -> PartAnswer:
    """Return the answer to a part that has no optimal plan."""
    m, n = normal.matrix.shape
    return PartAnswer(
        normal=normal,
        status=status,
        route=route,
        findings=findings,
        x=None,
        bound=math.inf if status == "infeasible" else -math.inf,
        exact=exact,
        row_dual=np.full(m, np.nan),
        reduced_cost=np.full(n, np.nan),
        ray=ray,
        farkas=farkas,
        path=path,
        told=told,
    )


@dataclass(frozen=True, eq=False)
class Merged:
    """The parts' answers in the form's own rows, columns, units and sense; see `Solution`."""

    status: str
    x: Floats | None
    objective: float
    bound: float
    row_dual: Floats
    reduced_cost: Floats
    ray: Floats | None
    farkas: Floats | None


def merge(form: LinearForm, whole: NormalForm, parts: list[PartAnswer]) -> Merged:
    """Merge the answers to all parts of a form.

    Parameters
    ----------
    form : LinearForm
    whole : NormalForm
        Of the form; it knows the values of fixed columns.
    parts : list of PartAnswer
        Up to the first infeasible or interrupted one, or all.
    """
    met = {part.status for part in parts}
    status = next((s for s in WORST_FIRST if s in met), "optimal")
    m, n = form.shape
    x = whole.fixed_value.copy()
    row_dual, reduced_cost = np.zeros(m), np.full(n, np.nan)
    farkas = ray = None
    for part in parts:
        rows, columns = part.normal.rows, part.normal.columns
        if part.x is not None:
            x[columns] = part.normal.x_original(part.x)
        y, d = part.normal.duals_original(part.row_dual, part.reduced_cost)
        row_dual[rows], reduced_cost[columns] = y, d
        if part.status == "infeasible" and part.farkas is not None:
            farkas = np.zeros(m)
            farkas[rows] = part.farkas * part.normal.row_num / part.normal.row_den
        if part.status == "unbounded" and part.ray is not None:
            ray = np.zeros(n)
            ray[columns] = part.normal.x_original(part.ray)
    complete = sum(part.normal.columns.size for part in parts) == whole.columns.size
    planned = complete and all(part.x is not None for part in parts)
    planned &= status not in ("infeasible", "unbounded")
    fixed = np.full(n, True)
    fixed[whole.columns] = False
    if fixed.any():
        worth = form.cost - form.matrix.T @ row_dual
        reduced_cost[fixed] = worth[fixed]
    sign = 1.0 if form.sense == "min" else -1.0
    least = sum(part.bound for part in parts)
    constant = form.offset + float(form.cost @ whole.fixed_value)
    objective = form.offset + exact_sum(form.cost * x) if planned else math.nan
    bound = constant + sign * least
    if status == "optimal" and all(part.exact for part in parts):
        bound = objective
    return Merged(
        status=status,
        x=x if planned else None,
        objective=objective,
        bound=bound if complete and status not in ("infeasible", "unbounded") else math.nan,
        row_dual=row_dual if planned else np.full(m, np.nan),
        reduced_cost=reduced_cost if planned else np.full(n, np.nan),
        ray=ray,
        farkas=farkas if status == "infeasible" else None,
    )


def exact_sum(values: Floats) -> float:
    """Sum without accumulated rounding.

    Examples
    --------
    >>> exact_sum(np.array([1e16, 1.0, -1e16]))
    1.0
    """
    return math.fsum(values[values != 0].tolist())


def walk_report(parts: list[PartAnswer]) -> WalkReport | None:
    """Add up the walks of all parts that took the path route."""
    reports = [_report(part) for part in parts if part.route == "path"]
    if not reports:
        return None
    total = reports[0]
    for other in reports[1:]:
        bounds = (total.step_bound, other.step_bound)
        total = replace(
            total,
            steps=total.steps + other.steps,
            exact_steps=total.exact_steps and other.exact_steps,
            pivots=total.pivots + other.pivots,
            step_bound=None if None in bounds else sum(b for b in bounds if b is not None),
            rounds=total.rounds + other.rounds,
            scaling_phases=total.scaling_phases + other.scaling_phases,
            faces_fixed=total.faces_fixed + other.faces_fixed,
            dimension=total.dimension + other.dimension,
            box=max(total.box, other.box),
            max_entry=max(total.max_entry, other.max_entry),
            engine=total.engine if total.engine == other.engine else "several",
            note=total.note or other.note,
        )
    return total


def _report(part: PartAnswer) -> WalkReport:
    path = part.path
    box = box_of(part.normal) if path is None else path.box
    return WalkReport(
        steps=0 if path is None else path.steps,
        exact_steps=path is None or path.exact_steps,
        pivots=part.pivots if path is None else path.pivots,
        step_bound=None if path is None else path.walk.step_bound,
        rounds=0 if path is None else path.walk.rounds,
        scaling_phases=0 if path is None else path.walk.phases,
        faces_fixed=0 if path is None else path.walk.faces_fixed,
        dimension=box.dimension,
        box=box.side,
        max_entry=box.max_entry,
        engine="highs" if path is None else path.engine,
        note="" if path is None else path.note,
    )

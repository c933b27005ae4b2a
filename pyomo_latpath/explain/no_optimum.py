"""Models without a best plan: which rows and groups conflict, or what grows without end."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..blame import SHARE, blame
from ..deadline import Deadline
from ..forms.linear_form import Floats, LinearForm
from ..forms.normalise import normalise
from ..forms.numbers import Integers
from ..highs import LinearProgram
from ..highs_mip import MipSettings, branch_and_bound
from ..pages.markup import counted
from ..solution import Solution
from .groups import Group
from .minimal import thin_out
from .naming import listed, quoted
from .remains import Remains

#: So many names are told in a sentence.
TOLD = 3
#: Where the time is not limited, seconds for each question whether some groups conflict.
SECONDS = 5.0


@dataclass(frozen=True)
class NoOptimum:
    """A model without a best plan: infeasible, or unbounded.

    Attributes
    ----------
    kind : 'infeasible' or 'unbounded'
    sentence : str
    names : tuple of str
        Rows (and 'bounds of COLUMN') that conflict; the columns that grow (or fall) without end,
        each by itself where one can, else together.
    minimal : bool
        Whether none of those rows and bounds could be left out.
    groups : tuple of str
        A set of groups that conflict by themselves; empty where none is needed for that, or none
        was found in time.
    groups_minimal : bool
        Whether none of the groups could be left out.
    """

    kind: Literal["infeasible", "unbounded"]
    sentence: str
    names: tuple[str, ...]
    minimal: bool
    groups: tuple[str, ...]
    groups_minimal: bool


def unbounded(form: LinearForm, ray: Floats | None, deadline: Deadline) -> NoOptimum:
    """Tell an unbounded model.

    Parameters
    ----------
    form : LinearForm
    ray : ndarray, shape (n,), float64, or None
        A direction of endless improvement, where one is known.
    deadline : Deadline
        Of the search for one.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 0]], row_lower=0, row_upper=3, col_lower=0,
    ...     col_upper=[1, np.inf], cost=1, sense="max", col_names=["van", "bonus"])
    >>> unbounded(form, None, Deadline(None)).sentence
    "'bonus' has no upper bound, and the objective gets better as it grows"
    """
    alone = _unstopped(form)
    if alone.size:
        ray = np.zeros(form.shape[1])
        ray[alone] = 1.0
    elif ray is None:
        ray = _ray(form, deadline)
    names: tuple[str, ...] = ()
    if ray is not None:
        moving = np.flatnonzero(np.abs(ray) > 1e-9 * np.abs(ray).max(initial=0.0))
        names = tuple(form.col_names[j] for j in moving.tolist())
    if alone.size:
        grows = (form.cost[alone[0]] > 0) == (form.sense == "max")
        side, moves = ("upper", "grows") if grows else ("lower", "falls")
        sentence = f"{quoted(names[0])} has no {side} bound, and the objective gets better as it "
        sentence += moves
        rest = alone.size - 1
        sentence += f"; so with {counted(rest, 'other column')}" if rest else ""
    else:
        together = " together" if len(names) > 1 else ""
        told = f": {listed(names, TOLD)} can move{together} for ever" if names else ""
        sentence = f"the objective gets better without end{told}; a bound or a row is missing"
    return NoOptimum("unbounded", sentence, names, False, (), False)


def _unstopped(form: LinearForm) -> Integers:
    """Columns that make the objective better for ever, each by itself."""
    better = -np.sign(form.cost) if form.sense == "min" else np.sign(form.cost)
    limit = np.where(better > 0, form.col_upper, -form.col_lower)
    pushed = np.repeat(better, np.diff(form.matrix.indptr)) * form.matrix.data
    rows = form.matrix.indices
    side = np.where(pushed > 0, form.row_upper[rows], -form.row_lower[rows])
    stopped = np.zeros(form.shape[1], np.bool_)
    columns = np.repeat(np.arange(form.shape[1]), np.diff(form.matrix.indptr))
    stopped[columns[side < np.inf]] = True
    return np.flatnonzero((better != 0) & (limit == np.inf) & ~stopped)


def _ray(form: LinearForm, deadline: Deadline) -> Floats | None:
    """A direction that no row or bound stops, and in which the objective gets better."""
    sign = 1.0 if form.sense == "min" else -1.0
    row_limits = _recession(form.row_lower, form.row_upper, np.inf)
    col_limits = _recession(form.col_lower, form.col_upper, 1.0)
    program = LinearProgram(form.matrix, *row_limits, *col_limits, sign * form.cost)
    result = program.solve(deadline=deadline)
    return result.x if result.status == "optimal" and result.x.any() else None


def _recession(lower: Floats, upper: Floats, most: float) -> tuple[Floats, Floats]:
    """Limits on a direction: 0 where there is a side, else a number that stands for any."""
    return np.where(lower > -np.inf, 0.0, -most), np.where(upper < np.inf, 0.0, most)


def infeasible(
    remains: Remains, solution: Solution, groups: Sequence[Group], deadline: Deadline
) -> NoOptimum:
    """Tell an infeasible model.

    Parameters
    ----------
    remains : Remains
    solution : Solution
        Its report names conflicting rows where that could be told.
    groups : sequence of Group
    deadline : Deadline

    Returns
    -------
    NoOptimum

    Examples
    --------
    >>> from pyomo_latpath.explain.groups import groups_of, oddities_of
    >>> from pyomo_latpath.explain.stems import row_stems
    >>> from pyomo_latpath.forms.blocks import blocks_of
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> from pyomo_latpath.routing import solve
    >>> form = LinearForm.from_arrays([[1, 1], [1, 0], [0, 1]], row_lower=[3, 0, 0],
    ...     row_upper=[9, 1, 1], col_lower=0, col_upper=9, cost=1,
    ...     row_names=["asked", "cave[1]", "cave[2]"])
    >>> normal = normalise(form)
    >>> odd = oddities_of(normal, blocks_of(normal))
    >>> groups = groups_of(normal, row_stems(form), odd, None)
    >>> infeasible(Remains(form), solve(form), groups, Deadline(None)).groups
    ('asked', 'cave')
    """
    names, minimal = solution.report.blame, solution.report.blame_is_minimal
    if not names or not minimal:
        seconds = min(deadline.left, SECONDS) / SHARE
        blamed = blame(normalise(remains.form), None, False, seconds, deadline)
        names, minimal = (blamed.names or names), blamed.minimal
    held = _holders(remains, names, groups)
    suspects = held or list(range(len(groups)))
    statuses: list[str] = []

    def conflict(some: list[int]) -> bool:
        statuses.append(_status(remains, groups, some, deadline))
        return statuses[-1] == "infeasible"

    chosen: list[int] = []
    chosen_minimal = False
    if conflict(suspects):
        chosen, chosen_minimal = thin_out(suspects, conflict, deadline)
        chosen_minimal &= set(statuses) <= {"infeasible", "optimal"}
    hold = "cannot hold, even by itself" if len(names) == 1 else "cannot all hold"
    told = f"no whole plan exists: {listed(names, TOLD)} {hold}" if names else ""
    return NoOptimum(
        "infeasible",
        told or solution.report.why,
        names,
        minimal and bool(names),
        tuple(groups[k].name for k in chosen),
        chosen_minimal,
    )


def _holders(remains: Remains, names: Sequence[str], groups: Sequence[Group]) -> list[int]:
    """Groups with the named rows."""
    wanted = set(names)
    row_names = remains.form.row_names
    return [
        k
        for k, group in enumerate(groups)
        if wanted and any(row_names[i] in wanted for i in group.rows.tolist())
    ]


def _status(
    remains: Remains, groups: Sequence[Group], some: Sequence[int], deadline: Deadline
) -> str:
    """Whether a whole plan satisfies the rows of some groups."""
    form = remains.form
    kept = np.zeros(form.shape[0], np.bool_)
    for k in some:
        kept[groups[k].rows] = True
    part = remains.without(kept)
    status = branch_and_bound(
        part.matrix,
        part.row_lower,
        part.row_upper,
        part.col_lower,
        part.col_upper,
        np.zeros(form.shape[1]),
        (form.integer + 2 * form.semicontinuous).astype(np.int32),
        MipSettings(),
        deadline.within(SECONDS),
    ).status
    if status == "interrupted":
        raise KeyboardInterrupt
    return status

"""Models without a best plan: which rows and groups conflict, or what grows without end."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..blame import SHARE, blame
from ..deadline import Deadline
from ..forms.normalise import NormalForm, normalise
from ..highs_mip import MipSettings, branch_and_bound
from ..solution import Solution
from .groups import Group
from .minimal import thin_out
from .naming import listed
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
        Rows (and 'bounds of COLUMN') that conflict; the columns that grow without end.
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


def unbounded(normal: NormalForm, ray: np.ndarray | None) -> NoOptimum:
    """Tell an unbounded model.

    Parameters
    ----------
    normal : NormalForm
    ray : ndarray, shape (n,), float64, or None
        A direction of endless improvement, over the form's columns.
    """
    names: tuple[str, ...] = ()
    if ray is not None:
        moving = np.flatnonzero(np.abs(ray) > 1e-9 * np.abs(ray).max(initial=0.0))
        names = tuple(normal.form.col_names[j] for j in moving.tolist())
    together = " together" if len(names) > 1 else ""
    told = f": {listed(names, TOLD)} can grow{together} for ever" if names else ""
    sentence = f"the objective gets better without end{told}; a bound or a row is missing"
    return NoOptimum("unbounded", sentence, names, False, (), False)


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

"""Which rows and bounds of an infeasible model conflict, in the model's own names."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .deadline import Deadline
from .forms.linear_form import Floats, LinearForm
from .forms.normalise import Conflict, NormalForm
from .highs import conflicting_set
from .highs_mip import MipSettings, branch_and_bound

#: Seconds spent on naming a conflict of the relaxation, at most.
BUDGET = 10.0
#: The same for a conflict of whole plans alone: a share of the solve so far, and a floor.
SHARE, FLOOR = 0.25, 0.02


@dataclass(frozen=True)
class Blame:
    """Rows and bounds that conflict.

    Attributes
    ----------
    names : tuple of str
        Rows by name, bounds of a column as 'bounds of NAME'.
    minimal : bool
        Whether leaving out any one of them makes the others satisfiable; False where the time
        ran out before that was shown.
    """

    names: tuple[str, ...]
    minimal: bool


def blame_conflict(form: LinearForm, conflict: Conflict) -> Blame:
    """Name the row or column whose limits no whole plan can meet."""
    if conflict.kind == "row":
        return Blame((form.row_names[conflict.index],), True)
    return Blame((f"bounds of {form.col_names[conflict.index]}",), True)


def blame(
    normal: NormalForm,
    farkas: Floats | None,
    certified: bool,
    seconds: float,
    deadline: Deadline,
) -> Blame:
    """Name rows and bounds that conflict, if possible none of them needlessly.

    Parameters
    ----------
    normal : NormalForm
        An infeasible part.
    farkas : ndarray, shape (m,), float64, or None
        Multipliers that prove its relaxation infeasible; rows without one are not to blame.
        None where the relaxation is feasible, but no whole plan.
    certified : bool
        Whether the relaxation's vertices are known to be whole: then what is feasible for it
        has a whole plan too, whichever rows are left out.
    seconds : float
        Spent on the solve so far.
    deadline : Deadline

    Returns
    -------
    Blame
        Without names where nothing could be told in the time.
    """
    names, column_names = normal.form.row_names, normal.form.col_names
    short = deadline.within(SHARE * seconds + FLOOR)
    rows, columns = np.arange(normal.rows.size), np.empty(0, np.int64)
    minimal = False
    if farkas is not None:
        rows = np.flatnonzero(farkas)
        found, columns = conflicting_set(
            normal.matrix.tocsr()[rows, :].tocsc(),
            normal.row_lower[rows],
            normal.row_upper[rows],
            normal.col_lower,
            normal.col_upper,
            deadline.within(BUDGET),
        )
        minimal = certified and found.size > 0
        rows = rows[found] if found.size else rows
    if not minimal:
        thinned, minimal = _conflict_of_whole_plans(normal, rows, short)
        columns = columns if thinned.size == rows.size else columns[:0]
        rows = thinned
    if not minimal and rows.size == normal.rows.size:
        return Blame((), False)
    told = tuple(names[int(normal.rows[i])] for i in rows)
    return Blame(
        told + tuple(f"bounds of {column_names[int(normal.columns[j])]}" for j in columns), minimal
    )


def _conflict_of_whole_plans(
    normal: NormalForm, rows: NDArray[np.int64], deadline: Deadline
) -> tuple[NDArray[np.int64], bool]:
    """Thin out conflicting rows of a part, in ever smaller bundles, while they conflict.

    Returns
    -------
    rows : ndarray, int64
    minimal : bool
        Whether every row was tried on its own.
    """
    kept = np.zeros(normal.rows.size, np.bool_)
    kept[rows] = True
    bundle = max(1, rows.size // 4)
    while True:
        for begin in range(0, rows.size, bundle):
            tried = kept.copy()
            tried[rows[begin : begin + bundle]] = False
            if tried.sum() == kept.sum():
                continue
            status = "time_limit" if deadline.passed else _status_with(normal, tried, deadline)
            if status == "infeasible":
                kept = tried
            elif status != "optimal":
                return np.flatnonzero(kept), False
        if bundle == 1:
            return np.flatnonzero(kept), True
        bundle = max(1, bundle // 4)


def _status_with(normal: NormalForm, kept: NDArray[np.bool_], deadline: Deadline) -> str:
    """Whether the kept rows alone have a whole plan."""
    return branch_and_bound(
        normal.matrix,
        np.where(kept, normal.row_lower, -np.inf),
        np.where(kept, normal.row_upper, np.inf),
        normal.col_lower,
        normal.col_upper,
        np.zeros(normal.columns.size),
        normal.integer.astype(np.int32),
        MipSettings(),
        deadline,
    ).status

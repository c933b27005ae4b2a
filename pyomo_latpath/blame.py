"""Which rows and bounds of an infeasible model conflict, in the model's own names."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from .deadline import Deadline
from .forms.linear_form import Floats, LinearForm
from .forms.normalise import Conflict, NormalForm
from .highs import conflicting_set
from .highs_mip import MipSettings, branch_and_bound

#: Seconds spent on naming a conflict, at most.
BUDGET = 10.0
#: Rows of a part whose relaxation is feasible are only tried one by one up to this many.
MOST_ROWS_TRIED = 200


def blame_conflict(form: LinearForm, conflict: Conflict) -> tuple[str, ...]:
    """Name the row or column whose limits no whole plan can meet."""
    if conflict.kind == "row":
        return (form.row_names[conflict.index],)
    return (f"bounds of {form.col_names[conflict.index]}",)


def blame(normal: NormalForm, farkas: Floats | None, deadline: Deadline) -> tuple[str, ...]:
    """Name rows and bounds that conflict, none of them needlessly.

    Parameters
    ----------
    normal : NormalForm
        An infeasible part.
    farkas : ndarray, shape (m,), float64, or None
        Multipliers that prove its relaxation infeasible; rows without one are not to blame.
    deadline : Deadline

    Returns
    -------
    tuple of str
        Leaving out any one of them makes the others satisfiable. Empty where none was found
        in the time.
    """
    deadline = deadline.within(BUDGET)
    suspects = np.arange(normal.rows.size) if farkas is None else np.flatnonzero(farkas)
    if farkas is None:
        found = _conflict_of_whole_plans(normal, deadline)
        return tuple(normal.form.row_names[int(normal.rows[i])] for i in found)
    rows, columns = conflicting_set(
        normal.matrix.tocsr()[suspects, :].tocsc(),
        normal.row_lower[suspects],
        normal.row_upper[suspects],
        normal.col_lower,
        normal.col_upper,
        deadline,
    )
    names, columns_of = normal.form.row_names, normal.form.col_names
    return tuple(names[int(normal.rows[i])] for i in suspects[rows]) + tuple(
        f"bounds of {columns_of[int(normal.columns[j])]}" for j in columns
    )


def _conflict_of_whole_plans(normal: NormalForm, deadline: Deadline) -> NDArray[np.int64]:
    """Rows of a part whose relaxation is feasible, thinned out one by one (deletion filter)."""
    m = normal.rows.size
    kept = np.full(m, True)
    if m > MOST_ROWS_TRIED:
        return np.empty(0, np.int64)
    for i in range(m):
        kept[i] = False
        status = branch_and_bound(
            normal.matrix,
            np.where(kept, normal.row_lower, -np.inf),
            np.where(kept, normal.row_upper, np.inf),
            normal.col_lower,
            normal.col_upper,
            np.zeros(normal.columns.size),
            normal.integer.astype(np.int32),
            MipSettings(threads=1),
            deadline,
        ).status
        if status not in ("infeasible", "optimal"):
            return np.empty(0, np.int64)
        kept[i] = status == "optimal"
    return np.flatnonzero(kept)

"""A remedy made on a form: rows keep their places, new ones follow after the last."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import scipy.sparse as sp

from ...forms.linear_form import LinearForm
from .remedy import Inequality, Remedy, RowChange
from .unchanged import refuse_changed


class JoinedNames(Sequence[str]):
    """Names of a form, still looked up only when asked for, and further ones after them.

    Examples
    --------
    >>> list(JoinedNames(["shelf"], ["cut[1]"]))
    ['shelf', 'cut[1]']
    """

    def __init__(self, first: Sequence[str], more: Sequence[str]) -> None:
        self.first, self.more = first, more

    def __len__(self) -> int:
        return len(self.first) + len(self.more)

    def __getitem__(self, index: Any) -> Any:
        if isinstance(index, slice):
            return [self[i] for i in range(*index.indices(len(self)))]
        if not -len(self) <= index < len(self):
            raise IndexError(index)
        place = index % len(self)
        return self.first[place] if place < len(self.first) else self.more[place - len(self.first)]


def apply_to_form(remedy: Remedy, form: LinearForm) -> LinearForm:
    """Return the form with a remedy's change made.

    A changed row stays where it is, a dropped one stays without sides, so that the indices of
    further remedies still hold. Where two remedies change one row, the last one counts: each is
    as good as the model's own row.

    Parameters
    ----------
    remedy : Remedy
    form : LinearForm

    Returns
    -------
    LinearForm

    Raises
    ------
    TypeError
        For anything but a form.
    ValueError
        If a row or column of the remedy is not at its place in the form, if a row or a bound
        has changed since it was explained, or if the remedy was made already.
    """
    if not isinstance(form, LinearForm):
        raise TypeError(
            f"apply_to() takes a LinearForm, not {type(form).__name__}; a Pyomo model is changed "
            "by apply()"
        )
    _refuse_another_form(remedy, form)
    refuse_changed(remedy, form, by_name=False)
    row_lower, row_upper = form.row_lower.copy(), form.row_upper.copy()
    for change in remedy.row_changes:
        row_lower[change.row], row_upper[change.row] = change.lower, change.upper
    row_lower[remedy.dropped_rows], row_upper[remedy.dropped_rows] = -np.inf, np.inf
    col_lower, col_upper = form.col_lower.copy(), form.col_upper.copy()
    for bound in remedy.bound_changes:
        col_lower[bound.column], col_upper[bound.column] = bound.lower, bound.upper
    integer = form.integer.copy()
    integer[remedy.dropped_declarations] = False
    added = remedy.inequalities
    return LinearForm.from_arrays(
        _changed_matrix(remedy, form.matrix) if added or remedy.row_changes else form.matrix,
        row_lower=np.append(row_lower, [row.lower for row in added]),
        row_upper=np.append(row_upper, [row.upper for row in added]),
        col_lower=col_lower,
        col_upper=col_upper,
        cost=form.cost,
        offset=form.offset,
        sense=form.sense,
        integer=integer,
        row_names=JoinedNames(form.row_names, [row.name for row in added]),
        col_names=form.col_names,
        semicontinuous=form.semicontinuous,
    )


def _changed_matrix(remedy: Remedy, matrix: sp.csc_array) -> sp.csc_array:
    """Put changed rows in the place of old ones, and new rows below."""
    m, n = matrix.shape
    old = matrix.tocoo()
    rows, columns = old.coords
    lines: list[tuple[int, RowChange | Inequality]] = [
        *((change.row, change) for change in remedy.row_changes),
        *enumerate(remedy.inequalities, start=m),
    ]
    stays = ~np.isin(rows, [row for row, _ in lines])
    sizes = [line.columns.size for _, line in lines]
    triplets = (
        np.hstack([old.data[stays], *(line.coefficients for _, line in lines)]),
        (
            np.append(rows[stays], np.repeat([row for row, _ in lines], sizes)),
            np.hstack([columns[stays], *(line.columns for _, line in lines)]),
        ),
    )
    return sp.csc_array(triplets, shape=(m + len(remedy.inequalities), n))


def _refuse_another_form(remedy: Remedy, form: LinearForm) -> None:
    """Name the first row or column that the form has not at its place."""
    rows = [(change.row, change.name) for change in remedy.row_changes]
    rows += zip(remedy.dropped_rows.tolist(), remedy.dropped_row_names, strict=True)
    columns = [(change.column, change.name) for change in remedy.bound_changes]
    dropped = remedy.dropped_declarations.tolist()
    columns += zip(dropped, remedy.dropped_declaration_names, strict=True)
    lines: list[RowChange | Inequality] = [*remedy.row_changes, *remedy.inequalities]
    for line in lines:
        columns += zip(line.columns.tolist(), line.column_names, strict=True)
    for kind, names, wanted in (
        ("row", form.row_names, rows),
        ("column", form.col_names, columns),
    ):
        for place, name in dict.fromkeys(wanted):
            if place >= len(names) or names[place] != name:
                raise ValueError(
                    f"{kind} {name!r} of the remedy {remedy.title!r} is not {kind} {place + 1} of "
                    "this form; apply it to the form that was explained"
                )

"""Normalisation: whole numbers in rows, sides and bounds, wherever that loses no whole plan.

Fixed columns are substituted, rows without any use dropped, rows scaled to coprime whole
numbers and their sides rounded inwards. Each step is valid for the whole-number model, not
for its relaxation: x + y <= 3/2 becomes x + y <= 1. What a scaled row or column came from is
kept as factors, so that plans and prices find their way back.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import scipy.sparse as sp

from .linear_form import Flags, Floats, LinearForm
from .numbers import SNAP, Integers, snap
from .scaling import ScaledMatrix, scaled_matrix


@dataclass(frozen=True)
class Conflict:
    """A row or column that no whole plan can satisfy, found while rounding.

    Attributes
    ----------
    kind : 'row' or 'column'
    index : int
        Into the form.
    reason : str
        One sentence.
    """

    kind: Literal["row", "column"]
    index: int
    reason: str


@dataclass(frozen=True, eq=False)
class NormalForm:
    """A form after substitution, scaling and inward rounding.

    Attributes
    ----------
    form : LinearForm
        What it was made from.
    rows, columns : ndarray, shape (m',), (n',), int64
        Indices into the form of what is kept.
    matrix : scipy.sparse.csc_array, shape (m', n'), float64
        diag(r) A diag(c) on the kept part; whole numbers in every row of `whole_rows`.
    row_lower, row_upper, col_lower, col_upper : ndarray, float64
        Sides and bounds in scaled units.
    cost : ndarray, shape (n',), float64
        In scaled units, to be minimised (the negated cost where the form maximises).
    integer : ndarray, shape (n',), bool
    row_num, row_den, col_num, col_den : ndarray, int64
        r = row_num / row_den and c = col_num / col_den.
    whole_rows, whole_sides, whole_bounds : ndarray, bool
        Rows whose entries, rows whose finite sides, columns whose finite bounds are whole.
    fixed_value : ndarray, shape (n,), float64
        Values of the form's fixed columns; 0 elsewhere.
    snapped : int
        Numbers read as another one nearby.
    conflict : Conflict or None
    scaled : ScaledMatrix
        Of the whole form, also in a part of it.
    """

    form: LinearForm
    rows: Integers
    columns: Integers
    matrix: sp.csc_array
    row_lower: Floats
    row_upper: Floats
    col_lower: Floats
    col_upper: Floats
    cost: Floats
    integer: Flags
    row_num: Integers
    row_den: Integers
    col_num: Integers
    col_den: Integers
    whole_rows: Flags
    whole_sides: Flags
    whole_bounds: Flags
    fixed_value: Floats
    snapped: int
    conflict: Conflict | None
    scaled: ScaledMatrix

    @property
    def certifiable(self) -> bool:
        """Whether all entries, sides and bounds are whole, as every certificate asks."""
        return bool(self.whole_rows.all() and self.whole_sides.all() and self.whole_bounds.all())

    def restrict(
        self, rows: Integers, columns: Integers, matrix: sp.csc_array | None = None
    ) -> NormalForm:
        """Return the part with these rows and columns (ascending local indices).

        The columns must have no nonzeros outside the rows, as those of a block. The part's matrix
        may be given where it is known already.
        """
        if rows.size == self.rows.size and columns.size == self.columns.size:
            return self
        if matrix is None:
            part = self.matrix[:, columns]
            place = np.searchsorted(rows, part.indices).astype(part.indices.dtype)
            matrix = sp.csc_array((part.data, place, part.indptr), shape=(rows.size, columns.size))
        by_row = "rows row_lower row_upper row_num row_den whole_rows whole_sides"
        by_column = "columns col_lower col_upper cost integer col_num col_den whole_bounds"
        picked = {name: getattr(self, name)[rows] for name in by_row.split()}
        picked |= {name: getattr(self, name)[columns] for name in by_column.split()}
        return replace(self, matrix=matrix, **picked)

    def priced_as(self, form: LinearForm) -> NormalForm:
        """Return the normal form of a form that differs in costs, offset, sense or names only."""
        return replace(self, form=form, cost=_scaled_cost(form, self.scaled))

    def x_original(self, x: Floats) -> Floats:
        """Undo the column scaling: values of the kept columns in the form's units."""
        return x * self.col_num / self.col_den

    def duals_original(self, row_dual: Floats, reduced_cost: Floats) -> tuple[Floats, Floats]:
        """Undo scaling and sense: prices of the kept rows and columns, as d(objective)/d(side)."""
        sign = 1.0 if self.form.sense == "min" else -1.0
        return (
            sign * row_dual * self.row_num / self.row_den,
            sign * reduced_cost * self.col_den / self.col_num,
        )


def normalise(form: LinearForm, known: ScaledMatrix | None = None) -> NormalForm:
    """Normalise a form.

    Parameters
    ----------
    form : LinearForm
    known : ScaledMatrix, optional
        Of a form with the same matrix; taken where the same rows and columns are kept.

    Returns
    -------
    NormalForm
        Its `conflict` is set where rounding alone shows that there is no whole plan.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[0.5, 0.5, 1]], row_lower=-np.inf, row_upper=[1.7],
    ...                               col_lower=[0, 0, 1], col_upper=[0.9, 2, 1], cost=0)
    >>> normal = normalise(form)
    >>> normal.matrix.toarray(), normal.row_upper, normal.col_upper, normal.columns
    (array([[1.]]), array([1.]), array([2.]), array([1]))
    """
    col_lower, col_upper, moved = _round_columns(form)
    conflict = _crossed(form, "column", col_lower, col_upper)
    fixed = col_lower >= col_upper
    value = np.where(fixed, np.where(np.isfinite(col_lower), col_lower, 0.0), 0.0)
    shift = form.matrix @ value if fixed.any() else np.zeros(form.shape[0])
    columns = np.flatnonzero(~fixed)
    sided = np.isfinite(form.row_lower) | np.isfinite(form.row_upper)
    serves = known is not None and known.serves(columns, sided, form.integer[columns])
    scaled = known if known is not None and serves else scaled_matrix(form, columns, sided)
    rows = scaled.rows
    conflict = conflict or _broken_constant(form, shift, scaled.constant)
    row_lower, row_upper, whole_sides, moved_sides = _round_sides(
        form.row_lower[rows] - shift[rows], form.row_upper[rows] - shift[rows], scaled
    )
    conflict = conflict or _crossed(form, "row", row_lower, row_upper, rows)
    # Sides that cross by no more than noise are one; those that truly cross stay as they are.
    with np.errstate(invalid="ignore"):
        touch = (row_lower > row_upper) & (row_lower - row_upper <= SNAP * np.abs(row_lower))
    row_upper = np.where(touch, row_lower, row_upper)
    factor = scaled.col_num / scaled.col_den
    low, high = col_lower[columns] / factor, col_upper[columns] / factor
    low_snapped, high_snapped = snap(low), snap(high)
    moved += int(np.sum((low_snapped != low) & np.isfinite(low)))
    moved += int(np.sum((high_snapped != high) & np.isfinite(high)))
    return NormalForm(
        form=form,
        rows=rows,
        columns=columns,
        matrix=scaled.matrix,
        row_lower=row_lower,
        row_upper=row_upper,
        col_lower=low_snapped,
        col_upper=high_snapped,
        cost=_scaled_cost(form, scaled),
        integer=scaled.integer,
        row_num=scaled.row_num,
        row_den=scaled.row_den,
        col_num=scaled.col_num,
        col_den=scaled.col_den,
        whole_rows=scaled.whole_rows,
        whole_sides=whole_sides,
        whole_bounds=_is_whole(low_snapped) & _is_whole(high_snapped),
        fixed_value=value,
        snapped=moved + moved_sides + scaled.snapped,
        conflict=conflict,
        scaled=scaled,
    )


def _scaled_cost(form: LinearForm, scaled: ScaledMatrix) -> Floats:
    """Costs of the kept columns in scaled units, to be minimised."""
    sign = 1.0 if form.sense == "min" else -1.0
    return sign * form.cost[scaled.columns] * (scaled.col_num / scaled.col_den)


def _is_whole(values: Floats) -> Flags:
    """Whole or infinite."""
    return np.rint(values) == values


def _round_columns(form: LinearForm) -> tuple[Floats, Floats, int]:
    """Round the bounds of integer columns inwards."""
    if not form.integer.any():
        return form.col_lower, form.col_upper, 0
    lower, upper = snap(form.col_lower), snap(form.col_upper)
    moved = int(np.sum((lower != form.col_lower) & form.integer))
    moved += int(np.sum((upper != form.col_upper) & form.integer))
    return (
        np.where(form.integer, np.ceil(lower), form.col_lower),
        np.where(form.integer, np.floor(upper), form.col_upper),
        moved,
    )


def _round_sides(
    lower: Floats, upper: Floats, scaled: ScaledMatrix
) -> tuple[Floats, Floats, Flags, int]:
    """Scale sides, read those next to a whole number as it, round those of pure rows inwards."""
    with np.errstate(invalid="ignore"):
        lower, upper = (side * scaled.row_num / scaled.row_den for side in (lower, upper))
        low, high = snap(lower), snap(upper)
        # Scaling itself is off by a rounding or two; that is no other reading of the data.
        unscaled = scaled.row_num == scaled.row_den
        noise = [np.where(unscaled, 0.0, 4 * np.spacing(np.abs(s))) for s in (lower, upper)]
        moved = int(np.sum(np.abs(low - lower) > noise[0]))
        moved += int(np.sum(np.abs(high - upper) > noise[1]))
    inwards = scaled.pure & scaled.whole_rows
    low, high = np.where(inwards, np.ceil(low), low), np.where(inwards, np.floor(high), high)
    return low, high, _is_whole(low) & _is_whole(high), moved


def _crossed(
    form: LinearForm,
    kind: Literal["row", "column"],
    lower: Floats,
    upper: Floats,
    index: Integers | None = None,
) -> Conflict | None:
    """The first row or column whose limits cross, rounding included."""
    slack = SNAP * np.maximum(1.0, np.where(np.isfinite(upper), np.abs(upper), 1.0))
    crossed = lower > upper + slack
    if not crossed.any():
        return None
    k = int(np.argmax(crossed))
    i = k if index is None else int(index[k])
    names = form.row_names if kind == "row" else form.col_names
    low, high = (
        (form.row_lower[i], form.row_upper[i])
        if kind == "row"
        else (form.col_lower[i], form.col_upper[i])
    )
    if low > high:
        return Conflict(kind, i, f"{kind} {names[i]!r}: its limits [{low:g}, {high:g}] cross")
    told = f"no value that it can take lies within its limits [{low:g}, {high:g}]"
    return Conflict(kind, i, f"{kind} {names[i]!r}: {told}")


def _broken_constant(form: LinearForm, value: Floats, constant: Flags) -> Conflict | None:
    """The first row without free columns whose sides its constant value misses."""
    with np.errstate(invalid="ignore"):
        slack = SNAP * np.maximum(1.0, np.abs(value))
        broken = constant & ((value < form.row_lower - slack) | (value > form.row_upper + slack))
    if not broken.any():
        return None
    i = int(np.argmax(broken))
    return Conflict(
        "row",
        i,
        f"row {form.row_names[i]!r} is {value[i]:g} whatever is decided, outside its sides "
        f"[{form.row_lower[i]:g}, {form.row_upper[i]:g}]",
    )

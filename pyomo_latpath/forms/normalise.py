"""Normalisation: whole numbers in rows, sides and bounds, wherever that loses no whole plan.

Fixed columns are substituted, rows without any use dropped, rows scaled to coprime whole
numbers and their sides rounded inwards. Each step is valid for the whole-number model, not
for its relaxation: x + y <= 3/2 becomes x + y <= 1. What a scaled row or column came from is
kept as factors, so that plans and prices find their way back.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

import numpy as np
import scipy.sparse as sp
from scipy.sparse.csgraph import breadth_first_order, connected_components

from .linear_form import Flags, Floats, LinearForm
from .numbers import EXACT, SNAP, Integers, read_fractions, snap

#: Denominators up to this one are scaled away in whole arrays; others row by row.
DECIMAL = 100_000
#: Rows whose whole entries would be larger stay as they are: a solver's tolerances are absolute.
LARGEST_ENTRY = 10**7


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

    @property
    def certifiable(self) -> bool:
        """Whether all entries, sides and bounds are whole, as every certificate asks."""
        return bool(self.whole_rows.all() and self.whole_sides.all() and self.whole_bounds.all())

    def restrict(self, rows: Integers, columns: Integers) -> NormalForm:
        """Return the part with these rows and columns (ascending local indices).

        The columns must have no nonzeros outside the rows, as those of a block.
        """
        if rows.size == self.rows.size and columns.size == self.columns.size:
            return self
        part = self.matrix[:, columns]
        place = np.searchsorted(rows, part.indices).astype(part.indices.dtype)
        matrix = sp.csc_array((part.data, place, part.indptr), shape=(rows.size, columns.size))
        by_row = "rows row_lower row_upper row_num row_den whole_rows whole_sides"
        by_column = "columns col_lower col_upper cost integer col_num col_den whole_bounds"
        picked = {name: getattr(self, name)[rows] for name in by_row.split()}
        picked |= {name: getattr(self, name)[columns] for name in by_column.split()}
        return replace(self, matrix=matrix, **picked)

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


def normalise(form: LinearForm) -> NormalForm:
    """Normalise a form.

    Parameters
    ----------
    form : LinearForm

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
    matrix = form.matrix[:, columns] if fixed.any() else form.matrix
    length = np.bincount(matrix.indices, minlength=form.shape[0])
    sided = np.isfinite(form.row_lower) | np.isfinite(form.row_upper)
    rows = np.flatnonzero((length > 0) & sided)
    conflict = conflict or _broken_constant(form, shift, (length == 0) & sided)
    if rows.size < form.shape[0]:
        matrix = matrix[rows, :]
    scaled = _scale(matrix, form.integer[columns])
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
    sign = 1.0 if form.sense == "min" else -1.0
    return NormalForm(
        form=form,
        rows=rows,
        columns=columns,
        matrix=scaled.matrix,
        row_lower=row_lower,
        row_upper=row_upper,
        col_lower=low_snapped,
        col_upper=high_snapped,
        cost=sign * form.cost[columns] * factor,
        integer=form.integer[columns],
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
    )


@dataclass(frozen=True, eq=False)
class _Scaled:
    """A matrix with its factors; `pure` rows have integer columns only."""

    matrix: sp.csc_array
    row_num: Integers
    row_den: Integers
    col_num: Integers
    col_den: Integers
    whole_rows: Flags
    pure: Flags
    snapped: int


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
    lower: Floats, upper: Floats, scaled: _Scaled
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


def _scale(matrix: sp.csc_array, integer: Flags) -> _Scaled:
    """Find factors that make rows coprime whole numbers; continuous columns may be scaled too."""
    m, n = matrix.shape
    by_row = matrix.tocsr()
    num, den, read = read_fractions(by_row.data)
    row_of = np.repeat(np.arange(m), np.diff(by_row.indptr))
    of_integer = integer[by_row.indices]
    pure = np.full(m, True)
    pure[row_of[~of_integer]] = False
    snapped = int(np.sum(read & (num / den != by_row.data)))
    row_num, row_den = _coprime_factors(by_row.indptr, row_of, num, den, read & of_integer, m)
    readable = np.full(m, True)
    readable[row_of[~read]] = False
    row_num[~readable], row_den[~readable] = 1, 1
    entries = _times(num, den, row_num[row_of], row_den[row_of])
    grown = (np.abs(entries) > LARGEST_ENTRY) & (np.abs(entries) > np.abs(by_row.data))
    if grown.any():
        read = read & ~np.isin(row_of, row_of[grown])
        row_num[row_of[grown]] = row_den[row_of[grown]] = 1
        readable[row_of[grown]] = False
        entries = _times(num, den, row_num[row_of], row_den[row_of])
    col_num, col_den = np.ones(n, np.int64), np.ones(n, np.int64)
    if not of_integer.all() and of_integer.any():
        odd = ~of_integer & read & (np.abs(entries) != 1)
        if odd.any():
            _scale_continuous(
                by_row, num, den, integer, entries, row_num, row_den, col_num, col_den
            )
            entries = _times(num, den, row_num[row_of], row_den[row_of])
            entries *= (col_num / col_den)[by_row.indices]
    near = np.rint(entries)
    whole = read & (np.abs(entries - near) <= 1e-12 * np.abs(near)) & (np.abs(near) < EXACT)
    whole_rows = np.full(m, True)
    whole_rows[row_of[~whole]] = False
    entries = np.where(whole_rows[row_of], near, entries)
    unread = ~readable[row_of]
    factor = (col_num / col_den)[by_row.indices]
    entries[unread] = by_row.data[unread] * factor[unread]
    scaled = sp.csr_array((entries, by_row.indices, by_row.indptr), shape=(m, n)).tocsc()
    return _Scaled(scaled, row_num, row_den, col_num, col_den, whole_rows, pure, snapped)


def _times(num: Integers, den: Integers, by_num: Integers, by_den: Integers) -> Floats:
    """Products of fractions as floats; exact where the result is a whole number below 2**53."""
    common = np.gcd(num, by_den)
    other = np.gcd(by_num, den)
    top = (num // common).astype(np.float64) * (by_num // other)
    return top / ((by_den // common).astype(np.float64) * (den // other))


def _coprime_factors(
    start: Integers, row_of: Integers, num: Integers, den: Integers, used: Flags, m: int
) -> tuple[Integers, Integers]:
    """Factors lcm(denominators) / gcd(numerators) of each row, over its `used` entries."""
    row_num, row_den = np.ones(m, np.int64), np.ones(m, np.int64)
    full = np.flatnonzero(np.diff(start) > 0)
    if not full.size:
        return row_num, row_den
    at = start[full]
    plain = used & (den <= DECIMAL) & (DECIMAL % den == 0)
    row_num[full] = np.lcm.reduceat(np.where(plain, den, 1), at)
    scaled = np.where(used, num, 0)
    if row_num.max() > 1:
        scaled = np.where(plain, num * (row_num[row_of] // np.where(plain, den, 1)), scaled)
    row_den[full] = np.maximum(np.gcd.reduceat(np.where(used, np.abs(scaled), 0), at), 1)
    for i in np.unique(row_of[used & ~plain]):
        here = slice(start[i], start[i + 1])
        mine = used[here]
        tops, bottoms = num[here][mine].tolist(), den[here][mine].tolist()
        multiple = math.lcm(*bottoms)
        divisor = math.gcd(*(t * (multiple // b) for t, b in zip(tops, bottoms, strict=True)))
        fits = multiple < EXACT and divisor < EXACT
        row_num[i], row_den[i] = (multiple, divisor) if fits else (1, 1)
    common = np.gcd(row_num, row_den)
    return row_num // common, row_den // common


def _scale_continuous(
    by_row: sp.csr_array,
    num: Integers,
    den: Integers,
    integer: Flags,
    entries: Floats,
    row_num: Integers,
    row_den: Integers,
    col_num: Integers,
    col_den: Integers,
) -> None:
    """Scale continuous columns, and rows of nothing else, towards entries of +-1, in place.

    Factors spread from the rows that hold integer columns, whose factors stand, along a
    breadth-first tree. Only connected parts whose integer columns have entries of +-1 already
    are worth it.
    """
    m, n = by_row.shape
    row_of = np.repeat(np.arange(m), np.diff(by_row.indptr))
    of_integer = integer[by_row.indices]
    pattern = sp.csr_array(
        (np.arange(1, by_row.nnz + 1, dtype=np.int64), by_row.indices, by_row.indptr), shape=(m, n)
    )
    whole_graph = sp.block_array([[None, pattern], [pattern.T, None]], format="csr")
    _, label = connected_components(whole_graph, directed=False)
    spoilt = np.zeros(label.max() + 1, np.bool_)
    spoilt[label[row_of[of_integer & (np.abs(entries) != 1)]]] = True
    spoilt[label[row_of[entries == 0]]] = True
    anchored = np.zeros(m, np.bool_)
    anchored[row_of[of_integer]] = True
    keep = ~of_integer & ~spoilt[label[row_of]]
    links = sp.csr_array(
        (np.arange(1, by_row.nnz + 1)[keep], (row_of[keep], by_row.indices[keep])), shape=(m, n)
    )
    source = sp.csr_array(np.where(anchored, by_row.nnz + 1, 0)[:, None])
    graph = sp.block_array(
        [[None, links, source], [links.T, None, None], [source.T, None, None]], format="csr"
    )
    order, before = breadth_first_order(graph, m + n, directed=False)
    lookup = {}
    for k in np.flatnonzero(keep):
        lookup[int(row_of[k]), int(by_row.indices[k])] = k
    for node in order[1:]:
        parent = int(before[node])
        if parent == m + n:
            continue
        row, col = (int(parent), int(node) - m) if node >= m else (int(node), parent - m)
        k = lookup[row, col]
        known = (
            Fraction(int(row_num[row]), int(row_den[row]))
            if node >= m
            else Fraction(int(col_num[col]), int(col_den[col]))
        )
        factor = 1 / abs(known * Fraction(int(num[k]), int(den[k])))
        if max(factor.numerator, factor.denominator) >= EXACT:
            continue
        if node >= m:
            col_num[col], col_den[col] = factor.numerator, factor.denominator
        else:
            row_num[row], row_den[row] = factor.numerator, factor.denominator


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

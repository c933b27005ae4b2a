"""One-sided rows of a form, read exactly as sum of coefficient times column <= side.

Numbers are Python integers where they are whole, fractions elsewhere. Most rows are no switches,
which a look at all rows at once, in floating point, shows at little cost.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from ...forms.linear_form import Flags, Floats, LinearForm
from ...forms.numbers import simplest_fraction, snap

#: An exact number; a limit is None where there is none.
Exact = int | Fraction
Limit = Exact | None


@dataclass(frozen=True, eq=False)
class Columns:
    """Bounds of columns, exact, those of integer columns rounded inwards.

    Attributes
    ----------
    lower, upper : list of int, Fraction or None, length n
    integer, binary : ndarray, shape (n,), bool
        Binary columns may be 0 or 1, and nothing else.
    """

    lower: list[Limit]
    upper: list[Limit]
    integer: Flags
    binary: Flags

    def most(self, column: int, coefficient: Exact) -> Limit:
        """Largest value of coefficient times column; None where it has no limit."""
        limit = self.upper[column] if coefficient > 0 else self.lower[column]
        return None if limit is None else coefficient * limit

    def least(self, column: int, coefficient: Exact) -> Limit:
        """Smallest value of coefficient times column; None where it has no limit."""
        limit = self.lower[column] if coefficient > 0 else self.upper[column]
        return None if limit is None else coefficient * limit


@dataclass(frozen=True)
class Line:
    """A row with one side, as sum of coefficient times column <= side.

    Attributes
    ----------
    row : int
        Index into the form.
    sign : int
        -1 where the row is >= and everything was negated; else 1.
    terms : dict of int to int or Fraction
        Column to coefficient, not 0.
    side : int or Fraction
    """

    row: int
    sign: int
    terms: dict[int, Exact]
    side: Exact

    @property
    def largest(self) -> int:
        """The column with the largest coefficient; the first of several."""
        return max(self.terms, key=lambda j: size(self.terms[j]))


@dataclass(frozen=True, eq=False)
class Outlook:
    """All one-sided rows at a glance, as sums <= side; in floating point, so only a filter.

    Attributes
    ----------
    one_sided : ndarray, shape (m,), bool
        Rows with one side, a binary column and another one.
    side : ndarray, shape (m,), float64
    least, most : ndarray, shape (m,), float64
        Smallest and largest value of the sum within the bounds.
    switch : ndarray, shape (m,), float64
        Largest size of a coefficient at a binary column.
    switched : ndarray, shape (m,), bool
        Whether that is larger than all other coefficients.
    """

    one_sided: Flags
    side: Floats
    least: Floats
    most: Floats
    switch: Floats
    switched: Flags

    @property
    def may_shrink(self) -> Flags:
        """Rows in which bounds alone make a coefficient of a binary column smaller."""
        with np.errstate(invalid="ignore"):
            reach = self.side + self.switch
            return np.asarray(self.one_sided & (self.most < reach - 1e-9 * np.abs(reach)))

    @property
    def may_split(self) -> Flags:
        """Rows in which a switch leaves the other columns next to no choice."""
        with np.errstate(invalid="ignore"):
            room = self.side - self.least
            return np.asarray(self.one_sided & self.switched & (room < 2 * self.switch))


def columns_of(form: LinearForm) -> Columns:
    """Read the bounds of all columns."""
    lower, upper = _rounded_bounds(form)
    known = {
        value: _exact(value) if math.isfinite(value) else None
        for value in np.unique(np.append(lower, upper)).tolist()
    }
    return Columns(
        lower=[known[value] for value in lower.tolist()],
        upper=[known[value] for value in upper.tolist()],
        integer=form.integer,
        binary=form.integer & (lower == 0) & (upper == 1),
    )


def outlook_of(form: LinearForm) -> Outlook:
    """Look at all rows at once."""
    lower, upper = _rounded_bounds(form)
    binary = form.integer & (lower == 0) & (upper == 1)
    low_side, high_side = np.isfinite(form.row_lower), np.isfinite(form.row_upper)
    sign = np.where(high_side, 1.0, -1.0)
    by_row = form.matrix.tocsr()
    m, start, length = form.shape[0], by_row.indptr[:-1], np.diff(by_row.indptr)
    full = np.flatnonzero(length)
    data = by_row.data * np.repeat(sign, length)
    at_low, at_high = data * lower[by_row.indices], data * upper[by_row.indices]
    sizes, at_binary = np.abs(data), binary[by_row.indices]
    switch, largest, often = np.zeros(m), np.zeros(m), np.zeros(m, np.int64)
    least, most = np.zeros(m), np.zeros(m)
    if full.size:
        at = start[full]
        least[full] = np.add.reduceat(np.minimum(at_low, at_high), at)
        most[full] = np.add.reduceat(np.maximum(at_low, at_high), at)
        switch[full] = np.maximum.reduceat(np.where(at_binary, sizes, 0.0), at)
        largest[full] = np.maximum.reduceat(sizes, at)
        often[full] = np.add.reduceat((sizes == np.repeat(largest, length)).astype(np.int64), at)
    side = sign * np.where(high_side, form.row_upper, form.row_lower)
    return Outlook(
        one_sided=(low_side != high_side) & (switch > 0) & (length > 1),
        side=side,
        least=least,
        most=most,
        switch=switch,
        switched=(switch == largest) & (often == 1),
    )


def lines_of(form: LinearForm, rows: Flags) -> Iterator[Line]:
    """Read the chosen rows, each of which has exactly one side."""
    by_row = form.matrix.tocsr()
    known: dict[float, Exact] = {}
    for i in np.flatnonzero(rows).tolist():
        here = slice(by_row.indptr[i], by_row.indptr[i + 1])
        upper = math.isfinite(form.row_upper[i])
        sign = 1 if upper else -1
        side = float(form.row_upper[i] if upper else form.row_lower[i])
        terms = {}
        for j, entry in zip(by_row.indices[here].tolist(), by_row.data[here].tolist(), strict=True):
            if entry not in known:
                known[entry] = _exact(entry)
            terms[j] = sign * known[entry]
        yield Line(i, sign, terms, sign * _exact(side))


def size(value: Exact) -> Exact:
    """Return the absolute value."""
    return value if value >= 0 else -value


def float_above(value: Exact) -> float:
    """Return the smallest float that is not below an exact number.

    Examples
    --------
    >>> float_above(Fraction(1, 2)), Fraction(float_above(Fraction(1, 3))) > Fraction(1, 3)
    (0.5, True)
    """
    near = float(value)
    return near if near >= value else math.nextafter(near, math.inf)


def float_below(value: Exact) -> float:
    """Return the largest float that is not above an exact number."""
    return -float_above(-value)


def _exact(value: float) -> Exact:
    """Read a float as a whole number or a simple fraction."""
    if value == int(value):
        return int(value)
    fraction = simplest_fraction(value)
    return fraction.numerator if fraction.denominator == 1 else fraction


def _rounded_bounds(form: LinearForm) -> tuple[Floats, Floats]:
    """Bounds, those of integer columns rounded inwards."""
    lower = np.where(form.integer, np.ceil(snap(form.col_lower)), form.col_lower)
    return lower, np.where(form.integer, np.floor(snap(form.col_upper)), form.col_upper)

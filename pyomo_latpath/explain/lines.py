"""One-sided rows of a form, read exactly as sum of coefficient times column <= side."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from ..forms.linear_form import Flags, LinearForm
from ..forms.numbers import simplest_fraction, snap

#: An exact limit; None where there is none.
Limit = Fraction | None


@dataclass(frozen=True, eq=False)
class Columns:
    """Bounds of columns, exact, those of integer columns rounded inwards.

    Attributes
    ----------
    lower, upper : list of Fraction or None, length n
    integer, binary : ndarray, shape (n,), bool
        Binary columns may be 0 or 1, and nothing else.
    """

    lower: list[Limit]
    upper: list[Limit]
    integer: Flags
    binary: Flags

    def most(self, column: int, coefficient: Fraction) -> Limit:
        """Largest value of coefficient times column; None where it has no limit."""
        limit = self.upper[column] if coefficient > 0 else self.lower[column]
        return None if limit is None else coefficient * limit

    def least(self, column: int, coefficient: Fraction) -> Limit:
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
    terms : dict of int to Fraction
        Column to coefficient.
    side : Fraction
    """

    row: int
    sign: int
    terms: dict[int, Fraction]
    side: Fraction


def columns_of(form: LinearForm) -> Columns:
    """Read the bounds of all columns."""
    lower = np.where(form.integer, np.ceil(snap(form.col_lower)), form.col_lower)
    upper = np.where(form.integer, np.floor(snap(form.col_upper)), form.col_upper)
    known = {
        value: simplest_fraction(value) if math.isfinite(value) else None
        for value in np.unique(np.append(lower, upper)).tolist()
    }
    return Columns(
        lower=[known[value] for value in lower.tolist()],
        upper=[known[value] for value in upper.tolist()],
        integer=form.integer,
        binary=form.integer & (lower == 0) & (upper == 1),
    )


def lines_of(form: LinearForm, columns: Columns) -> Iterator[Line]:
    """Yield the rows that have exactly one side, and a binary column beside others."""
    by_row = form.matrix.tocsr()
    binaries = (abs(by_row) > 0) @ columns.binary.astype(np.int64)
    lower, upper = np.isfinite(form.row_lower), np.isfinite(form.row_upper)
    known: dict[float, Fraction] = {}
    for i in np.flatnonzero((lower != upper) & (binaries > 0)).tolist():
        here = slice(by_row.indptr[i], by_row.indptr[i + 1])
        if here.stop - here.start < 2:
            continue
        sign = 1 if upper[i] else -1
        side = float(form.row_upper[i] if upper[i] else form.row_lower[i])
        terms = {}
        for j, entry in zip(by_row.indices[here].tolist(), by_row.data[here].tolist(), strict=True):
            if entry not in known:
                known[entry] = simplest_fraction(entry)
            terms[j] = sign * known[entry]
        yield Line(i, sign, terms, sign * simplest_fraction(side))


def float_above(value: Fraction) -> float:
    """Return the smallest float that is not below a fraction.

    Examples
    --------
    >>> float_above(Fraction(1, 2)), Fraction(float_above(Fraction(1, 3))) > Fraction(1, 3)
    (0.5, True)
    """
    near = float(value)
    return near if Fraction(near) >= value else math.nextafter(near, math.inf)


def float_below(value: Fraction) -> float:
    """Return the largest float that is not above a fraction."""
    return -float_above(-value)

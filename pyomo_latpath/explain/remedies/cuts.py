"""Chvátal-Gomory cuts: sums of rows and bounds, rounded down, with the multipliers that prove them.

Rows and bounds of integer columns are added up with multipliers such that all coefficients come
out whole. Then the left side is whole at every whole plan, so the right side may be rounded down
(Gomory 1958; Chvátal 1973; Schrijver 1986, section 23.1). With multipliers 1/2 these are the
{0, 1/2} cuts of Caprara and Fischetti (1996): the odd-cycle inequalities and Edmonds's (1965)
odd-set inequalities of matchings are among them.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np
import scipy.sparse as sp

from ...forms.linear_form import Flags, Floats
from ...forms.normalise import NormalForm


@dataclass(frozen=True, eq=False)
class System:
    """Rows L <= A x <= U with whole entries, and whole bounds, from which cuts are derived.

    Attributes
    ----------
    matrix : scipy.sparse.csr_array, shape (m, n), float64
        Whole numbers below 2**53 in every row that has a finite side.
    row_lower, row_upper : ndarray, shape (m,), float64
    col_lower, col_upper : ndarray, shape (n,), float64
        Whole or infinite.
    integer : ndarray, shape (n,), bool
    cuts : int
        So many of the last rows are cuts themselves.
    """

    matrix: sp.csr_array
    row_lower: Floats
    row_upper: Floats
    col_lower: Floats
    col_upper: Floats
    integer: Flags
    cuts: int = 0

    def terms(self, row: int) -> list[tuple[int, int]]:
        """Return the columns of a row with their coefficients."""
        here = slice(self.matrix.indptr[row], self.matrix.indptr[row + 1])
        columns = self.matrix.indices[here].tolist()
        return list(zip(columns, map(int, self.matrix.data[here].tolist()), strict=True))

    def with_cuts(self, cuts: Sequence[Cut]) -> System:
        """Return the system with cuts as further rows, in their order."""
        if not cuts:
            return self
        return replace(
            self,
            matrix=sp.vstack([self.matrix, rows_of(cuts, self.integer.size)], format="csr"),
            row_lower=np.append(self.row_lower, np.full(len(cuts), -np.inf)),
            row_upper=np.append(self.row_upper, [float(cut.side) for cut in cuts]),
            cuts=self.cuts + len(cuts),
        )


@dataclass(frozen=True)
class Cut:
    """An inequality, sum of coefficient times column <= side, and its proof.

    Attributes
    ----------
    columns, coefficients : tuple of int, length k
        Coefficients are not 0.
    side : int
    rows : tuple of int
        Rows that are added up: those of the system, then the cuts before this one.
    row_multipliers : tuple of Fraction
        Above 0 for the row's upper side, below 0 for its lower side.
    bounds : tuple of int
        Columns whose bounds are added.
    bound_multipliers : tuple of Fraction
        Above 0 for the upper bound, below 0 for the lower one.
    """

    columns: tuple[int, ...]
    coefficients: tuple[int, ...]
    side: int
    rows: tuple[int, ...]
    row_multipliers: tuple[Fraction, ...]
    bounds: tuple[int, ...]
    bound_multipliers: tuple[Fraction, ...]


def rows_of(cuts: Sequence[Cut], n: int) -> sp.csr_array:
    """Return the left sides of cuts as a sparse matrix with n columns."""
    data = [float(a) for cut in cuts for a in cut.coefficients]
    places = [j for cut in cuts for j in cut.columns]
    starts = np.concatenate(([0], np.cumsum([len(cut.columns) for cut in cuts]))).astype(np.int64)
    return sp.csr_array((data, places, starts), shape=(len(cuts), n))


def system_of(normal: NormalForm) -> System:
    """Return the rows and bounds of a normalised form that cuts may be derived from.

    Rows that hold a continuous column, or entries or sides that are not whole, keep their
    place without a side.
    """
    by_row = sp.csr_array(normal.matrix)
    row_of = np.repeat(np.arange(normal.rows.size), np.diff(by_row.indptr))
    usable = normal.whole_rows & normal.whole_sides
    usable[row_of[~normal.integer[by_row.indices]]] = False
    return System(
        matrix=by_row,
        row_lower=np.where(usable, normal.row_lower, -np.inf),
        row_upper=np.where(usable, normal.row_upper, np.inf),
        col_lower=np.where(normal.integer, normal.col_lower, -np.inf),
        col_upper=np.where(normal.integer, normal.col_upper, np.inf),
        integer=normal.integer,
    )


def halved(system: System, sides: Iterable[tuple[int, int]], x: Floats) -> Cut | None:
    """Add up rows, halve and round down.

    Columns with an odd sum get half of the bound that is nearer at `x`; with lower bounds 0
    that rounds their coefficients down.

    Parameters
    ----------
    system : System
    sides : iterable of (row, sign)
        Sign 1 for the upper side of a row, -1 for the lower one; these sides are finite.
    x : ndarray, shape (n,), float64
        The point that the cut is meant to cut off; any other leads to a valid cut, too.

    Returns
    -------
    Cut or None
        None where the sum is even, so that rounding gains nothing, where no column is left in
        it, or where an odd column has no bound.

    Examples
    --------
    Three pairs of wheels, of which each shares a van with either other:

    >>> system = System(sp.csr_array([[1.0, 1, 0], [0, 1, 1], [1, 0, 1]]), np.full(3, -np.inf),
    ...                 np.ones(3), np.zeros(3), np.ones(3), np.full(3, True))
    >>> cut = halved(system, [(0, 1), (1, 1), (2, 1)], np.full(3, 0.5))
    >>> cut.columns, cut.coefficients, cut.side
    ((0, 1, 2), (1, 1, 1), 1)
    """
    used = list(sides)
    total: dict[int, int] = {}
    side = 0
    for row, sign in used:
        side += sign * int((system.row_upper if sign > 0 else system.row_lower)[row])
        for column, entry in system.terms(row):
            total[column] = total.get(column, 0) + sign * entry
    bounds: list[tuple[int, int]] = []
    for column in sorted(j for j, entry in total.items() if entry % 2):
        low, high = system.col_lower[column], system.col_upper[column]
        sign = -1 if x[column] - low <= high - x[column] else 1
        bound = low if sign < 0 else high
        if not (math.isfinite(bound) and system.integer[column]):
            return None
        bounds.append((column, sign))
        total[column] += sign
        side += sign * int(bound)
    total = {j: entry for j, entry in sorted(total.items()) if entry}
    if side % 2 == 0 or not total:
        return None
    common = math.gcd(*total.values())
    unit = Fraction(1, common)
    return Cut(
        columns=tuple(total),
        coefficients=tuple(entry // common for entry in total.values()),
        side=side // common,
        rows=tuple(row for row, _ in used),
        row_multipliers=tuple(sign * unit for _, sign in used),
        bounds=tuple(column for column, _ in bounds),
        bound_multipliers=tuple(sign * unit for _, sign in bounds),
    )


def follows(system: System, cut: Cut) -> bool:
    """Check a cut by its multipliers alone, in whole numbers: all of them times a common one.

    Parameters
    ----------
    system : System
        With the cuts before this one as further rows (`System.with_cuts`).
    cut : Cut

    Returns
    -------
    bool
        Whether every whole plan of the system satisfies the cut, by its derivation.
    """
    multipliers = (*cut.row_multipliers, *cut.bound_multipliers)
    common = math.lcm(*(multiplier.denominator for multiplier in multipliers))
    left: dict[int, int] = {}
    right = 0
    for row, multiplier in zip(cut.rows, cut.row_multipliers, strict=True):
        side = float((system.row_upper if multiplier > 0 else system.row_lower)[row])
        if not side.is_integer():
            return False
        factor = int(multiplier * common)
        right += factor * int(side)
        for column, entry in system.terms(row):
            left[column] = left.get(column, 0) + factor * entry
    for column, multiplier in zip(cut.bounds, cut.bound_multipliers, strict=True):
        bound = float((system.col_upper if multiplier > 0 else system.col_lower)[column])
        if not bound.is_integer():
            return False
        factor = int(multiplier * common)
        right += factor * int(bound)
        left[column] = left.get(column, 0) + factor
    claimed = dict(zip(cut.columns, cut.coefficients, strict=True))
    return (
        {column: entry for column, entry in left.items() if entry}
        == {column: entry * common for column, entry in claimed.items()}
        and all(isinstance(entry, int) for entry in claimed.values())
        and all(bool(system.integer[column]) for column in claimed)
        and cut.side >= right // common
    )


def excess(cut: Cut, x: Sequence[Fraction] | Floats) -> Fraction | float:
    """By how much a point exceeds the side of a cut; exact for an exact point."""
    return sum(a * x[j] for j, a in zip(cut.columns, cut.coefficients, strict=True)) - cut.side

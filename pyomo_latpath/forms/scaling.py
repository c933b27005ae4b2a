"""Scaling: rows of coprime whole numbers, and continuous columns to go with them.

What is kept of a form's matrix, and its factors, depend on the matrix and on which columns are
integer, but on no side, bound or cost; so forms with one matrix can share them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
import scipy.sparse as sp
from scipy.sparse.csgraph import breadth_first_order, connected_components

from .linear_form import Flags, Floats, LinearForm
from .numbers import EXACT, Integers, read_fractions

#: Denominators up to this one are scaled away in whole arrays; others row by row.
DECIMAL = 100_000
#: Rows whose whole entries would be larger stay as they are: a solver's tolerances are absolute.
LARGEST_ENTRY = 10**7


@dataclass(frozen=True, eq=False)
class ScaledMatrix:
    """The part of a form's matrix that is kept, scaled.

    Attributes
    ----------
    rows, columns : ndarray, shape (m',), (n',), int64
        What is kept: rows with a side and an entry in a kept column.
    sided, constant : ndarray, shape (m,), bool
        Rows with a side, and those of them without an entry in a kept column.
    integer : ndarray, shape (n',), bool
        Which kept columns are integer.
    matrix : scipy.sparse.csc_array, shape (m', n'), float64
    row_num, row_den, col_num, col_den : ndarray, int64
        Factors: matrix = diag(row_num / row_den) A diag(col_num / col_den).
    whole_rows, pure : ndarray, shape (m',), bool
        Rows whose entries are whole; rows that have integer columns only.
    snapped : int
        Entries read as another number nearby.
    """

    rows: Integers
    columns: Integers
    sided: Flags
    constant: Flags
    integer: Flags
    matrix: sp.csc_array
    row_num: Integers
    row_den: Integers
    col_num: Integers
    col_den: Integers
    whole_rows: Flags
    pure: Flags
    snapped: int

    def serves(self, columns: Integers, sided: Flags, integer: Flags) -> bool:
        """Whether `scaled_matrix` would give the same for the same matrix."""
        return (
            np.array_equal(columns, self.columns)
            and np.array_equal(sided, self.sided)
            and np.array_equal(integer, self.integer)
        )


def scaled_matrix(form: LinearForm, columns: Integers, sided: Flags) -> ScaledMatrix:
    """Keep these columns of a form, and the rows with a side that meet them, and scale both.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[0.5, 0.5, 1]], row_lower=0, row_upper=1,
    ...                               col_lower=0, col_upper=1, cost=0)
    >>> scaled_matrix(form, np.array([0, 1]), np.array([True])).matrix.toarray()
    array([[1., 1.]])
    """
    m, n = form.shape
    matrix = form.matrix if columns.size == n else form.matrix[:, columns]
    length = np.bincount(matrix.indices, minlength=m)
    rows = np.flatnonzero((length > 0) & sided)
    matrix = matrix if rows.size == m else matrix[rows, :]
    integer = form.integer[columns]
    factors = _scale(matrix, integer)
    return ScaledMatrix(rows, columns, sided, (length == 0) & sided, integer, *factors)


def _scale(
    matrix: sp.csc_array, integer: Flags
) -> tuple[sp.csc_array, Integers, Integers, Integers, Integers, Flags, Flags, int]:
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
    return scaled, row_num, row_den, col_num, col_den, whole_rows, pure, snapped


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

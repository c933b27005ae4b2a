"""The vertex that belongs to a basis, in exact arithmetic.

The tight rows and the columns off their bounds make a square system. Most of it is triangular
after sorting: a row with one unknown gives its value, a column in one row can wait until the
others are known. The core that is left is solved digit by digit in base p, a large prime
(Dixon 1982, Exact solution of linear equations using p-adic expansions).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from ..forms.linear_form import Floats
from ..forms.normalise import NormalForm
from ..forms.numbers import simplest_fraction
from ..highs import Basis

#: A prime below 2**31, so that products of residues fit 64 bits.
PRIME = 2**31 - 1
#: Largest core and largest system that are looked at, and most digits of a solution.
MOST_CORE, MOST_ROWS, MOST_DIGITS = 1000, 50_000, 256
#: Numbers changed on the way, at most: dense cores are out of reach from a size of 400 on.
MOST_WORK = 2 * 400**3
#: A fraction p/q modulo a number counts if that is so many times as large as p q: of all residues
#: few more than one in so many are such a fraction.
CHANCE = 256

Row = dict[int, Fraction]


def exact_vertex(piece: NormalForm, basis: Basis) -> list[Fraction] | None:
    """Compute a vertex exactly and check that it is feasible.

    Parameters
    ----------
    piece : NormalForm
    basis : Basis

    Returns
    -------
    list of Fraction, length n, or None
        In scaled units. None if the basis is singular, its point no vertex or not feasible, or
        the system too large.
    """
    inside = np.flatnonzero(basis.col_status == 1)
    tight = np.flatnonzero(basis.row_status != 1)
    if inside.size != tight.size or inside.size > MOST_ROWS:
        return None
    at_upper = basis.col_status == 2
    resting = np.where(at_upper, piece.col_upper, piece.col_lower)
    resting[inside] = 0.0
    if not np.isfinite(resting).all():
        return None  # a free column that rests at no bound of its own: the point is no vertex
    values = _fractions(resting)
    columns = {int(j): k for k, j in enumerate(inside)}
    rows, right = [], []
    by_row = piece.matrix.tocsr()
    for i in tight.tolist():
        upper = basis.row_status[i] == 2 or not math.isfinite(piece.row_lower[i])
        side = simplest_fraction(float(piece.row_upper[i] if upper else piece.row_lower[i]))
        here = slice(by_row.indptr[i], by_row.indptr[i + 1])
        row: Row = {}
        for j, entry in zip(by_row.indices[here].tolist(), by_row.data[here].tolist(), strict=True):
            if j in columns:
                row[columns[j]] = simplest_fraction(entry)
            elif values[j]:
                side -= simplest_fraction(entry) * values[j]
        rows.append(row)
        right.append(side)
    found = solve_square(rows, right)
    if found is None:
        return None
    for j, value in zip(inside.tolist(), found, strict=True):
        values[j] = value
    return values if _feasible(piece, values) else None


def solve_square(rows: Sequence[Row], right: Sequence[Fraction]) -> list[Fraction] | None:
    """Solve a square sparse system exactly.

    Parameters
    ----------
    rows : sequence of k dicts
        Column to entry, nonzero.
    right : sequence of k Fraction

    Returns
    -------
    list of k Fraction, or None
        None if the system is singular (or so modulo a prime), or its core too large.

    Examples
    --------
    >>> one = Fraction(1)
    >>> solve_square([{0: one, 1: one}, {0: one, 1: -one}], [one, one * 0])
    [Fraction(1, 2), Fraction(1, 2)]
    """
    sorted_out = _triangles(rows)
    if sorted_out is None:
        return None
    first, last, core_rows, core_columns = sorted_out
    value: dict[int, Fraction] = {}
    for i, j in first:
        value[j] = _solved_for(rows[i], right[i], j, value)
    place = {j: k for k, j in enumerate(core_columns)}
    core, sides = [], []
    for i in core_rows:
        side = right[i] - sum(a * value[j] for j, a in rows[i].items() if j not in place)
        inner = {place[j]: a for j, a in rows[i].items() if j in place}
        common = math.lcm(side.denominator, *(a.denominator for a in inner.values()))
        core.append({j: int(a * common) for j, a in inner.items()})
        sides.append(int(side * common))
    solved = _solve_core(core, sides)
    if solved is None:
        return None
    value.update(zip(core_columns, solved, strict=True))
    for i, j in reversed(last):
        value[j] = _solved_for(rows[i], right[i], j, value)
    return [value[j] for j in range(len(rows))]


def _solved_for(row: Row, side: Fraction, column: int, value: dict[int, Fraction]) -> Fraction:
    return (side - sum(a * value[j] for j, a in row.items() if j != column)) / row[column]


Pivots = list[tuple[int, int]]


def _triangles(rows: Sequence[Row]) -> tuple[Pivots, Pivots, list[int], list[int]] | None:
    """Sort a system: pivots to solve first, those to solve last (reversed), the core."""
    unknown = [set(row) for row in rows]
    holders: list[set[int]] = [set() for _ in rows]
    for i, row in enumerate(rows):
        for j in row:
            holders[j].add(i)
    first: Pivots = []
    last: Pivots = []
    done_rows: set[int] = set()
    done_columns: set[int] = set()
    waiting = [(i, True) for i, those in enumerate(unknown) if len(those) <= 1]
    waiting += [(j, False) for j, those in enumerate(holders) if len(those) <= 1]
    while waiting:
        line, is_row = waiting.pop()
        if line in (done_rows if is_row else done_columns):
            continue
        if not (unknown[line] if is_row else holders[line]):
            return None
        i, j = (line, min(unknown[line])) if is_row else (min(holders[line]), line)
        (first if is_row else last).append((i, j))
        done_rows.add(i)
        done_columns.add(j)
        for column in unknown[i]:
            holders[column].discard(i)
            if len(holders[column]) <= 1:
                waiting.append((column, False))
        for other in holders[j]:
            unknown[other].discard(j)
            if len(unknown[other]) <= 1:
                waiting.append((other, True))
    core_rows = [i for i in range(len(rows)) if i not in done_rows]
    return first, last, core_rows, [j for j in range(len(rows)) if j not in done_columns]


def _solve_core(core: Sequence[dict[int, int]], right: Sequence[int]) -> list[Fraction] | None:
    """Solve a whole-number system by its solution's digits in base p, lowest first."""
    size = len(core)
    inverse = _inverse_modulo_prime(core) if size <= MOST_CORE else None
    if inverse is None:
        return None
    value, power, residue = [0] * size, 1, list(right)
    most = min(MOST_DIGITS, MOST_WORK // max(1, size**2))
    for count in range(1, most + 1):
        modulo = np.array([rest % PRIME for rest in residue], dtype=np.int64)
        digit = ((inverse * modulo % PRIME).sum(axis=1) % PRIME).tolist()
        value = [v + d * power for v, d in zip(value, digit, strict=True)]
        power *= PRIME
        residue = [
            (rest - sum(a * digit[j] for j, a in row.items())) // PRIME
            for rest, row in zip(residue, core, strict=True)
        ]
        if count & (count - 1) == 0 or count == most:
            found = _as_fractions(value, power)
            if found is not None and _solves(core, right, found):
                return found
    return None


def _inverse_modulo_prime(core: Sequence[dict[int, int]]) -> NDArray[np.int64] | None:
    """Inverse by Gauss-Jordan elimination; None if singular modulo the prime, or too much work."""
    size, work = len(core), 0
    table = np.hstack((np.zeros((size, size), np.int64), np.eye(size, dtype=np.int64)))
    for i, row in enumerate(core):
        for j, a in row.items():
            table[i, j] = a % PRIME
    for k in range(size):
        pivots = np.flatnonzero(table[k:, k])
        if not pivots.size or work > MOST_WORK:
            return None
        table[[k, k + pivots[0]]] = table[[k + pivots[0], k]]
        table[k] = table[k] * pow(int(table[k, k]), -1, PRIME) % PRIME
        others = np.flatnonzero(table[:, k])
        others = others[others != k]
        work += others.size * 2 * size
        table[others] = (table[others] - table[others, k][:, None] * table[k]) % PRIME
    return table[:, size:]


def _solves(core: Sequence[dict[int, int]], right: Sequence[int], found: list[Fraction]) -> bool:
    sums = (sum(a * found[j] for j, a in row.items()) for row in core)
    return all(total == side for total, side in zip(sums, right, strict=True))


def _as_fractions(values: list[int], modulus: int) -> list[Fraction] | None:
    """Values as fractions; None at the first one that chance might have given as well."""
    found: list[Fraction] = []
    for value in values:
        fraction = _as_fraction(value, modulus)
        if abs(fraction.numerator) * fraction.denominator * CHANCE > modulus:
            return None
        found.append(fraction)
    return found


def _as_fraction(value: int, modulus: int) -> Fraction:
    """The fraction p/q with small p and q that is `value` modulo `modulus` (Euclid's algorithm)."""
    limit = math.isqrt(modulus // 2)
    (last, rest), (before, factor) = (modulus, value % modulus), (0, 1)
    while rest > limit:
        quotient = last // rest
        last, rest = rest, last - quotient * rest
        before, factor = factor, before - quotient * factor
    return Fraction(rest, factor)


def _fractions(values: Floats) -> list[Fraction]:
    """Values as fractions; equal ones share one object, as most are 0 or 1."""
    known = {value: simplest_fraction(value) for value in np.unique(values).tolist()}
    return [known[value] for value in values.tolist()]


def _feasible(piece: NormalForm, values: list[Fraction]) -> bool:
    """Whether a point satisfies all rows and bounds, exactly."""
    by_row = piece.matrix.tocsr()
    entry = dict(
        zip(np.unique(by_row.data).tolist(), _fractions(np.unique(by_row.data)), strict=True)
    )
    nonzero = np.array([value != 0 for value in values], dtype=np.bool_)
    activity = [Fraction(0)] * piece.rows.size
    hit = np.flatnonzero(nonzero[by_row.indices])
    row_of = np.searchsorted(by_row.indptr, hit, side="right") - 1
    columns, data = by_row.indices[hit].tolist(), by_row.data[hit].tolist()
    for i, j, a in zip(row_of.tolist(), columns, data, strict=True):
        activity[i] += entry[a] * values[j]
    return all(
        (not math.isfinite(low) or simplest_fraction(low) <= value)
        and (not math.isfinite(high) or value <= simplest_fraction(high))
        for lower, upper, points in (
            (piece.row_lower, piece.row_upper, activity),
            (piece.col_lower, piece.col_upper, values),
        )
        for low, high, value in zip(lower.tolist(), upper.tolist(), points, strict=True)
    )

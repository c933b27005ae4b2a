"""Taking a matrix apart into the summands of sums of order 1, 2 and 3.

What a `Split` claims about total unimodularity (TU) is proven there, signs included; `Summands`
checks it and builds the summands. Nothing is searched for.

Sources: Seymour (1980), Decomposition of regular matroids; Schrijver (1986), Theory of Linear and
Integer Programming, section 19.4; Truemper (1992), Matroid Decomposition, chapter 8.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.sparse as sp

from .certificate_parts import Axis, Step
from .certificate_reading import read_indices, read_pairs, read_value, require
from .forms.numbers import Integers

CROSS: dict[Axis, Axis] = {"row": "column", "column": "row"}
#: Entries of a row by their columns, or of a column by their rows.
Entries = dict[int, int]
#: Entries by row and column.
Corner = dict[tuple[int, int], int]


@dataclass(frozen=True, eq=False)
class Split:
    """A matrix is a sum of two: the lines named here go to the second summand.

    With the lines named here last, let the matrix be [A X; Y B]. Its corners X and Y are products
    of ranks that add up to the order of the sum less one, 0, 1 or 2. For each unit of rank, one
    entry (i, j) of a corner is named. The corner X, say, is the product of its columns a_k at
    the entries' columns, and rows b_k, which are those at the entries' rows times the inverse of
    the square matrix at both. The summand that has A gets the column a_k, the summand that has B
    the row b_k. (Y likewise: columns d_k join B, rows c_k join A.) In a sum of order 3 each
    summand so has two connecting lines, z1 and z2. It gets a column more, z1 + sign z2, where a
    row stands for its unit column:

        order 1             A,                   B
        order 2             [A a],               [b; B]
        order 3, by X only  [A a1 a2 a1+s a2],   [1 b1; s b2; 0 B]
        order 3, by both    [A a a; c 0 s],      [1 0 b; s d d B]

    (here s is the sign, and B's part shows its columns in another order). The second form is that
    of Schrijver (1986), section 19.4; the first is Seymour's sum along a triangle; Truemper (1992),
    section 8.3, has row 0 1 -s in place of column a1+s a2, which has the same minors.

    Theorem: if both summands are TU, so is the whole. Take a square submatrix and cut it in the
    same way, A now having p rows and q columns. If X has rank 1 and Y is zero, its determinant is
    det A det B for p = q, and up to sign det [A a] det [b; B] for p = q + 1; else it is 0. If
    both have rank 1, p = q + 1 and q = p + 1 are like that. For p = q it is x y - x' y', where
    x = det A, x' = det [A a; c 0], y = det B, y' = det [0 b; d B]. If none of these is 0, then
    as x' + s x and y' + s y are minors too, x' = -s x, y' = -s y, and the determinant is 0. If X
    has rank 2, p = q + 2 gives det [A a1 a2] det [b1; b2; B]; and p = q + 1 gives
    x1 y1 + x2 y2, where xk = det [A ak] and yk = det [bk; B]. If none of these is 0, then as
    x1 + s x2 and y2 - s y1 are minors up to sign, x1 = -s x2, y2 = s y1, and it is 0.

    Where the whole is TU, so are the summands of orders 1 and 2, being submatrices up to signs.
    So are those of order 3 for one of both signs if each side links z1 and z2: a shortest
    path from z1 to z2 in the bipartite graph of a side becomes one entry by pivots on it.

    Attributes
    ----------
    rows, columns : ndarray, int64
        What goes to the second summand, a new one; the others stay in the first. Smaller is
        cheaper.
    entries : ndarray, shape (order - 1, 2), int64
        Row and column of each place in a corner; the entry there may be 0.
    sign : int
        1 or -1; it matters for order 3 alone.
    """

    rows: Integers
    columns: Integers
    entries: Integers
    sign: int = 1

    @property
    def order(self) -> int:
        """1, 2 or 3."""
        return len(self.entries) + 1

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        data = {name: getattr(self, name).tolist() for name in ("rows", "columns", "entries")}
        return data | ({"sign": int(self.sign)} if self.order == 3 else {})

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Split:
        """Read what `to_dict` wrote."""
        entries = read_pairs(data, "entries")
        sign = read_value(data, "sign", int) if len(entries) == 2 else 1
        return cls(read_indices(data, "rows"), read_indices(data, "columns"), entries, sign)


class Summands:
    """A matrix on its way into summands, step by step.

    Rows and columns keep their numbers throughout, in whatever summand they are. Connecting lines
    get the next numbers: a row and a column for each of a split's entries, then, if its order is
    3, a column of the first and one of the second summand. The whole is summand 0; each
    split makes one new summand, numbered in turn. A step costs time in proportion to the entries
    of the lines it names, and of the connecting ones. One that raises CertificateError leaves
    things half done.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, int64

    Examples
    --------
    >>> summands = Summands(sp.csc_array([[1, 1, 1], [0, 1, 1], [0, 1, 0]]))
    >>> summands.split(Split(np.array([1, 2]), np.array([1, 2]), np.array([[0, 1]])))
    >>> for k in range(2):
    ...     rows, columns, matrix = summands.summand(k)
    ...     print(rows, columns, matrix.toarray().tolist())
    [0] [0 3] [[1, 1]]
    [1 2 3] [1 2] [[1, 1], [1, 0], [1, 1]]
    """

    def __init__(self, matrix: sp.csc_array) -> None:
        m, n = matrix.shape
        require((np.abs(matrix.data) <= 1).all(), "an entry is not 0, 1 or -1")
        self._rows: list[Entries] = [{} for _ in range(m)]
        self._columns: list[Entries] = [{} for _ in range(n)]
        entries = matrix.tocoo()
        for i, j, v in zip(*(x.tolist() for x in (*entries.coords, entries.data)), strict=True):
            if v:
                self._rows[i][j] = self._columns[j][i] = v
        self._lines: dict[Axis, list[Entries]] = {"row": self._rows, "column": self._columns}
        self._home: dict[Axis, list[int]] = {"row": [0] * m, "column": [0] * n}
        self._members: list[dict[Axis, set[int]]] = [
            {"row": set(range(m)), "column": set(range(n))}
        ]

    def __len__(self) -> int:
        return len(self._members)

    def summand(self, k: int) -> tuple[Integers, Integers, sp.csc_array]:
        """Numbers of a summand's rows and columns, both ascending, and its matrix along these."""
        rows, columns = (sorted(self._members[k][axis]) for axis in ("row", "column"))
        place = {row: p for p, row in enumerate(rows)}
        lines = [sorted(self._columns[column].items()) for column in columns]
        start = np.cumsum([0, *map(len, lines)])
        index = np.array([place[i] for line in lines for i, _ in line], np.int64)
        value = np.array([v for line in lines for _, v in line], np.int64)
        matrix = sp.csc_array((value, index, start), shape=(len(rows), len(columns)))
        return np.array(rows, np.int64), np.array(columns, np.int64), matrix

    def take(self, step: Split | Step) -> None:
        """Take a step of either sort."""
        if isinstance(step, Split):
            self.split(step)
        else:
            self.drop(step)

    def drop(self, step: Step) -> None:
        """Leave out a zero or unit line or a copy; raises CertificateError if it is none."""
        axis, line, reason, of, sign = step
        home, entries = self._home_of(axis, line), self._lines[axis][line]
        if reason == "zero":
            require(not entries, f"{axis} {line} is not zero")
        elif reason == "unit":
            require([abs(v) for v in entries.values()] == [1], f"{axis} {line} is no unit line")
        else:
            require(reason == "copy", f"unknown reason {reason!r}")
            require(of != line and self._home_of(axis, of) == home, f"no {axis} {of} beside {line}")
            same = entries == {k: sign * v for k, v in self._lines[axis][of].items()}
            require(same and abs(sign) == 1, f"{axis} {line} is no copy of {axis} {of}")
        for cross in entries:
            del self._lines[CROSS[axis]][cross][line]
        entries.clear()
        self._members[home][axis].remove(line)
        self._home[axis][line] = -1

    def split(self, split: Split) -> None:
        """Move lines to a new summand, and connect; raises CertificateError if it is no sum."""
        require(split.order <= 3, "the order of a sum is above 3")
        require(split.order < 3 or split.sign in (1, -1), "the sign of a sum is not 1 or -1")
        first, second = self._move(split)
        corners = self._cut_corners(split)
        places = [(i, j) for i, j in split.entries.tolist()]
        sides = {(first, second): 0, (second, first): 1}
        homes = [(self._home_of("row", i), self._home_of("column", j)) for i, j in places]
        found = [sides.get(home) for home in homes]
        require(None not in found, "a connecting entry is in no corner")
        factors: dict[tuple[int, int], tuple[Entries, Entries]] = {}
        for k, corner in enumerate(corners):
            here = [place for place, at in zip(places, found, strict=True) if at == k]
            factors |= dict(zip(here, _factors(corner, here), strict=True))
        links: dict[int, list[Entries]] = {first: [], second: []}
        for (i, j), (column, row) in ((place, factors[place]) for place in places):
            above, below = self._home["row"][i], self._home["column"][j]
            links[above].append(column)
            links[below].append({self._add("row", below, row): 1})
            self._add("column", above, column)
        if split.order == 3:
            for home, (z1, z2) in links.items():
                third = {i: z1.get(i, 0) + split.sign * z2.get(i, 0) for i in z1 | z2}
                self._add("column", home, {i: v for i, v in third.items() if v})

    def _home_of(self, axis: Axis, line: int) -> int:
        homes = self._home[axis]
        there = 0 <= line < len(homes) and homes[line] >= 0
        require(there, f"there is no {axis} {line}")
        return homes[line]

    def _move(self, split: Split) -> tuple[int, int]:
        """Give the lines of a split a new home."""
        named: list[tuple[Axis, int]] = [("row", i) for i in split.rows.tolist()]
        named += [("column", j) for j in split.columns.tolist()]
        homes = {self._home_of(axis, line) for axis, line in named}
        require(len(homes) == 1, "the lines of a summand are none, or of several summands")
        first, second = homes.pop(), len(self._members)
        self._members.append({"row": set(), "column": set()})
        for axis, line in named:
            require(self._home[axis][line] == first, f"{axis} {line} is named twice")
            self._home[axis][line] = second
            self._members[first][axis].remove(line)
            self._members[second][axis].add(line)
        return first, second

    def _cut_corners(self, split: Split) -> tuple[Corner, Corner]:
        """Take out what rows and columns of different summands share."""
        row_home, column_home = self._home["row"], self._home["column"]
        upper: Corner = {}
        lower: Corner = {}
        for j in split.columns.tolist():
            apart = [i for i in self._columns[j] if row_home[i] != column_home[j]]
            upper |= {(i, j): self._columns[j].pop(i) for i in apart}
        for i in split.rows.tolist():
            apart = [j for j in self._rows[i] if row_home[i] != column_home[j]]
            lower |= {(i, j): self._rows[i].pop(j) for j in apart}
        for i, j in upper:
            del self._rows[i][j]
        for i, j in lower:
            del self._columns[j][i]
        return upper, lower

    def _add(self, axis: Axis, home: int, entries: Entries) -> int:
        """Append a line; returns its number."""
        small = all(abs(value) == 1 for value in entries.values())
        require(small, "a connecting line has an entry other than 0, 1 and -1")
        new = len(self._lines[axis])
        self._lines[axis].append(dict(entries))
        self._home[axis].append(home)
        self._members[home][axis].add(new)
        for cross, value in entries.items():
            self._lines[CROSS[axis]][cross][new] = value
        return new


def _factors(corner: Corner, places: list[tuple[int, int]]) -> list[tuple[Entries, Entries]]:
    """Columns and rows whose products add up to a corner, from its lines through the places."""
    columns = [{i: v for (i, j), v in corner.items() if j == place[1]} for place in places]
    rows = [{j: v for (i, j), v in corner.items() if i == place[0]} for place in places]
    square = [[column.get(place[0], 0) for column in columns] for place in places]
    if len(places) == 2:
        (p, q), (r, s) = square
        det, first, second = p * s - q * r, *rows
        rows = [_mix(det * s, first, -det * q, second), _mix(-det * r, first, det * p, second)]
    else:
        det = square[0][0] if places else 1
        rows = [_mix(det, row, 0, {}) for row in rows]
    require(abs(det) == 1, "connecting entries do not span a corner of the matrix")
    left, right = _tuples(columns), _tuples(rows)
    nothing = (0,) * len(places)
    counts = [Counter(side.values()).items() for side in (left, right)]
    nonzeros = sum(p * q for u, p in counts[0] for v, q in counts[1] if _dot(u, v))
    same = all(
        _dot(left.get(i, nothing), right.get(j, nothing)) == v for (i, j), v in corner.items()
    )
    require(same and nonzeros == len(corner), "a corner is not the product of connecting lines")
    return list(zip(columns, rows, strict=True))


def _mix(p: int, first: Entries, q: int, second: Entries) -> Entries:
    """The sum p times first and q times second, without zeros."""
    mixed = {k: p * first.get(k, 0) + q * second.get(k, 0) for k in first | second}
    return {k: v for k, v in mixed.items() if v}


def _tuples(lines: list[Entries]) -> dict[int, tuple[int, ...]]:
    """At each place where one of the lines has an entry, the entries of all."""
    return {k: tuple(line.get(k, 0) for line in lines) for own in lines for k in own}


def _dot(u: tuple[int, ...], v: tuple[int, ...]) -> int:
    return sum(x * y for x, y in zip(u, v, strict=True))

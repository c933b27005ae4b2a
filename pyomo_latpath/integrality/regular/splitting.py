"""How a matrix is taken apart at a separation of order 2 or 3.

The forms of the summands are told at `summands.Split`; Seymour (1980), Decomposition of regular
matroids; Schrijver (1986), section 19.4; Truemper (1992), Matroid Decomposition, chapter 8. If a
matrix is totally unimodular (TU), so are its summands here. Those of order 2 are submatrices up to
signs. Those of order 3 are submatrices after pivots within the other side, provided that the
other side has a minor with both connecting lines and their sum, which six elements of R12 give.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from ...forms.numbers import Integers
from ...summands import Split
from .minors import csc_of
from .separation import Bits, adjacency, spread

#: Entries from -2 to 2.
Table = NDArray[np.int8]


class Contradiction(Exception):
    """Some lines are not TU.

    Attributes
    ----------
    lines : frozenset of int
    minimal : bool
        Whether all smaller sets are known to be TU.
    """

    def __init__(self, lines: Iterable[int], minimal: bool = False) -> None:
        super().__init__("not totally unimodular")
        self.lines = frozenset(map(int, lines))
        self.minimal = minimal


@dataclass(frozen=True, eq=False)
class Summand:
    """A matrix on its way through the decision.

    Attributes
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
    rows, columns : ndarray, int64
        The numbers of its lines in the certificate, ascending.
    behind : tuple of frozenset of int, length m + n
        For each line, rows first, lines of the whole matrix: if a set of lines is not TU here,
        those behind them are not TU there.
    """

    matrix: sp.csc_array
    rows: Integers
    columns: Integers
    behind: tuple[frozenset[int], ...]

    def restricted(self, rows: Integers, columns: Integers) -> Summand:
        """The summand on some of its rows and columns."""
        matrix = self.matrix[rows, :][:, columns].tocsc()
        lines = [*rows.tolist(), *(self.rows.size + columns).tolist()]
        behind = tuple(self.behind[line] for line in lines)
        return Summand(matrix, self.rows[rows], self.columns[columns], behind)

    def all_behind(self, lines: Iterable[int]) -> frozenset[int]:
        """What is behind any of some lines."""
        return frozenset[int]().union(*(self.behind[line] for line in lines))


def split_at(
    summand: Summand, side: Bits, next_row: int, next_column: int
) -> tuple[Split, Summand, Summand]:
    """Take a summand apart at a separation of order 2 or 3.

    Parameters
    ----------
    summand : Summand
    side : ndarray, shape (m + n,), bool
        The lines on one side.
    next_row, next_column : int
        The next numbers for connecting lines.

    Returns
    -------
    (Split, Summand, Summand)
        What stays, and what is new.

    Raises
    ------
    Contradiction
        If the signs are not those of a sum.
    """
    table, m = summand.matrix.toarray().astype(np.int8), summand.rows.size
    if not table[np.ix_(side[:m], ~side[m:])].any():
        side = ~side
    here, there = ((np.flatnonzero(s[:m]), np.flatnonzero(s[m:])) for s in (side, ~side))
    upper, lower = _corner(table, here[0], there[1]), _corner(table, there[0], here[1])
    one, two = _Half(table, *here, upper, lower, True), _Half(table, *there, lower, upper, False)
    rank, count, sign = upper.rows.size, upper.rows.size + lower.rows.size, 0
    # What stands for the connecting lines of the other half.
    ends = [*upper.rows, *(m + lower.columns)], [*(m + upper.columns), *lower.rows]
    if count == 2:
        (way, turn), (other_way, sign) = one.way(), two.way()
        if turn != (-sign if rank == 2 else sign):
            raise Contradiction([*way, *other_way])
        ends = one.stand_ins(way, ends[0], upper.plain), two.stand_ins(other_way, ends[1], True)
    row_numbers, column_numbers = next_row + np.arange(count), next_column + np.arange(count + 2)
    split = Split(
        rows=summand.rows[there[0]],
        columns=summand.columns[there[1]],
        entries=np.stack(
            (
                summand.rows[np.concatenate((upper.rows, lower.rows))],
                summand.columns[np.concatenate((upper.columns, lower.columns))],
            ),
            axis=1,
        ),
        sign=sign or 1,
    )
    first = one.summand(
        summand, sign, row_numbers[rank:], column_numbers[[*range(rank), count]], ends[1]
    )
    second = two.summand(
        summand, sign, row_numbers[:rank], column_numbers[[*range(rank, count), count + 1]], ends[0]
    )
    return split, first, second


@dataclass(frozen=True, eq=False)
class _Corner:
    """A corner as the product of some of its columns and of combinations of its rows.

    Attributes
    ----------
    rows, columns : ndarray, shape (r,), int64
        Lines through r entries of it.
    left, right : ndarray, shapes (p, r) and (r, q), int8
        Its columns there; its rows there times the inverse of the square matrix at both.
    plain : bool
        Whether these are its rows, up to signs.
    """

    rows: Integers
    columns: Integers
    left: Table
    right: Table
    plain: bool


def _corner(table: Table, rows: Integers, columns: Integers) -> _Corner:
    """Factor a corner by its rank over GF(2); raises Contradiction if that is not its rank."""
    block = table[np.ix_(rows, columns)]
    rest, i, j = block % 2, list[int](), list[int]()
    while rest.any():
        x, y = np.unravel_index(int(np.argmax(rest)), rest.shape)
        i, j = [*i, int(x)], [*j, int(y)]
        rest = (rest + np.outer(rest[:, y], rest[x])) % 2
    square = block[np.ix_(i, j)]
    left, right = block[:, j], np.rint(np.linalg.inv(square)).astype(np.int8) @ block[i]
    # A subdeterminant that is even, but not 0.
    for p, q in np.argwhere(left @ right != block)[:1].tolist():
        raise Contradiction([*rows[[*i, p]], *(table.shape[0] + columns[[*j, q]])])
    for _, q in np.argwhere(np.abs(right) > 1)[:1].tolist():
        raise Contradiction([*rows[i], *(table.shape[0] + columns[[*j, q]])])
    plain = np.count_nonzero(square) == len(i)
    return _Corner(rows[i], columns[j], left, right, plain)


class _Half:
    """One side of a separation with its connecting lines.

    Attributes
    ----------
    lines : list of int
        Of the matrix that is taken apart, for each line of `table`; -1 for connecting ones.
    table : ndarray, int8
        The side, bordered by the columns of its own corner and the rows of the other.
    links : list of int
        The connecting lines, as lines of `table`.
    """

    def __init__(
        self,
        table: Table,
        rows: Integers,
        columns: Integers,
        own: _Corner,
        other: _Corner,
        columns_first: bool,
    ) -> None:
        down, across = other.right.shape[0], own.left.shape[1]
        self.rows, self.columns = rows, columns
        corner = np.zeros((down, across), np.int8)
        self.table = np.block([[table[np.ix_(rows, columns)], own.left], [other.right, corner]])
        self.lines = [
            *rows.tolist(),
            *[-1] * down,
            *(len(table) + columns).tolist(),
            *[-1] * across,
        ]
        links = [line for line, name in enumerate(self.lines) if name < 0]
        self.links = links[down:] + links[:down] if columns_first else links

    def way(self) -> tuple[list[int], int]:
        """A shortest way between both connecting lines, and the entry it becomes by pivots on it.

        With t pivots, it is the product of all entries on it times (-1)^t.
        """
        start, end = np.array(self.links)
        found = spread(adjacency(self.table != 0), np.array([start]), np.array([end]))
        way = [int(start), *found.way_to(int(end))]
        m, entry = len(self.table), (-1) ** ((len(way) - 3) // 2)
        for x, y in pairwise(way):
            entry *= int(self.table[min(x, y), max(x, y) - m])
        return [self.lines[line] for line in way[1:-1]], entry

    def stand_ins(self, way: list[int], ends: Iterable[int], plain: bool) -> list[int]:
        """Lines that have a minor with both connecting lines and their sum: few, or all."""
        m = len(self.table)
        crossed = sum(link < m for link in self.links) == 1
        few = [*way, *ends]
        if crossed:
            row, column = sorted(self.links)
            apart = np.outer(self.table[:, column - m], self.table[row]) != 0
            places = np.argwhere(apart & (self.table == 0))[:1].tolist()
            few += [self.lines[line] for i, j in places for line in (i, m + j)]
            plain = bool(places)
        return few if plain else [line for line in self.lines if line >= 0]

    def summand(
        self,
        whole: Summand,
        sign: int,
        row_numbers: Integers,
        column_numbers: Integers,
        ends: Iterable[int],
    ) -> Summand:
        """The summand, with z1 + sign z2 as one more column if there is a sign."""
        table = self.table
        m, others = len(table), whole.all_behind(ends)
        behind = [whole.behind[line] if line >= 0 else others for line in self.lines]
        if sign:
            units = np.hstack((np.eye(m, dtype=np.int8), table))
            third = units[:, self.links[0]] + sign * units[:, self.links[1]]
            table = np.hstack((table, third[:, None]))
            behind.append(others)
        numbers = column_numbers if sign else column_numbers[:-1]
        return Summand(
            csc_of(table),
            np.concatenate((whole.rows[self.rows], row_numbers)),
            np.concatenate((whole.columns[self.columns], numbers)),
            tuple(behind),
        )

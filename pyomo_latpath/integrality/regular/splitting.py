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

from ...forms.numbers import Integers
from ...summands import Split
from .separation import Bits, links_of, spread
from .summand import Contradiction, Summand


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
    matrix, m = summand.matrix, summand.rows.size
    if not matrix[:, ~side[m:]][side[:m], :].nnz:
        side = ~side
    here, there = ((np.flatnonzero(s[:m]), np.flatnonzero(s[m:])) for s in (side, ~side))
    upper, lower = _corner(matrix, here[0], there[1]), _corner(matrix, there[0], here[1])
    one = _Half(matrix, here, upper, lower, columns_first=True)
    two = _Half(matrix, there, lower, upper, columns_first=False)
    rank, count = upper.rows.size, upper.rows.size + lower.rows.size
    # What stands for the connecting lines of the other half.
    of_one, of_two = [*upper.rows, *(m + lower.columns)], [*(m + upper.columns), *lower.rows]
    sign = 0
    if count == 2:
        (way, turn), (other_way, sign) = one.way(), two.way()
        if turn != (-sign if rank == 2 else sign):
            raise Contradiction([*way, *other_way])
        of_one = one.stand_ins([*way, *of_one], upper.plain)
        of_two = two.stand_ins([*other_way, *of_two], True)
    rows, columns = next_row + np.arange(count), next_column + np.arange(count + 2)
    first = one.summand(summand, sign, rows[rank:], columns[[*range(rank), count]], of_two)
    second = two.summand(summand, sign, rows[:rank], columns[[*range(rank, count), -1]], of_one)
    corners = [
        np.stack((summand.rows[c.rows], summand.columns[c.columns]), 1) for c in (upper, lower)
    ]
    split = Split(
        rows=summand.rows[there[0]],
        columns=summand.columns[there[1]],
        entries=np.concatenate(corners),
        sign=sign or 1,
    )
    return split, first, second


@dataclass(frozen=True, eq=False)
class _Corner:
    """A corner as the product of some of its columns and of combinations of its rows.

    Attributes
    ----------
    rows, columns : ndarray, shape (r,), int64
        The lines through r places, whose entries are a square matrix of rank r.
    left, right : scipy.sparse.csc_array, shapes (p, r) and (r, q), int64
        Its columns there; its rows there times the inverse of the square matrix.
    plain : bool
        Whether these are its rows, up to signs.
    """

    rows: Integers
    columns: Integers
    left: sp.csc_array
    right: sp.csc_array
    plain: bool


def _corner(matrix: sp.csc_array, rows: Integers, columns: Integers) -> _Corner:
    """Factor a corner by its rank over GF(2); raises Contradiction if that is not its rank."""
    block = matrix[:, columns][rows, :]
    rest, i, j = block, list[int](), list[int]()
    while rest.nnz:
        j.append(int(np.argmax(np.diff(rest.indptr) > 0)))
        i.append(int(rest.indices[rest.indptr[j[-1]]]))
        rest = _nonzero(rest - rest[:, j[-1:]] @ rest[i[-1:], :], modulo=2)
    square = block[i, :][:, j].toarray()
    inverse = np.rint(np.linalg.inv(square)).astype(np.int64)
    left, right = block[:, j], _nonzero(sp.csc_array(inverse) @ block[i, :])
    # A subdeterminant that is even, but not 0, in either case.
    wrong, large = _nonzero(left @ right - block).tocoo(), np.flatnonzero(np.abs(right.data) > 1)
    if wrong.nnz:
        i, j = [*i, int(wrong.row[0])], [*j, int(wrong.col[0])]
    elif large.size:
        j = [*j, int(np.searchsorted(right.indptr, large[0], side="right")) - 1]
    if wrong.nnz or large.size:
        raise Contradiction([*rows[i], *(matrix.shape[0] + columns[j])])
    return _Corner(rows[i], columns[j], left, right, np.count_nonzero(square) == len(i))


def _nonzero(matrix: sp.csc_array, modulo: int = 0) -> sp.csc_array:
    """A canonical matrix, perhaps of remainders."""
    matrix = sp.csc_array(matrix)
    if modulo:
        matrix.data %= modulo
    matrix.eliminate_zeros()
    matrix.sort_indices()
    return matrix


class _Half:
    """One side of a separation with its connecting lines.

    Attributes
    ----------
    lines : list of int
        Of the matrix that is taken apart, for each line of `table`; -1 for connecting ones.
    table : scipy.sparse.csc_array, int64
        The side, bordered by the columns of its own corner and the rows of the other.
    links : list of int
        The connecting lines, z1 first, as lines of `table`.
    """

    def __init__(
        self,
        matrix: sp.csc_array,
        side: tuple[Integers, Integers],
        own: _Corner,
        other: _Corner,
        *,
        columns_first: bool,
    ) -> None:
        self.rows, self.columns = side
        block, down, across = matrix[:, side[1]][side[0], :], other.rows.size, own.columns.size
        table = sp.block_array([[block, own.left], [other.right, sp.csc_array((down, across))]])
        self.table = _nonzero(table.astype(np.int64))
        columns = (matrix.shape[0] + self.columns).tolist()
        self.lines = [*self.rows.tolist(), *[-1] * down, *columns, *[-1] * across]
        links = [line for line, name in enumerate(self.lines) if name < 0]
        self.links = links[down:] + links[:down] if columns_first else links

    def way(self) -> tuple[list[int], int]:
        """A shortest way between both connecting lines, and the entry it becomes by pivots on it.

        With t pivots, that is the product of all entries on it times (-1)^t.
        """
        start, end = self.links
        found = spread(links_of(self.table), np.array([start]), np.array([end]))
        assert found.hit == end
        way = [start, *found.way_to(end)]
        m, entry = self.table.shape[0], (-1) ** ((len(way) - 3) // 2)
        for x, y in pairwise(way):
            entry *= int(self.table[min(x, y), max(x, y) - m])
        return [self.lines[line] for line in way[1:-1]], entry

    def stand_ins(self, few: list[int], enough: bool) -> list[int]:
        """Lines that have a minor with both connecting lines and their sum.

        A few on a way from one to the other have such a minor, if `enough` says so; where a row
        and a column connect, if some entry that both cross is zero. All have, in any case.
        """
        row, column = sorted(self.links)
        m = self.table.shape[0]
        if row < m <= column:
            down = self.table.indices[slice(*self.table.indptr[column - m : column - m + 2])]
            across = np.flatnonzero(self.table[[row], :].toarray())
            crossed = self.table[:, across][down, :]
            gaps = np.flatnonzero(np.diff(crossed.indptr) < down.size)
            enough = gaps.size > 0
            if enough:
                there = crossed.indices[slice(*crossed.indptr[gaps[0] : gaps[0] + 2])]
                gap = int(np.setdiff1d(np.arange(down.size), there)[0])
                few = [*few, self.lines[down[gap]], self.lines[m + across[gaps[0]]]]
        return few if enough else [line for line in self.lines if line >= 0]

    def summand(
        self,
        whole: Summand,
        sign: int,
        rows: Integers,
        columns: Integers,
        stand_ins: Iterable[int],
    ) -> Summand:
        """The summand, with z1 + sign z2 as one more column if there is a sign.

        The connecting lines get the numbers `rows` and `columns`, of which the last is for z1 +
        sign z2.
        """
        table, behind_links = self.table, whole.all_behind(stand_ins)
        behind = [whole.behind[line] if line >= 0 else behind_links for line in self.lines]
        if sign:
            both = sp.hstack((sp.eye_array(table.shape[0], dtype=np.int64), table), format="csc")
            z1, z2 = (both[:, [line]] for line in self.links)
            table = _nonzero(sp.hstack((table, z1 + sign * z2), format="csc"))
            behind.append(behind_links)
        return Summand(
            table,
            np.concatenate((whole.rows[self.rows], rows)),
            np.concatenate((whole.columns[self.columns], columns if sign else columns[:-1])),
            tuple(behind),
        )

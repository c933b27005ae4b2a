"""Sparse rows of whole numbers that add multiples of each other, and the record of that."""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.numbers import Integers

#: Factors below this bound are recorded in 64 bits.
LARGEST = 2**62


class GivenUp(Exception):
    """Time, work or the size of numbers ran out."""


class SparseSystem:
    """Rows of whole numbers of any size, one value per column, with every operation recorded.

    Rows that are `open` are still searched for pivots; for them it is known which have an entry in
    a column.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
    sides : sequence of int, one per row
        They follow the operations.
    open_rows : ndarray, int64
    work : int
        Entries that may be changed before `GivenUp` is raised.
    deadline : Deadline

    Attributes
    ----------
    rows : list of dict
        Entries by column; no zeros.
    holders : list of set
        Open rows with an entry, for each column.
    operations : list of (int, int, int)
        As in `certificates.Unimodular`.
    """

    def __init__(
        self,
        matrix: sp.csc_array,
        sides: Integers,
        open_rows: Integers,
        work: int,
        deadline: Deadline,
    ) -> None:
        m, n = matrix.shape
        self.rows: list[dict[int, int]] = [{} for _ in range(m)]
        self.holders: list[set[int]] = [set() for _ in range(n)]
        self.sides: list[int] = sides.tolist()
        self.open = set(open_rows.tolist())
        self.operations: list[tuple[int, int, int]] = []
        self.work, self.deadline = work, deadline
        entries = matrix.tocoo()
        rows, columns = (places.tolist() for places in entries.coords)
        for i, j, value in zip(rows, columns, entries.data.tolist(), strict=True):
            self.rows[i][j] = value
            if i in self.open:
                self.holders[j].add(i)

    def add(self, row: int, source: int, factor: int) -> list[int]:
        """Add a multiple of a row to another; return the columns in which it lost its entry."""
        self.work -= len(self.rows[source])
        if self.work < 0 or abs(factor) >= LARGEST or self.deadline.passed:
            raise GivenUp
        self.operations.append((row, source, factor))
        self.sides[row] += factor * self.sides[source]
        entries, is_open, lost = self.rows[row], row in self.open, []
        for column, value in self.rows[source].items():
            old = entries.get(column)
            if old is None:
                entries[column] = factor * value
                if is_open:
                    self.holders[column].add(row)
                continue
            new = old + factor * value
            if new:
                entries[column] = new
                continue
            del entries[column]
            lost.append(column)
            if is_open:
                self.holders[column].remove(row)
        return lost

    def divide(self, row: int, divisor: int) -> bool:
        """Divide a row and its side, if all of that is whole."""
        entries = self.rows[row]
        if self.sides[row] % divisor or any(value % divisor for value in entries.values()):
            return False
        self.operations.append((row, row, divisor))
        self.sides[row] //= divisor
        self.rows[row] = {column: value // divisor for column, value in entries.items()}
        return True

    def close(self, row: int) -> None:
        """Search a row for pivots no longer."""
        self.open.remove(row)
        for column in self.rows[row]:
            self.holders[column].remove(row)

    def matrix(self) -> sp.csc_array:
        """The rows as they are; entries must be within 64 bits."""
        start = np.cumsum([0, *map(len, self.rows)])
        columns: NDArray[np.int64] = np.array([j for row in self.rows for j in row], dtype=np.int64)
        values = np.array([value for row in self.rows for value in row.values()], dtype=np.int64)
        shape = len(self.rows), len(self.holders)
        return sp.csr_array((values, columns, start), shape=shape).tocsc()

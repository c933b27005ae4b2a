"""Row operations that turn a basis of a sparse system into unit columns, in whole numbers.

First every open row in turn keeps one column for itself: its pivot. The other open rows lose that
column, so that the basis becomes triangular. Pivots +-1 are taken where they cost least
(Markowitz 1957): of all rows and columns, the one with the fewest entries is looked at first.
Where no entry is +-1, Euclid's algorithm in one column leaves its greatest common divisor in one
row, as in Hermite's normal form (Schrijver 1986, section 4.1). Rows that depend on others become
zero on the way. Then, last pivot first, each row loses the pivots of the later ones.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable

from .sparse_system import SparseSystem

#: Columns with more entries than this are not looked at; their entries are found in the rows.
SHORT = 4


def triangulate(system: SparseSystem) -> list[tuple[int, int]]:
    """Find a pivot in each open row, such that later rows have no entry in its column.

    Parameters
    ----------
    system : SparseSystem
        Changed by row operations alone; rows without a pivot stay open.

    Returns
    -------
    list of (int, int)
        Rows and their columns, in order. Rows without a pivot are zero.

    Raises
    ------
    GivenUp

    Examples
    --------
    >>> import numpy as np
    >>> import scipy.sparse as sp
    >>> from pyomo_latpath.deadline import Deadline
    >>> matrix = sp.csc_array([[2, 3], [3, 5], [5, 8]])
    >>> system = SparseSystem(matrix, np.zeros(3, int), np.arange(3), 1000, Deadline(None))
    >>> triangulate(system), system.rows
    ([(1, 0), (0, 1)], [{1: 1}, {0: -1, 1: -1}, {}])
    """
    lines = _Lines(system)
    pivots = []
    while (pivot := lines.next_unit() or _euclid(system, lines)) is not None:
        row, column = pivot
        pivots.append(pivot)
        unit = system.rows[row][column]
        for other in system.holders[column] - {row}:
            lines.add(other, row, -unit * system.rows[other][column])
        lines.close(row)
    return pivots


class _Queue:
    """Items in the order of small whole numbers; of equal ones, the first comes first.

    So the leaves of a tree go before those that they leave behind: the trees found are shallow,
    and what comes out has few entries.
    """

    def __init__(self) -> None:
        self.least = 0
        self.items: list[deque[int]] = []

    def push(self, number: int, item: int) -> None:
        """Put an item in."""
        while number >= len(self.items):
            self.items.append(deque())
        self.items[number].append(item)
        self.least = min(self.least, number)

    def pop(self) -> tuple[int, int] | None:
        """Take the next item out."""
        while self.least < len(self.items):
            if self.items[self.least]:
                return self.least, self.items[self.least].popleft()
            self.least += 1
        return None


class _Lines:
    """Open rows (0 to m - 1) and columns (m to m + n - 1), those with the fewest entries first.

    A line waits under each count that it has come to since it was last looked at, and is passed
    over where it has another by then. Rows without an entry +-1 are set aside; as each comes back
    when it changes, none is missed. Columns come back when they become shorter.
    """

    def __init__(self, system: SparseSystem) -> None:
        self.system, self.m = system, len(system.rows)
        # Entries in rows that were never open: each will have to be cleared in the end.
        self.beyond = [-len(holders) for holders in system.holders]
        for row in system.rows:
            for column in row:
                self.beyond[column] += 1
        self.waiting, self.aside = _Queue(), _Queue()
        for row in system.open:
            self.waiting.push(self.count(row), row)
        self._look_at(range(len(self.beyond)))

    def count(self, line: int) -> int:
        """Entries of a line; 0 for rows that are closed and columns without an open row."""
        if line < self.m:
            return len(self.system.rows[line]) if line in self.system.open else 0
        holders = self.system.holders[line - self.m]
        return len(holders) + self.beyond[line - self.m] if holders else 0

    def next_unit(self) -> tuple[int, int] | None:
        """The entry +-1 to take next: in a shortest line, the one whose line across is shortest."""
        rows, holders = self.system.rows, self.system.holders
        while (found := self.waiting.pop()) is not None:
            count, line = found
            if not count or count != self.count(line):
                continue
            if line < self.m:
                units = [(line, j) for j, value in rows[line].items() if abs(value) == 1]
                best = min(units, key=lambda unit: self.count(self.m + unit[1]), default=None)
            else:
                j = line - self.m
                units = [(i, j) for i in holders[j] if abs(rows[i][j]) == 1]
                best = min(units, key=lambda unit: len(rows[unit[0]]), default=None)
            if best is not None:
                return best
            if line < self.m:
                self.aside.push(count, line)
        return None

    def next_aside(self) -> int | None:
        """The shortest of all open rows, where none has an entry +-1."""
        while (found := self.aside.pop()) is not None:
            count, row = found
            if count == self.count(row):
                return row
        return None

    def add(self, row: int, source: int, factor: int) -> None:
        """Add a multiple of a row to an open one."""
        self._look_at(self.system.add(row, source, factor))
        self.waiting.push(self.count(row), row)

    def close(self, row: int) -> None:
        """Search a row for pivots no longer."""
        self.system.close(row)
        self._look_at(self.system.rows[row])

    def _look_at(self, columns: Iterable[int]) -> None:
        """Have columns that became shorter looked at again."""
        for column in columns:
            count = self.count(self.m + column)
            if 0 < count <= SHORT:
                self.waiting.push(count, self.m + column)


def _euclid(system: SparseSystem, lines: _Lines) -> tuple[int, int] | None:
    """Leave the greatest common divisor of some column in one row, or stop at an entry +-1."""
    row = lines.next_aside()
    if row is None:
        return None
    entries = system.rows[row]
    column = min(entries, key=lambda j: (len(system.holders[j]), abs(entries[j])))
    holders = system.holders[column]
    while True:
        least = min(holders, key=lambda row: (abs(system.rows[row][column]), row))
        value = system.rows[least][column]
        if abs(value) == 1 or len(holders) == 1:
            return least, column
        for row in holders - {least}:
            # The nearest multiple: what is left is at most half as large.
            lines.add(row, least, -((2 * system.rows[row][column] + value) // (2 * value)))


def diagonalise(system: SparseSystem, pivots: list[tuple[int, int]]) -> bool:
    """Clear each pivot's column of all other entries, and divide rows by pivots beyond +-1.

    Parameters
    ----------
    system : SparseSystem
        As `triangulate` left it.
    pivots : list of (int, int)
        What that returned.

    Returns
    -------
    bool
        False as soon as a number other than 0, 1 and -1 remains, or a division is not whole.

    Raises
    ------
    GivenUp
    """
    pivot_row = {column: row for row, column in pivots}
    own = dict(pivots)
    order = [row for row, _ in reversed(pivots)]
    order += [row for row in range(len(system.rows)) if row not in own]
    for row in order:
        column = own.get(row)
        entries = system.rows[row]
        for other in [j for j in entries if j in pivot_row and j != column]:
            # The other row's pivot is +-1 by now.
            source = pivot_row[other]
            system.add(row, source, -entries[other] * system.rows[source][other])
        pivot = 1 if column is None else abs(entries[column])
        if pivot > 1 and not system.divide(row, pivot):
            return False
        if any(abs(value) > 1 for value in system.rows[row].values()):
            return False
    return True

"""Small minors that are neither graphic nor cographic.

A binary matroid is graphic if the nonzeros of its matrix can be the paths of a tree. If it is
3-connected and neither graphic nor cographic, it has a minor R10, R12, F7 or F7*: Seymour (1980),
Decomposition of regular matroids, with Tutte's list of the smallest matroids that are not
regular. Such a minor is what is left when no line can go any more: lines of the matrix are
dropped, or dropped after a pivot (over GF(2)) that makes a row of a column or a column of a row.
Whatever falls apart on the way is replaced by a 3-connected part that is still neither.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp

from ...deadline import Deadline
from ...forms.numbers import Integers
from ..graph_realisation import is_graphic
from ..reductions import reduce_matrix
from .clock import check_time
from .separation import Bits, smallest_separation


def neither(support: Bits, deadline: Deadline) -> bool:
    """Whether a binary matroid is neither graphic nor cographic."""
    if min(support.shape) < 3:
        return False
    either = any(is_graphic(csc_of(lines), deadline) for lines in (support, support.T))
    check_time(deadline)
    return not either


def csc_of(dense: np.ndarray) -> sp.csc_array:
    """A dense matrix as a canonical sparse one."""
    columns, rows = np.nonzero(dense.T)
    start = np.searchsorted(columns, np.arange(dense.shape[1] + 1))
    return sp.csc_array((dense[rows, columns].astype(np.int64), rows, start), shape=dense.shape)


def smallest(
    order: Callable[[list[int]], list[int]], holds: Callable[[list[int]], bool]
) -> list[int]:
    """Find a smallest set with a property that larger sets inherit.

    The last member of the shortest list with the property is needed in it: it is kept, and what
    comes after it dropped, until what is kept suffices.

    Parameters
    ----------
    order : callable
        Lists all members, given those kept so far; those promising first.
    holds : callable
        Whether a set has the property. The whole has.

    Examples
    --------
    >>> smallest(lambda kept: list(range(9)), lambda some: {3, 5} <= set(some))
    [5, 3]
    """
    kept: list[int] = []
    allowed: set[int] | None = None
    while not holds(kept):
        listed = [x for x in order(kept) if (allowed is None or x in allowed) and x not in kept]
        low, high = 0, 1
        while high < len(listed) and not holds(kept + listed[:high]):
            low, high = high, 2 * high
        high = min(high, len(listed))
        while high - low > 1:
            middle = (low + high) // 2
            if holds(kept + listed[:middle]):
                high = middle
            else:
                low = middle
        kept.append(listed[high - 1])
        allowed = set(listed[: high - 1])
    return kept


def near(support: Bits) -> Callable[[list[int]], list[int]]:
    """List all lines, those near to given ones first."""
    m = support.shape[0]
    beside = [(m + np.flatnonzero(row)).tolist() for row in support]
    beside += [np.flatnonzero(column).tolist() for column in support.T]

    def listed(starts: list[int]) -> list[int]:
        seen = dict.fromkeys(starts)
        queue = deque(starts)
        for other in range(len(beside)):
            while queue:
                for line in beside[queue.popleft()]:
                    if line not in seen:
                        seen[line] = None
                        queue.append(line)
            if other not in seen:
                seen[other] = None
                queue.append(other)
        return list(seen)

    return listed


def rows_and_columns(lines: Iterable[int], m: int) -> tuple[Integers, Integers]:
    """The rows and the columns among some lines, both ascending."""
    chosen = np.array(sorted(lines), dtype=np.int64)
    return chosen[chosen < m], chosen[chosen >= m] - m


def small_core(support: Bits, deadline: Deadline) -> list[int]:
    """Find a smallest set of lines that is neither graphic nor cographic."""

    def holds(lines: list[int]) -> bool:
        return neither(support[np.ix_(*rows_and_columns(lines, len(support)))], deadline)

    return smallest(near(support), holds)


@dataclass(frozen=True, eq=False)
class Minor:
    """A minor of a binary matroid.

    Attributes
    ----------
    support : ndarray, shape (m, n), bool
    rows, columns : ndarray, int64
        Their lines in the matroid; pivots exchange rows and columns.
    pivots : tuple of (int, int)
        In their order: the lines that are exchanged, one a row and one a column.
    """

    support: Bits
    rows: Integers
    columns: Integers
    pivots: tuple[tuple[int, int], ...]

    @property
    def lines(self) -> Integers:
        """Lines in the order of the minor's own."""
        return np.concatenate((self.rows, self.columns))

    def restricted(self, rows: Integers, columns: Integers) -> Minor:
        """The minor on some of the rows and columns."""
        support = self.support[np.ix_(rows, columns)]
        return Minor(support, self.rows[rows], self.columns[columns], self.pivots)

    def pivoted(self, row: int, column: int) -> Minor:
        """The minor after a pivot at one of its ones."""
        rows, columns = self.rows.copy(), self.columns.copy()
        pivots = (*self.pivots, (int(rows[row]), int(columns[column])))
        rows[row], columns[column] = columns[column], rows[row]
        return Minor(pivoted(self.support, row, column), rows, columns, pivots)


def pivoted(support: Bits, row: int, column: int) -> Bits:
    """Exchange a row and a column over GF(2)."""
    change = np.outer(support[:, column], support[row])
    change[row], change[:, column] = False, False
    return support ^ change


def small_minor(minor: Minor, deadline: Deadline) -> Minor:
    """Find a minor of at most 12 lines that is 3-connected and neither graphic nor cographic.

    If it is regular, it is R10 or, with 12 lines, R12.

    Parameters
    ----------
    minor : Minor
        It is 3-connected and neither itself.
    deadline : Deadline
    """
    needed: set[int] = set()
    while minor.lines.size > 12:
        line = next(x for x in minor.lines.tolist() if x not in needed)
        smaller = (_rigid_part(trial, deadline) for trial in _without(minor, line))
        found = next((part for part in smaller if part is not None), None)
        if found is None:
            needed.add(line)
        else:
            minor = found
    return minor


def _without(minor: Minor, line: int) -> Iterator[Minor]:
    """Both ways to lose a line: as it stands, and after a pivot."""
    m, n = minor.support.shape
    for turn in (False, True):
        place = int(np.flatnonzero(minor.lines == line)[0])
        if turn and place < m:
            minor = minor.pivoted(place, int(np.argmax(minor.support[place])))
            place += m
            place = int(np.flatnonzero(minor.lines == line)[0])
        elif turn:
            minor = minor.pivoted(int(np.argmax(minor.support[:, place - m])), place - m)
            place = int(np.flatnonzero(minor.lines == line)[0])
        rows, columns = np.arange(m), np.arange(n)
        if place < m:
            yield minor.restricted(np.delete(rows, place), columns)
        else:
            yield minor.restricted(rows, np.delete(columns, place - m))


def _rigid_part(minor: Minor, deadline: Deadline) -> Minor | None:
    """A 3-connected part that is neither graphic nor cographic, if there is one."""
    reduction = reduce_matrix(csc_of(minor.support))
    if reduction.steps:
        minor = minor.restricted(reduction.rows, reduction.columns)
    if not neither(minor.support, deadline):
        return None
    side = smallest_separation(minor.support)
    if side is None:
        return minor
    for part in _parts(minor, side):
        found = _rigid_part(part, deadline)
        if found is not None:
            return found
    return None


def _parts(minor: Minor, side: Bits) -> Iterator[Minor]:
    """Both parts of a 1- or 2-separation, as submatrices: a side, and a line that meets it."""
    m = minor.support.shape[0]
    for rows, columns in ((side[:m], side[m:]), (~side[:m], ~side[m:])):
        rows, columns = rows.copy(), columns.copy()
        across = ~rows & minor.support[:, columns].any(axis=1)
        down = ~columns & minor.support[rows].any(axis=0)
        if across.any():
            rows[np.argmax(across)] = True
        elif down.any():
            columns[np.argmax(down)] = True
        yield minor.restricted(np.flatnonzero(rows), np.flatnonzero(columns))

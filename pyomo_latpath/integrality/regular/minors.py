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
from .separation import Links, pivot, smallest_separation


def neither(matrix: sp.csc_array, deadline: Deadline) -> bool:
    """Whether the matroid of a matrix's nonzeros is neither graphic nor cographic."""
    if min(matrix.shape) < 3:
        return False
    either = is_graphic(matrix, deadline) or is_graphic(matrix.T.tocsc(), deadline)
    check_time(deadline)
    return not either


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


def near(links: Links, starts: list[int]) -> list[int]:
    """List all lines, those near to given ones first."""
    seen, queue = dict.fromkeys(starts), deque(starts)
    for other in links:
        while queue:
            for line in links[queue.popleft()]:
                if line not in seen:
                    seen[line] = None
                    queue.append(line)
        if other not in seen:
            seen[other] = None
            queue.append(other)
    return list(seen)


def rows_and_columns(lines: Iterable[int], m: int) -> tuple[Integers, Integers]:
    """The rows and the columns among some lines, both ascending."""
    chosen = np.array(sorted(lines), dtype=np.int64)
    return chosen[chosen < m], chosen[chosen >= m] - m


def small_core(matrix: sp.csc_array, links: Links, deadline: Deadline) -> list[int]:
    """Find a smallest set of lines that is neither graphic nor cographic."""

    def holds(lines: list[int]) -> bool:
        rows, columns = rows_and_columns(lines, matrix.shape[0])
        return neither(matrix[:, columns][rows, :], deadline)

    return smallest(lambda kept: near(links, kept), holds)


@dataclass(frozen=True, eq=False)
class Minor:
    """A minor of a binary matroid.

    Attributes
    ----------
    links : Links
        Its lines, ascending, each with its neighbours.
    rows : frozenset of int
        The lines that are rows.
    pivots : tuple of (int, int)
        In their order: pairs of lines, one a row and one a column, that were exchanged.
    """

    links: Links
    rows: frozenset[int]
    pivots: tuple[tuple[int, int], ...] = ()

    def restricted(self, lines: Iterable[int]) -> Minor:
        """The minor on some of its lines."""
        kept = set(lines)
        links = {line: self.links[line] & kept for line in sorted(kept)}
        return Minor(links, self.rows & kept, self.pivots)

    def pivoted(self, x: int, y: int) -> Minor:
        """The minor after a pivot at two neighbours."""
        links = {line: set(beside) for line, beside in self.links.items()}
        pivot(links, x, y)
        return Minor(links, self.rows ^ {x, y}, (*self.pivots, (x, y)))

    def matrix(self) -> tuple[sp.csc_array, Integers]:
        """Its matrix, and the lines behind rows and columns."""
        rows = [line for line in self.links if line in self.rows]
        columns = [line for line in self.links if line not in self.rows]
        place = {row: k for k, row in enumerate(rows)}
        entries = [sorted(place[row] for row in self.links[column]) for column in columns]
        index = np.array([k for places in entries for k in places], np.int64)
        start = np.cumsum([0, *map(len, entries)])
        matrix = (np.ones(index.size, np.int64), index, start)
        shape = (len(rows), len(columns))
        return sp.csc_array(matrix, shape=shape), np.array([*rows, *columns], np.int64)


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
    while len(minor.links) > 12:
        line = next(line for line in minor.links if line not in needed)
        smaller = (_rigid_part(trial, deadline) for trial in _without(minor, line))
        found = next((part for part in smaller if part is not None), None)
        if found is None:
            needed.add(line)
        else:
            minor = found
    return minor


def _without(minor: Minor, line: int) -> Iterator[Minor]:
    """Both ways to lose a line: as it stands, and after a pivot."""
    others = [other for other in minor.links if other != line]
    yield minor.restricted(others)
    yield minor.pivoted(line, min(minor.links[line])).restricted(others)


def _rigid_part(minor: Minor, deadline: Deadline) -> Minor | None:
    """A 3-connected part that is neither graphic nor cographic, if there is one."""
    matrix, lines = minor.matrix()
    reduction = reduce_matrix(matrix)
    if reduction.steps:
        matrix = reduction.matrix
        lines = lines[np.concatenate((reduction.rows, len(minor.rows) + reduction.columns))]
        minor = minor.restricted(lines.tolist())
    if not neither(matrix, deadline):
        return None
    side = smallest_separation(matrix, deadline)
    if side is None:
        return minor
    for inside in (set(lines[side].tolist()), set(lines[~side].tolist())):
        # Any one line that meets a side of a 2-separation stands for all beyond it.
        beyond = {line for other in inside for line in minor.links[other]} - inside
        found = _rigid_part(minor.restricted([*inside, *sorted(beyond)[:1]]), deadline)
        if found is not None:
            return found
    return None

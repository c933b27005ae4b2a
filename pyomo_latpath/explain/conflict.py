"""The smallest conflict: a square submatrix of determinant +-2, in the names of the model.

A matrix that is not totally unimodular, while every proper submatrix is, has determinant +-2 and
even row and column sums (Camion 1965, Characterization of totally unimodular matrices). At a
fractional vertex with whole sides, the tight rows at the fractional columns hold one: deleting
lines while the rest is not totally unimodular leads to it. Where each line of it has two entries,
it is a cycle: the odd cycle of the textbooks.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..forms.numbers import Integers
from ..integrality.assess import prove_tu
from .minimal import thin_out
from .relaxation import Place

#: Conflicts are told from so many places, at most.
MOST_PLACES = 3
#: Places with more lines than this are not searched.
MOST_LINES = 2000


@dataclass(frozen=True, eq=False)
class Violator:
    """A smallest conflict: a square submatrix with determinant +-2, or an entry beyond 0, +-1.

    Attributes
    ----------
    rows, columns : ndarray, shape (k,), int64
        Indices into the form. Of a cycle in its order: row i has its entries at columns i - 1
        and i (cyclically), column i at rows i and i + 1.
    row_names, column_names : tuple of str, length k
    entries : ndarray, shape (k, k), int64
        After scaling, in this order.
    determinant : int
        Of these entries; even (Camion) unless it is a single odd entry.
    cycle : bool
        Whether each row and each column has exactly two entries, all on one cycle.
    minimal : bool
        Whether every proper submatrix is known to be totally unimodular.
    groups : tuple of str
        Names of the groups that its rows belong to.
    block : int
        Place of its block in `Explanation.blocks`; -1 where its block is not told.
    """

    rows: Integers = field(repr=False)
    columns: Integers = field(repr=False)
    row_names: tuple[str, ...]
    column_names: tuple[str, ...]
    entries: NDArray[np.int64]
    determinant: int
    cycle: bool
    minimal: bool
    groups: tuple[str, ...]
    block: int


def violators(
    normal: NormalForm, places: Sequence[Place], group_names: Sequence[str], deadline: Deadline
) -> Iterator[Violator]:
    """Find one conflict at each of a few places where a vertex is fractional.

    Parameters
    ----------
    normal : NormalForm
    places : sequence of Place
        Smallest first.
    group_names : sequence of str
        The group's name of each row of the form.
    deadline : Deadline

    Yields
    ------
    Violator
        Its `block` is -1.

    Examples
    --------
    >>> from pyomo_latpath.explain.relaxation import places_of
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> triangle = LinearForm.from_arrays([[1, 1, 0], [0, 1, 1], [1, 0, 1]], row_lower=-np.inf,
    ...                                   row_upper=1, col_lower=0, col_upper=1, cost=-1)
    >>> normal, all_three = normalise(triangle), np.arange(3)
    >>> places = places_of(normal, all_three, all_three)
    >>> (found,) = violators(normal, places, ["clash"] * 3, Deadline(None))
    >>> found.row_names, found.column_names, found.determinant, found.cycle
    (('r1', 'r2', 'r3'), ('x2', 'x3', 'x1'), 2, True)
    """
    count = 0
    for place in places:
        if count == MOST_PLACES or deadline.passed:
            return
        if place.rows.size + place.columns.size > MOST_LINES:
            continue
        found = _violator_at(normal, place, group_names, deadline)
        if found is not None:
            count += 1
            yield found


def _violator_at(
    normal: NormalForm, place: Place, group_names: Sequence[str], deadline: Deadline
) -> Violator | None:
    """A conflict of entries +-1 where there is one, else the entry furthest from that."""
    columns = place.columns
    rows = place.rows[normal.whole_rows[place.rows]]
    matrix = normal.matrix[:, columns].tocsr()[rows, :].astype(np.int64)
    large = np.abs(matrix).max(axis=1).toarray().ravel() > 1 if rows.size else np.empty(0, bool)
    lines = minimal_violator(matrix[~large, :].tocsc(), deadline)
    if lines is not None:
        picked = rows[~large][lines[0]], columns[lines[1]]
        return _told(normal, *picked, group_names, lines[2])
    if not large.any():
        return None
    size = np.abs(matrix).tocoo()
    k = int(np.argmax(size.data))
    picked = rows[size.row[k : k + 1]], columns[size.col[k : k + 1]]
    return _told(normal, *picked, group_names, minimal=True)


def minimal_violator(
    matrix: sp.csc_array, deadline: Deadline
) -> tuple[Integers, Integers, bool] | None:
    """Find a square submatrix of determinant +-2 by deleting lines.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Entries 0 and +-1.
    deadline : Deadline

    Returns
    -------
    rows, columns : ndarray, int64
    minimal : bool
        Whether every proper submatrix is known to be totally unimodular.

    Examples
    --------
    >>> wheel = sp.csc_array([[1, 1, 0, 1], [0, 1, 1, 0], [1, 0, 1, 0], [0, 0, 1, 1]])
    >>> minimal_violator(wheel, Deadline(None))
    (array([0, 2, 3]), array([0, 2, 3]), True)
    """
    m, n = matrix.shape
    by_row = matrix.tocsr()

    def part(lines: list[int]) -> sp.csc_array:
        rows, columns = [i for i in lines if i < m], [i - m for i in lines if i >= m]
        return by_row[rows, :].tocsc()[:, columns]

    def not_unimodular(lines: list[int]) -> bool:
        return prove_tu(part(lines), Deadline(None)) is None

    everything = list(range(m + n))
    if not not_unimodular(everything):
        return None
    lines, minimal = thin_out(everything, not_unimodular, deadline)
    kept = part(lines)
    if kept.shape[0] != kept.shape[1] or abs(determinant(kept.toarray())) != 2:
        return None
    rows = np.array([i for i in lines if i < m], np.int64)
    columns = np.array([i - m for i in lines if i >= m], np.int64)
    return rows, columns, minimal


def determinant(entries: NDArray[np.int64]) -> int:
    """Determinant of a square matrix of whole numbers, exact (Bareiss 1968).

    Examples
    --------
    >>> determinant(np.array([[1, 1, 0], [0, 1, 1], [1, 0, 1]]))
    2
    """
    table: list[list[int]] = entries.tolist()
    size, sign, before = len(table), 1, 1
    for k in range(size - 1):
        pivot = next((i for i in range(k, size) if table[i][k]), None)
        if pivot is None:
            return 0
        if pivot != k:
            table[k], table[pivot], sign = table[pivot], table[k], -sign
        for i in range(k + 1, size):
            for j in range(k + 1, size):
                table[i][j] = (table[i][j] * table[k][k] - table[i][k] * table[k][j]) // before
        before = table[k][k]
    return sign * table[-1][-1] if size else 1


def cycle_order(entries: NDArray[np.int64]) -> tuple[list[int], list[int]] | None:
    """Order the lines of a square matrix along its cycle, if it is one.

    Returns
    -------
    rows, columns : list of int, or None
        Row i has its entries at columns i - 1 and i. None unless each line has two entries, all
        on one cycle.

    Examples
    --------
    >>> cycle_order(np.array([[1, 1, 0], [0, 1, 1], [1, 0, 1]]))
    ([0, 1, 2], [1, 2, 0])
    """
    support = entries != 0
    size = support.shape[0]
    if (support.sum(axis=0) != 2).any() or (support.sum(axis=1) != 2).any():
        return None
    row, column = 0, int(np.flatnonzero(support[0])[-1])
    rows, columns = [row], [column]
    while True:
        row = int(support[:, column].nonzero()[0].sum()) - row
        if row == rows[0]:
            break
        column = int(support[row].nonzero()[0].sum()) - column
        rows.append(row)
        columns.append(column)
    return (rows, columns) if len(rows) == size else None


def _told(
    normal: NormalForm,
    rows: Integers,
    columns: Integers,
    group_names: Sequence[str],
    minimal: bool,
) -> Violator:
    """A violator in names, its lines along the cycle where it is one."""
    entries = normal.matrix[:, columns].tocsr()[rows, :].toarray().astype(np.int64)
    order = cycle_order(entries)
    if order is not None:
        entries = entries[np.ix_(*order)]
        rows, columns = rows[order[0]], columns[order[1]]
    form = normal.form
    rows, columns = normal.rows[rows], normal.columns[columns]
    return Violator(
        rows=rows,
        columns=columns,
        row_names=tuple(form.row_names[i] for i in rows.tolist()),
        column_names=tuple(form.col_names[j] for j in columns.tolist()),
        entries=entries,
        determinant=determinant(entries),
        cycle=order is not None,
        minimal=minimal,
        groups=tuple(dict.fromkeys(group_names[i] for i in rows.tolist())),
        block=-1,
    )

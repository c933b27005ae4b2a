"""The smallest conflict: a square submatrix of determinant +-2, in the names of the model.

A matrix that is not totally unimodular, while every proper submatrix is, has determinant +-2 and
even row and column sums (Camion 1965, Characterization of totally unimodular matrices). At a
fractional vertex with whole sides, the tight rows at the fractional columns hold one. Where each
line of it has two entries, it is a cycle: the odd cycle of the textbooks.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..forms.numbers import Integers
from ..integrality.regular.clock import OutOfTime
from ..integrality.regular.conflict import determinant
from ..integrality.regular.decision import totally_unimodular
from ..integrality.regular.minors import rows_and_columns
from ..integrality.regular.signs import odd_hole
from .relaxation import Place

#: Conflicts are told from so many places, at most.
MOST_PLACES = 3
#: Places with more lines than this are searched for cycles alone.
MOST_LINES = 2000


@dataclass(frozen=True, eq=False)
class NamedViolator:
    """A smallest conflict in the names of the model.

    It is a square submatrix with determinant +-2, or an entry beyond 0 and +-1.

    Attributes
    ----------
    rows, columns : ndarray, shape (k,), int64
        Indices into the form. Of a cycle in its order: row i has its entries at columns i - 1
        and i (cyclically), column i at rows i and i + 1.
    row_names, column_names : tuple of str, length k
    entries : ndarray, shape (k, k), int64
        After scaling, in this order; float64 where a single entry is not whole.
    determinant : int or float
        Of these entries: 2 or -2, or the single entry.
    cycle : bool
        Whether each row and each column has exactly two entries, all on one cycle.
    minimal : bool
        Whether every proper submatrix is totally unimodular.
    groups : tuple of str
        Names of the groups that its rows belong to.
    block : int
        Place of its block in `Explanation.blocks`; -1 where its block is not told.
    """

    rows: Integers = field(repr=False)
    columns: Integers = field(repr=False)
    row_names: tuple[str, ...]
    column_names: tuple[str, ...]
    entries: NDArray[np.int64] | NDArray[np.float64]
    determinant: int | float
    cycle: bool
    minimal: bool
    groups: tuple[str, ...]
    block: int


def violators(
    normal: NormalForm, places: Sequence[Place], group_names: Sequence[str], deadline: Deadline
) -> Iterator[NamedViolator]:
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
    NamedViolator
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
        found = _violator_at(normal, place, group_names, deadline)
        if found is not None:
            count += 1
            yield found


def _violator_at(
    normal: NormalForm, place: Place, group_names: Sequence[str], deadline: Deadline
) -> NamedViolator | None:
    """A conflict of entries +-1 where there is one, else the entry furthest from that."""
    rows, columns = place.rows, place.columns
    matrix = normal.matrix[:, columns].tocsr()[rows, :]
    entries = matrix.tocoo()
    odd = np.zeros(rows.size, np.bool_)
    odd[entries.row[np.abs(entries.data) != 1]] = True
    lines = _conflicting_lines(matrix[~odd, :].astype(np.int64).tocsc(), deadline)
    if lines is not None:
        return _told(normal, rows[~odd][lines[0]], columns[lines[1]], group_names)
    if deadline.passed or not odd.any():
        return None
    size = np.abs(entries.data)
    k = int(np.argmax(np.maximum(size, 1 / size)))
    here = slice(k, k + 1)
    return _told(normal, rows[entries.row[here]], columns[entries.col[here]], group_names)


def _conflicting_lines(
    matrix: sp.csc_array, deadline: Deadline
) -> tuple[Integers, Integers] | None:
    """Rows and columns of a smallest conflict of entries +-1: a cycle where one is soon found."""
    try:
        hole = odd_hole(matrix, deadline)
    except OutOfTime:
        return None
    if hole is not None:
        return rows_and_columns(frozenset(hole), matrix.shape[0])
    if sum(matrix.shape) > MOST_LINES:
        return None
    limit = None if deadline.left == math.inf else deadline.left
    found = totally_unimodular(matrix, time_limit=limit).violator
    return None if found is None else (found.rows, found.columns)


def cycle_order(entries: NDArray[Any]) -> tuple[list[int], list[int]] | None:
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
    normal: NormalForm, rows: Integers, columns: Integers, group_names: Sequence[str]
) -> NamedViolator:
    """A violator in names, its lines along the cycle where it is one."""
    entries = normal.matrix[:, columns].tocsr()[rows, :].toarray()
    order = cycle_order(entries)
    if order is not None:
        entries = entries[np.ix_(*order)]
        rows, columns = rows[order[0]], columns[order[1]]
    form = normal.form
    rows, columns = normal.rows[rows], normal.columns[columns]
    return NamedViolator(
        rows=rows,
        columns=columns,
        row_names=tuple(form.row_names[i] for i in rows.tolist()),
        column_names=tuple(form.col_names[j] for j in columns.tolist()),
        entries=entries.astype(np.int64) if (entries == np.rint(entries)).all() else entries,
        determinant=_determinant(entries),
        cycle=order is not None,
        minimal=True,
        groups=tuple(dict.fromkeys(group_names[i] for i in rows.tolist())),
        block=-1,
    )


def _determinant(entries: NDArray[np.float64]) -> int | float:
    if entries.size > 1:
        return determinant(entries.astype(np.int64))
    value = float(entries[0, 0])
    return int(value) if value == int(value) else value

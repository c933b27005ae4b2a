"""Whether a model still is the one that was explained, apart from remedies made since.

A cut, or a coefficient that was shrunk, holds for the rows and bounds that it was derived from;
after other sides it may cut off plans. So whole rows and bounds are compared, all of them, since
any may stand behind a remedy. Costs may differ: no remedy rests on them.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from typing import TypeAlias

import numpy as np
import scipy.sparse as sp

from ...forms.linear_form import LinearForm
from ...forms.numbers import Integers
from .remedy import Inequality, Remedy, RowChange

#: Terms by column, lower and upper side.
Content: TypeAlias = tuple[frozenset[tuple[int, float]], float, float]


@dataclass(frozen=True, eq=False)
class Explained:
    """The model that was explained, and the remedies that were found for it.

    Attributes
    ----------
    form : LinearForm
        A copy: whatever is changed in place afterwards, names included, is not changed here.
    remedies : list of Remedy
        Those found so far.
    """

    form: LinearForm
    remedies: list[Remedy] = field(default_factory=list)

    @classmethod
    def of(cls, form: LinearForm) -> Explained:
        """Keep a copy of a form."""
        copied = replace(
            form,
            matrix=form.matrix.copy(),
            row_lower=form.row_lower.copy(),
            row_upper=form.row_upper.copy(),
            col_lower=form.col_lower.copy(),
            col_upper=form.col_upper.copy(),
            integer=form.integer.copy(),
            semicontinuous=form.semicontinuous.copy(),
            row_names=list(form.row_names),
            col_names=list(form.col_names),
        )
        return cls(copied)


def refuse_changed(remedy: Remedy, now: LinearForm, *, by_name: bool) -> None:
    """Refuse a remedy for a model with other data, or one that has it already.

    Parameters
    ----------
    remedy : Remedy
        One that knows no model that was explained is let pass.
    now : LinearForm
        The model as it is.
    by_name : bool
        Whether rows and columns are found by their names; else by their places.

    Raises
    ------
    ValueError
        Naming the first row or column that differs, otherwise than by remedies found with it.
    """
    if remedy.explained is None:
        return
    model = _Model(remedy.explained, now, by_name)
    if model.has(remedy):
        raise ValueError(f"the remedy {remedy.title!r} has been made in this model already")
    for what in model.differences():
        raise ValueError(f"{what} since it was explained: explain the model again")


class _Model:
    """A model as it was explained beside the same model as it is."""

    def __init__(self, explained: Explained, now: LinearForm, by_name: bool) -> None:
        old = explained.form
        self.remedies, self.old, self.now = explained.remedies, old, now
        self.row = _places(old.row_names, now.row_names, by_name)
        self.column = _places(old.col_names, now.col_names, by_name)
        self._by_row = _with_columns_of(old, now, self.column)
        self.changed = self._changed_rows()
        self.others = np.setdiff1d(np.arange(now.shape[0]), self.row).tolist()
        self.contents = {k: self._content(k) for k in self.others + self.row[self.changed].tolist()}
        self.met = set(self.contents.values())
        standing = np.setdiff1d(np.flatnonzero(self.row >= 0), self.changed)
        self.standing = set(standing.tolist())

    def _changed_rows(self) -> Integers:
        """Rows of the explained model that are there, and differ."""
        common = np.flatnonzero(self.row >= 0)
        there = self.row[common]
        before = self.old.matrix.tocsr()[common, :]
        before.resize((common.size, self._by_row.shape[1]))
        differs = self.old.row_lower[common] != self.now.row_lower[there]
        differs |= self.old.row_upper[common] != self.now.row_upper[there]
        differs[(before != self._by_row[there, :]).tocoo().coords[0]] = True
        return common[differs]

    def _content(self, k: int) -> Content:
        here = slice(self._by_row.indptr[k], self._by_row.indptr[k + 1])
        columns, values = self._by_row.indices[here].tolist(), self._by_row.data[here].tolist()
        terms = frozenset(zip(columns, values, strict=True))
        return terms, float(self.now.row_lower[k]), float(self.now.row_upper[k])

    def has(self, remedy: Remedy) -> bool:
        """Whether a remedy was made in the model."""
        gone = {change.row for change in remedy.row_changes} | set(remedy.dropped_rows.tolist())
        if gone & self.standing or not self._has_rows_of(remedy):
            return False
        for each in remedy.bound_changes:
            k = self.column[each.column]
            if k >= 0 and self._bounds(k) != (each.lower, each.upper):
                return False
        dropped = self.column[remedy.dropped_declarations]
        return not self.now.integer[dropped[dropped >= 0]].any()

    def _has_rows_of(self, remedy: Remedy) -> bool:
        return all(_content_of(line) in self.met for line in _lines(remedy))

    def differences(self) -> Iterator[str]:
        """Rows and columns that are neither as they were explained nor as a remedy makes them."""
        changes: dict[int, set[Content]] = {}
        replaced, known = set[int](), set[Content]()
        for remedy in self.remedies:
            for change in remedy.row_changes:
                changes.setdefault(change.row, set()).add(_content_of(change))
            if self._has_rows_of(remedy):
                replaced.update(remedy.dropped_rows.tolist())
            known.update(map(_content_of, _lines(remedy)))
        for i in self.changed.tolist():
            content = self.contents[int(self.row[i])]
            free = i in replaced and content[1:] == (-np.inf, np.inf)
            if not free and content not in changes.get(i, ()):
                yield f"row {self.old.row_names[i]!r} has changed"
        for i in np.flatnonzero(self.row < 0).tolist():
            if i not in replaced and not changes.get(i, set()) & self.met:
                yield f"row {self.old.row_names[i]!r} has gone"
        for k in self.others:
            if self.contents[k] not in known:
                yield f"row {self.now.row_names[k]!r} has come"
        yield from self._changed_columns()

    def _changed_columns(self) -> Iterator[str]:
        """Columns with other bounds or another domain."""
        bounds = {
            (each.column, each.lower, each.upper)
            for remedy in self.remedies
            for each in remedy.bound_changes
        }
        continuous = np.zeros(self.old.shape[1], np.bool_)
        for remedy in self.remedies:
            continuous[remedy.dropped_declarations] |= self._has_rows_of(remedy)
        there = np.flatnonzero(self.column >= 0)
        place, old, now = self.column[there], self.old, self.now
        moved = (old.col_lower[there] != now.col_lower[place]) | (
            old.col_upper[there] != now.col_upper[place]
        )
        for j, k in zip(there[moved].tolist(), place[moved].tolist(), strict=True):
            if (j, *self._bounds(k)) not in bounds:
                yield f"the bounds of column {old.col_names[j]!r} have changed"
        other = old.semicontinuous[there] != now.semicontinuous[place]
        other |= (old.integer[there] != now.integer[place]) & ~(
            continuous[there] & ~now.integer[place]
        )
        for j in there[other].tolist():
            yield f"the domain of column {old.col_names[j]!r} has changed"

    def _bounds(self, k: int) -> tuple[float, float]:
        return float(self.now.col_lower[k]), float(self.now.col_upper[k])


def _places(old: Sequence[str], now: Sequence[str], by_name: bool) -> Integers:
    """Where each old name is now; -1 where nowhere."""
    if not by_name:
        place = np.arange(len(old))
        return np.where(place < len(now), place, -1)
    of_name = {name: k for k, name in enumerate(now)}
    return np.array([of_name.get(name, -1) for name in old], np.int64)


def _with_columns_of(old: LinearForm, now: LinearForm, place: Integers) -> sp.csr_array:
    """The rows as they are, over the columns of the explained model; new columns come last."""
    new = np.setdiff1d(np.arange(now.shape[1]), place)
    column = np.empty(now.shape[1], np.int64)
    column[place[place >= 0]] = np.flatnonzero(place >= 0)
    column[new] = old.shape[1] + np.arange(new.size)
    entries = now.matrix.tocoo()
    where = entries.coords[0], column[entries.coords[1]]
    shape = now.shape[0], old.shape[1] + new.size
    return sp.csr_array((entries.data, where), shape=shape)


def _lines(remedy: Remedy) -> list[RowChange | Inequality]:
    return [*remedy.row_changes, *remedy.inequalities]


def _content_of(line: RowChange | Inequality) -> Content:
    pairs = zip(line.columns.tolist(), line.coefficients.tolist(), strict=True)
    return frozenset((j, a) for j, a in pairs if a), float(line.lower), float(line.upper)

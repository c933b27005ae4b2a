"""Smallest sets of row groups without which everything that is left is certified whole.

First each group is left out alone. Then: groups that together are not totally unimodular, or have
sides that are not whole, are a conflict, and stay one beside further groups; so a set of culprits
must meet all conflicts. The search goes through the smallest sets that meet all those known
(Reiter 1987, A theory of diagnosis from first principles): either what is left without such a set
is certified, or it holds a further conflict, thinned out until no group of it can be spared.

Equations may make whole what is fractional without them, and continuous columns may be scaled
otherwise beside other rows. Where there are such, a small set of groups may be overlooked, and what
is found is not called smallest.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Collection, Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np

from ..deadline import Deadline
from ..forms.linear_form import Flags, Floats, LinearForm
from ..forms.normalise import NormalForm
from ..forms.numbers import Integers
from .groups import Group
from .minimal import hitting_sets, thin_out
from .naming import listed
from .relaxation import Place, Relaxation
from .remains import Certified, Remains

#: So many sets of culprits are told, at most.
MOST_SETS = 5
#: So many groups may be in one beside those that are to blame in any case.
MOST_CHOSEN = 4
#: So many groups are tried on their own, whatever their entries.
MOST_ALONE = 30


@dataclass(frozen=True, eq=False)
class Culprit:
    """A smallest set of groups without which everything that is left is certified whole.

    Attributes
    ----------
    groups : tuple of str
        None of them can stay.
    smallest : bool
        Whether it is known that no set of fewer groups leaves what is certified.
    rows : tuple of str
        Names of a set of rows among them that does, too.
    row_indices : ndarray, int64
    rows_minimal : bool
        Whether none of those rows can stay; False where the time ran out before that was shown.
    structures : tuple of str
        Of what is left without the groups, largest block first ('network', ...).
    remains : str
        One sentence about that.
    objective_without : float
        Optimum without the groups, in the model's sense: also that of the best whole plan,
        since what is left is certified. Infinite where unbounded.
    price : float
        By how much the model's best known plan is worse: what these side constraints cost (at
        most, where `Gap.exact` is False). NaN without a plan, and where nothing bounds the
        objective but them.
    """

    groups: tuple[str, ...]
    smallest: bool
    rows: tuple[str, ...]
    row_indices: Integers = field(repr=False)
    rows_minimal: bool
    structures: tuple[str, ...]
    remains: str
    objective_without: float
    price: float


@dataclass(frozen=True)
class CulpritSet:
    """Groups to blame, as places in the list of groups, and what is left without them."""

    places: tuple[int, ...]
    certified: Certified
    smallest: bool


class Search:
    """The search for all smallest sets of culprits of one form.

    Parameters
    ----------
    remains : Remains
    groups : sequence of Group
    conflicts : sequence of collections of str
        Names of groups that violators run through.
    relaxation : Relaxation
    deadline : Deadline
    tell : callable
        Takes a line about the progress.

    Attributes
    ----------
    exhausted : bool
        Whether all sets of the smallest size were found.
    alone : dict of int to bool
        Groups that were tried on their own: certified or not.
    """

    def __init__(
        self,
        remains: Remains,
        groups: Sequence[Group],
        conflicts: Sequence[Collection[str]],
        relaxation: Relaxation,
        deadline: Deadline,
        tell: Callable[[str], None],
    ) -> None:
        self.remains, self.groups, self.relaxation = remains, groups, relaxation
        self.deadline, self.tell = deadline, tell
        self.exhausted, self.alone = False, dict[int, bool]()
        form = remains.form
        # What is left without one group was tried by every certificate there is.
        tried = 2 if len(groups) <= MOST_ALONE else 1
        monotone = form.integer.all() and not _equations(form).any()
        self._surely_smallest = len(groups) if monotone else tried
        self._group_of = np.zeros(form.shape[0], np.int64)
        for k, group in enumerate(groups):
            self._group_of[group.rows] = k
        self._crowded = _crowded(relaxation.normal, self._group_of, len(groups))
        place = {group.name: k for k, group in enumerate(groups)}
        self._conflicts = [frozenset(place[name] for name in names) for names in conflicts]
        self._suspects = frozenset[int]().union(*self._conflicts)
        self._found: list[frozenset[int]] = []

    def run(self) -> Iterator[CulpritSet]:
        """Yield the sets; where all are large, one of which no group can stay."""
        yield from self._singles()
        self._try_alone()
        for size in range(1, len(self.groups) + 1):
            forced = len({those for those in self._conflicts if len(those) == 1})
            if self._found or self.deadline.passed or size > forced + MOST_CHOSEN:
                break
            if size >= forced:
                yield from self._of_size(size)
        if not self._found:
            yield from self._greedily()
        elif not self.deadline.passed:
            self.exhausted = len(self._found) < MOST_SETS

    def _singles(self) -> Iterator[CulpritSet]:
        """Groups to blame alone, by any certificate of what is left."""
        if len(self.groups) > MOST_ALONE:
            return
        for k in sorted(range(len(self.groups)), key=self._suspicion):
            if len(self._found) < MOST_SETS and not self.deadline.passed:
                yield from self._tried(frozenset({k}), smallest=True)

    def _tried(self, chosen: frozenset[int], smallest: bool) -> Iterator[CulpritSet]:
        names = [self.groups[k].name for k in sorted(chosen)]
        self.tell(f"leaving out {listed(names, MOST_CHOSEN) if names else 'nothing'}")
        certified = self._certified(self._others(chosen))
        if certified is not None:
            self._found.append(chosen)
            yield CulpritSet(tuple(sorted(chosen)), certified, smallest)

    def _greedily(self) -> Iterator[CulpritSet]:
        """Put back one group after the other while what is there stays certified."""

        def serves(chosen: list[int]) -> bool:
            return self._certified(self._others(chosen)) is not None

        everything = list(range(len(self.groups)))
        if serves(everything):
            chosen, minimal = thin_out(everything, serves, self.deadline)
            certified = self._certified(self._others(chosen))
            if minimal and certified is not None:
                yield CulpritSet(tuple(chosen), certified, smallest=False)

    def _try_alone(self) -> None:
        """A group that is not certified on its own is to blame in any case."""
        for k, group in enumerate(self.groups):
            if self.deadline.passed:
                return
            suspicious = group.beyond or group.broken_sides or group.continuous
            if suspicious or len(self.groups) <= MOST_ALONE:
                self.alone[k] = self._certified([k]) is not None
                if self._in_conflict([k]) and not self.deadline.passed:
                    self._conflicts.append(frozenset({k}))

    def _of_size(self, size: int) -> Iterator[CulpritSet]:
        """Sets of so many groups: each new conflict starts the enumeration afresh."""
        while not self.deadline.passed and len(self._found) < MOST_SETS:
            sets = hitting_sets(self._conflicts, size, self._found, self._suspicion)
            chosen = next(sets, None)
            if chosen is None:
                return
            before = len(self._found)
            yield from self._tried(chosen, smallest=size <= self._surely_smallest)
            if len(self._found) == before and not self.deadline.passed:
                conflict = self._conflict_among(self._others(chosen))
                if conflict is None:
                    return
                self._conflicts.append(conflict)

    def _conflict_among(self, kept: list[int]) -> frozenset[int] | None:
        """Groups among these that cannot be certified together, none of them needlessly."""
        seeds: list[frozenset[int]] = []
        flags = self.flags(kept)[self.relaxation.normal.rows]
        result = self.relaxation.optimum(self.deadline, flags)
        if result.status == "optimal":
            places = self.relaxation.places(result.x)
            seeds = [self._groups_at(place) for place in places]
        for seed in [*seeds, frozenset(kept)]:
            if self._in_conflict(sorted(seed)):
                thin, _ = thin_out(sorted(seed), self._in_conflict, self.deadline)
                return None if self.deadline.passed else frozenset(thin)
        return None

    def _groups_at(self, place: Place) -> frozenset[int]:
        rows = self.relaxation.normal.rows[place.rows]
        return frozenset(np.unique(self._group_of[rows]).tolist())

    def _suspicion(self, k: int) -> tuple[bool, bool, float, int]:
        """First what has odd numbers, is in a conflict, stands in crowded columns, or is small."""
        group = self.groups[k]
        odd = group.beyond or group.broken_sides
        return not odd, k not in self._suspects, -round(self._crowded[k], 1), group.size

    def _others(self, chosen: Collection[int]) -> list[int]:
        return [k for k in range(len(self.groups)) if k not in chosen]

    def flags(self, kept: Sequence[int]) -> Flags:
        """Rows of the form in these groups."""
        chosen = np.zeros(len(self.groups), np.bool_)
        chosen[list(kept)] = True
        return np.asarray(chosen[self._group_of])

    def _in_conflict(self, kept: Sequence[int]) -> bool:
        """Whether no group beside these could make a totally unimodular matrix of them."""
        certified = self._certified(kept)
        return certified is None or "unimodular" in certified.structures

    def _certified(self, kept: Sequence[int]) -> Certified | None:
        return self.remains.certified(self.flags(kept), self.deadline)


def _crowded(normal: NormalForm, group_of: Integers, size: int) -> Floats:
    """Of each group's entries, the share in columns with more than two.

    Incidence structures have no such columns; rows that are laid over one stand in nothing else.
    """
    count = np.diff(normal.matrix.indptr)
    of_entry = group_of[normal.rows[normal.matrix.indices]]
    crowded = np.bincount(of_entry, np.repeat(count > 2, count), minlength=size)
    return np.asarray(crowded / np.maximum(1, np.bincount(of_entry, minlength=size)))


def smallest_rows(remains: Remains, rows: Integers, deadline: Deadline) -> tuple[Integers, bool]:
    """Thin out rows without which what is left is certified.

    Parameters
    ----------
    remains : Remains
    rows : ndarray, int64
        Indices into the form; what is left without them is certified.
    deadline : Deadline

    Returns
    -------
    rows : ndarray, int64
    minimal : bool
        Whether none of them can stay; False where the time ran out.
    """

    def certified_without(some: list[int]) -> bool:
        kept = np.ones(remains.form.shape[0], np.bool_)
        kept[some] = False
        return remains.certified(kept, deadline) is not None

    found, minimal = thin_out(rows.tolist(), certified_without, deadline)
    count = len(rows)
    # With equations among them, rows that were needed at first may not be needed at last.
    while minimal and len(found) < count and _equations(remains.form).any():
        count = len(found)
        found, minimal = thin_out(found, certified_without, deadline)
    return np.array(found, np.int64), minimal


def _equations(form: LinearForm) -> Flags:
    return np.asarray(form.row_lower == form.row_upper)


def objective_without(search: Search, places: Sequence[int], deadline: Deadline) -> float:
    """Optimum without some groups; what is left being certified, a whole plan attains it."""
    kept = [k for k in range(len(search.groups)) if k not in places]
    flags = search.flags(kept)[search.relaxation.normal.rows]
    result = search.relaxation.optimum(deadline, flags)
    return search.relaxation.objective(result)


def price(worse: float) -> float:
    """What side constraints cost: never negative, NaN where there is no plan or no optimum."""
    return max(0.0, worse) if math.isfinite(worse) else math.nan

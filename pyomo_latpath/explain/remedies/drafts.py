"""Remedies in the making: a draft for each row or column, put together by what they touch."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from ...forms.linear_form import LinearForm
from ...pages.markup import counted
from ..naming import listed
from .remedy import BoundChange, Inequality, Kind, Remedy, RowChange


@dataclass(frozen=True, eq=False)
class Draft:
    """What a remedy does to one row or column.

    Attributes
    ----------
    kind : str
        As of the remedy.
    action : str
        'Split {}', with the rows or columns to be filled in.
    suffix : str
        For the names of new rows: 'split'.
    noun : 'row' or 'column'
        What is touched.
    name, group : str
        Of the row or column, and of the component that it belongs to.
    sentence, verified : str
        Without the full stop.
    change : RowChange, BoundChange or None
    inequalities : tuple of Inequality
        Not named yet.
    dropped : int
        The row that these replace; -1 if none.
    """

    kind: Kind
    action: str
    suffix: str
    noun: str
    name: str
    group: str
    sentence: str
    verified: str
    change: RowChange | BoundChange | None = None
    inequalities: tuple[Inequality, ...] = ()
    dropped: int = -1


class Namer:
    """Names for new rows that the model does not use yet.

    Parameters
    ----------
    form : LinearForm

    Examples
    --------
    >>> namer = Namer(LinearForm.from_arrays([[1]], row_lower=0, row_upper=1, col_lower=0,
    ...                                      col_upper=1, cost=0, row_names=["van_split[3]"]))
    >>> namer.free("b[*].van", "split"), namer.free("van", "split")
    ('b_van_split', 'van_split_2')
    """

    def __init__(self, form: LinearForm) -> None:
        self._taken = {name.split("[", 1)[0] for name in form.row_names}

    def free(self, stem: str, suffix: str) -> str:
        """Return an identifier made of both that no row has."""
        plain = "_".join([*re.findall(r"\w+", stem), suffix])
        name, count = plain, 1
        while name in self._taken:
            count += 1
            name = f"{plain}_{count}"
        return name

    def settled(self, remedy: Remedy) -> Remedy:
        """Reserve a remedy's name; give it another one if it is taken by now."""
        if remedy.name in self._taken:
            name = self.free("", remedy.name)
            remedy = replace(remedy, name=name, inequalities=numbered(name, remedy.inequalities))
        self._taken.add(remedy.name)
        return remedy


def by_group(drafts: Iterable[Draft]) -> list[list[Draft]]:
    """Put drafts of one kind together by the component that they touch."""
    parts: dict[tuple[str, str], list[Draft]] = {}
    for draft in drafts:
        parts.setdefault((draft.noun, draft.group), []).append(draft)
    return list(parts.values())


def combined(drafts: Sequence[Draft], namer: Namer) -> Remedy:
    """Make one remedy of drafts of one kind."""
    first = drafts[0]
    groups = list(dict.fromkeys(draft.group for draft in drafts))
    where = counted(len(drafts), first.noun)
    if [first.name] != groups:
        where += f" of {listed(groups, 2)}"
    name = namer.free(groups[0], first.suffix)
    rest = len(drafts) - 1
    others = f"; so with {counted(rest, f'other {first.noun}')}" if rest else ""
    dropped = [draft for draft in drafts if draft.dropped >= 0]
    changes = [draft.change for draft in drafts]
    return Remedy(
        kind=first.kind,
        name=name,
        title=first.action.format(where),
        sentence=f"{first.sentence}{others}.",
        names=tuple(draft.name for draft in drafts),
        verified=_proofs(drafts),
        inequalities=numbered(name, [row for draft in drafts for row in draft.inequalities]),
        row_changes=tuple(change for change in changes if isinstance(change, RowChange)),
        bound_changes=tuple(change for change in changes if isinstance(change, BoundChange)),
        dropped_rows=np.array([draft.dropped for draft in dropped], np.int64),
        dropped_row_names=tuple(draft.name for draft in dropped),
    )


def numbered(name: str, rows: Iterable[Inequality]) -> tuple[Inequality, ...]:
    """Name rows name[1], name[2], ..."""
    return tuple(replace(row, name=f"{name}[{k}]") for k, row in enumerate(rows, start=1))


def _proofs(drafts: Sequence[Draft]) -> str:
    """Say how the drafts were proven, and how many in each way."""
    ways = Counter(draft.verified for draft in drafts)
    if len(ways) == 1:
        return f"{drafts[0].verified}."
    told = (f"{counted(count, drafts[0].noun)}: {way}" for way, count in ways.items())
    return f"{'; '.join(told)}."

"""Which rows and which columns belong together, by what the model calls them.

In a compiled Pyomo model the components tell. Elsewhere the stem of a name does: what is left
without its indices, "demand" of "demand[3]", "demand(3)", "demand_3" and of "c_e_demand(3)_",
as Pyomo itself writes it into files. Names that say nothing ("R1" to "R900") give way to the
pattern of a row's entries.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import scipy.sparse as sp

from ..forms.linear_form import ComponentNames, LinearForm, NumberedNames
from ..forms.numbers import Integers

#: What tells the parts apart.
By = Literal["component", "name", "pattern"]
#: Stems that say nothing.
BLANK = frozenset({"#", "r", "c", "x", "e", "row", "rows", "con", "cons", "constr", "constraint"})
#: So many names for each stem, at least, or the names are taken to say nothing.
FEW = 2
#: Up to so many rows each may be a group of its own.
SMALL = 20

WRITTEN = re.compile(r"^[cr]_[elu]_(.*)_$")
INDEX = re.compile(r"\[[^\[\]]*\]|\([^()]*\)")
NUMBER = re.compile(r"[_.#:-]*\d+(?:[_.,#:-]+\d+)*[_.#:-]*$")


@dataclass(frozen=True, eq=False)
class Stems:
    """A partition of rows or columns.

    Attributes
    ----------
    names : tuple of str
        Of the parts, in the order in which they are met.
    label : ndarray, int64
        For each row or column its part.
    by : 'component', 'name' or 'pattern'
    """

    names: tuple[str, ...]
    label: Integers
    by: By

    def members(self) -> list[Integers]:
        """Rows or columns of each part, ascending."""
        order = np.argsort(self.label, kind="stable")
        ends = np.cumsum(np.bincount(self.label, minlength=len(self.names)))
        return np.split(order, ends[:-1]) if self.names else []


def stem_of(name: str) -> str:
    """Return a name without its indices; those of an enclosing block become a star.

    A name that is nothing but a number has the stem "#".

    Examples
    --------
    >>> [stem_of(name) for name in ("demand[3]", "demand(3)", "demand_3", "c_e_demand(3)_")]
    ['demand', 'demand', 'demand', 'demand']
    >>> stem_of("b[1].demand[3]"), stem_of("R12"), stem_of("total")
    ('b[*].demand', 'R', 'total')
    """
    written = WRITTEN.match(name)
    name = written.group(1) if written else name
    bare = NUMBER.sub("", re.sub(r"[\[(][^\[\]()]*[\])]$", "", name))
    return INDEX.sub("[*]", bare) or "#"


def row_stems(form: LinearForm) -> Stems:
    """Partition the rows.

    Parameters
    ----------
    form : LinearForm

    Returns
    -------
    Stems

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1], [1, 1], [3, 0]], row_lower=0, row_upper=1,
    ...     col_lower=0, col_upper=1, cost=0, row_names=["town[1]", "town[2]", "budget"])
    >>> row_stems(form).names, row_stems(form).label.tolist()
    (('town', 'budget'), [0, 0, 1])
    """
    stems = _stems(form.row_names)
    if stems.by == "component":
        return stems
    if len(form.row_names) > SMALL and len(stems.names) * FEW > len(form.row_names):
        return _patterns(form)
    blank = np.array([name.lower() in BLANK for name in stems.names], np.bool_)[stems.label]
    if not blank.any():
        return stems
    pattern = _patterns(form).label.tolist()
    first: dict[int, str] = {}
    for i in np.flatnonzero(blank).tolist():
        first.setdefault(pattern[i], _like(form, i))
    pairs = zip(blank.tolist(), pattern, stems.label.tolist(), strict=True)
    names = [first[k] if nothing else stems.names[j] for nothing, k, j in pairs]
    return _numbered(names, "pattern" if blank.mean() > 0.5 else "name")


def column_stems(form: LinearForm) -> Stems:
    """Partition the columns; those with names that say nothing are one part."""
    return _stems(form.col_names)


def _stems(names: Sequence[str]) -> Stems:
    if isinstance(names, NumberedNames):
        return Stems((names.stem,) if len(names) else (), np.zeros(len(names), np.int64), "name")
    if isinstance(names, ComponentNames):
        parents = [component.parent_component() for component in names.components]
        once = {id(parent): parent for parent in parents}
        if None in once.values():  # the model is gone, and its components' names with it
            return _numbered([stem_of(name) for name in names], "name")
        stem = {key: INDEX.sub("[*]", parent.name) for key, parent in once.items()}
        return _numbered([stem[id(parent)] for parent in parents], "component")
    return _numbered([stem_of(name) for name in names], "name")


def _numbered(stems: list[str], by: By) -> Stems:
    place = {stem: k for k, stem in enumerate(dict.fromkeys(stems))}
    return Stems(tuple(place), np.array([place[stem] for stem in stems], np.int64), by)


def _patterns(form: LinearForm) -> Stems:
    """Rows with the same kind of sides and the same set of entries, named after the first.

    Where that leaves too many groups, entries other than +-1 count by their sign alone.
    """
    stems = _by_entries(form, form.matrix.tocsr())
    if len(stems.names) <= SMALL:
        return stems
    signs = form.matrix.tocsr()
    large = np.abs(signs.data) != 1
    signs.data[large] = 2 * np.sign(signs.data[large])
    return _by_entries(form, signs)


def _by_entries(form: LinearForm, by_row: sp.csr_array) -> Stems:
    kind = np.where(form.row_lower == form.row_upper, 0, 1 + np.isfinite(form.row_lower))
    place: dict[tuple[object, ...], int] = {}
    label, names = np.empty(form.shape[0], np.int64), list[str]()
    for i in range(form.shape[0]):
        here = slice(by_row.indptr[i], by_row.indptr[i + 1])
        whole = bool(form.integer[by_row.indices[here]].all())
        key = (int(kind[i]), whole, *np.unique(by_row.data[here]).tolist())
        if key not in place:
            place[key] = len(names)
            names.append(_like(form, i))
        label[i] = place[key]
    return Stems(tuple(names), label, "pattern")


def _like(form: LinearForm, row: int) -> str:
    return f"rows like {form.row_names[row]}"

"""Side reasons: numbers in the model that no certificate can do with."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..forms.normalise import NormalForm
from ..forms.numbers import Integers
from .groups import Oddities
from .naming import coefficient, listed, quoted
from .parity import parity_conflict
from .stems import Stems

#: So many rows or columns are named as examples.
EXAMPLES = 3
Kind = Literal["coefficient", "side", "bound", "continuous", "parity", "semicontinuous"]


@dataclass(frozen=True)
class Reason:
    """Numbers that no certificate can do with, of one row group or variable component.

    Attributes
    ----------
    kind : str
        'coefficient' (not 0 or +-1 after scaling), 'side' or 'bound' (not whole), 'continuous'
        (continuous columns in rows of integer ones), 'parity' (equations that no whole numbers
        satisfy) or 'semicontinuous'.
    where : str
        Name of the row group, or of the variable component.
    count : int
        How many.
    examples : tuple of str
        Names of rows or columns, worst first; a few.
    sentence : str
    """

    kind: Kind
    where: str
    count: int
    examples: tuple[str, ...]
    sentence: str


def find_reasons(
    normal: NormalForm, odd: Oddities, rows: Stems, columns: Stems, *, has_plan: bool = False
) -> tuple[Reason, ...]:
    """Collect side reasons, worst first.

    Contradictions come first, then what is no linear relaxation at all, then by number.

    Parameters
    ----------
    normal : NormalForm
    odd : Oddities
    rows, columns : Stems
        Of the form's rows and columns.
    has_plan : bool
        Whether a whole plan is known: then no equations contradict each other.

    Returns
    -------
    tuple of Reason

    Examples
    --------
    >>> from pyomo_latpath.explain.groups import oddities_of
    >>> from pyomo_latpath.explain.stems import column_stems, row_stems
    >>> from pyomo_latpath.forms.blocks import blocks_of
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 1], [3, 2]], row_lower=0, row_upper=[1, 4],
    ...     col_lower=0, col_upper=1, cost=0, row_names=["town[1]", "budget"])
    >>> normal = normalise(form)
    >>> odd = oddities_of(normal, blocks_of(normal))
    >>> (reason,) = find_reasons(normal, odd, row_stems(form), column_stems(form))
    >>> reason.sentence
    "'budget': 2 coefficients are not 0 or +-1 after scaling, 3 for one (row
    'budget', column 'x1')"
    """
    found = [
        *(() if has_plan else _parity(normal, rows)),
        *_semicontinuous(normal, columns),
        *sorted(
            [
                *_coefficients(normal, odd, rows),
                *_sides(normal, odd, rows),
                *_bounds(normal, odd, columns),
                *_continuous(normal, odd, rows),
            ],
            key=lambda reason: -reason.count,
        ),
    ]
    return tuple(found)


def _parity(normal: NormalForm, rows: Stems) -> Iterator[Reason]:
    conflict = parity_conflict(normal)
    if conflict is None:
        return
    places = normal.rows[conflict]
    names = tuple(normal.form.row_names[i] for i in places.tolist())
    groups = dict.fromkeys(rows.names[k] for k in rows.label[places].tolist())
    yield Reason(
        "parity",
        ", ".join(groups),
        len(names),
        names[:EXAMPLES],
        f"no whole numbers satisfy {listed(names, EXAMPLES)} together: their sum has even "
        "coefficients and an odd side",
    )


def _semicontinuous(normal: NormalForm, columns: Stems) -> Iterator[Reason]:
    flags = normal.form.semicontinuous
    places = np.flatnonzero(flags)
    for where, members in _split(columns, places):
        names = tuple(normal.form.col_names[j] for j in members[:EXAMPLES].tolist())
        text = (
            f"{quoted(where)}: {_number(members.size, 'column is', 'columns are')} semicontinuous"
        )
        yield Reason("semicontinuous", where, members.size, names, text + ": no linear relaxation")


def _coefficients(normal: NormalForm, odd: Oddities, rows: Stems) -> Iterator[Reason]:
    bad = np.flatnonzero(odd.beyond)
    form_rows = normal.rows[odd.row[bad]]
    size = np.abs(normal.matrix.data[bad])
    size = np.maximum(size, 1 / size)
    for where, members in _split(rows, form_rows, places=np.arange(bad.size)):
        worst = members[np.argsort(-size[members], kind="stable")]
        names = [normal.form.row_names[int(form_rows[k])] for k in worst[: 10 * EXAMPLES].tolist()]
        at = int(worst[0])
        column = normal.form.col_names[int(normal.columns[odd.column[bad[at]]])]
        text = (
            f"{quoted(where)}: "
            f"{_number(members.size, 'coefficient is', 'coefficients are')} not 0 or +-1 "
            f"after scaling, {coefficient(float(normal.matrix.data[bad[at]]))} for one "
            f"(row {names[0]!r}, column {column!r})"
        )
        examples = tuple(dict.fromkeys(names))[:EXAMPLES]
        yield Reason("coefficient", where, members.size, examples, text)


def _sides(normal: NormalForm, odd: Oddities, rows: Stems) -> Iterator[Reason]:
    bad = np.flatnonzero(odd.sides)
    for where, members in _split(rows, normal.rows[bad], places=bad):
        names = tuple(normal.form.row_names[int(normal.rows[i])] for i in members[:EXAMPLES])
        sides = normal.row_lower[members[0]], normal.row_upper[members[0]]
        side = next(value for value in sides if np.rint(value) != value)
        held = _number(members.size, "row has a side", "rows have sides")
        text = (
            f"{quoted(where)}: {held} not whole after scaling, nor to be rounded: "
            f"{coefficient(float(side))} at {names[0]!r}"
        )
        yield Reason("side", where, members.size, names, text)


def _bounds(normal: NormalForm, odd: Oddities, columns: Stems) -> Iterator[Reason]:
    bad = np.flatnonzero(odd.bounds)
    for where, members in _split(columns, normal.columns[bad], places=bad):
        names = tuple(normal.form.col_names[int(normal.columns[j])] for j in members[:EXAMPLES])
        held = _number(members.size, "continuous column has", "continuous columns have")
        text = (
            f"{quoted(where)}: {held} bounds that are not whole after scaling, {names[0]!r} for one"
        )
        yield Reason("bound", where, members.size, names, text)


def _continuous(normal: NormalForm, odd: Oddities, rows: Stems) -> Iterator[Reason]:
    bad = np.unique(odd.row[odd.mixed])
    for where, members in _split(rows, normal.rows[bad], places=bad):
        names = tuple(normal.form.row_names[int(normal.rows[i])] for i in members[:EXAMPLES])
        held = _number(members.size, "row holds", "rows hold")
        text = (
            f"{quoted(where)}: {held} continuous columns beside integer ones, so sides cannot be "
            "rounded"
        )
        yield Reason("continuous", where, members.size, names, text)


def _split(
    stems: Stems, indices: Integers, places: Integers | None = None
) -> Iterator[tuple[str, Integers]]:
    """Split places by the part that their index into the form lies in."""
    label = stems.label[indices]
    for k in np.unique(label).tolist():
        yield stems.names[k], (indices if places is None else places)[label == k]


def _number(count: int, one: str, several: str) -> str:
    return f"{count:,} {one if count == 1 else several}"

"""Groups of rows that belong together, and what each brings into the matrix."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from ..forms.linear_form import Flags, Floats
from ..forms.normalise import NormalForm
from ..forms.numbers import Integers
from .stems import Stems

#: How near its side a row counts as tight, relative to its size.
TIGHT = 1e-7


@dataclass(frozen=True, eq=False)
class Group:
    """Rows that belong together: a constraint component of the model.

    Attributes
    ----------
    name : str
    rows : ndarray, int64
        Indices into the form.
    size, nonzeros : int
        How many rows, how many entries.
    beyond : int
        Entries at integer columns that are not 0 or +-1 after scaling.
    broken_sides : int
        Rows with a side that is not whole after scaling.
    continuous : int
        Entries at continuous columns, in rows that hold integer columns, too.
    tight : int
        Rows that are tight at the relaxation's optimum.
    certified_alone : bool or None
        Whether the model with these rows alone is certified whole; None where not tried.
    to_blame : bool
        Whether it is in one of the `culprits`.
    """

    name: str
    rows: Integers = field(repr=False)
    size: int
    nonzeros: int
    beyond: int
    broken_sides: int
    continuous: int
    tight: int
    certified_alone: bool | None = None
    to_blame: bool = False


@dataclass(frozen=True, eq=False)
class Entries:
    """What the entries of a normalised matrix are to a certificate.

    Attributes
    ----------
    row, column : ndarray, shape (nnz,), int64
        Of each entry.
    beyond : ndarray, shape (nnz,), bool
        At an integer column, and not +-1.
    mixed : ndarray, shape (nnz,), bool
        At a continuous column, in a row with integer ones.
    """

    row: Integers
    column: Integers
    beyond: Flags
    mixed: Flags


def entries_of(normal: NormalForm) -> Entries:
    """Look at each entry of a normalised matrix, in the order in which it is stored."""
    row = np.asarray(normal.matrix.indices, np.int64)
    column = np.repeat(np.arange(normal.columns.size), np.diff(normal.matrix.indptr))
    at_integer = normal.integer[column]
    has_integer = np.zeros(normal.rows.size, np.bool_)
    has_integer[row[at_integer]] = True
    return Entries(
        row=row,
        column=column,
        beyond=at_integer & (np.abs(normal.matrix.data) != 1),
        mixed=~at_integer & has_integer[row],
    )


def groups_of(normal: NormalForm, stems: Stems, x: Floats | None) -> tuple[Group, ...]:
    """Tabulate the groups of rows.

    Parameters
    ----------
    normal : NormalForm
    stems : Stems
        Of the form's rows.
    x : ndarray, shape (n',), float64, or None
        The relaxation's optimum.

    Returns
    -------
    tuple of Group
        In the order of the model.

    Examples
    --------
    >>> from pyomo_latpath.explain.stems import row_stems
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 1], [3, 2]], row_lower=0, row_upper=[1, 4],
    ...     col_lower=0, col_upper=1, cost=0, row_names=["town[1]", "budget"])
    >>> [(g.name, g.size, g.beyond) for g in groups_of(normalise(form), row_stems(form), None)]
    [('town', 1, 0), ('budget', 1, 2)]
    """
    entries, size = entries_of(normal), len(stems.names)
    label = stems.label[normal.rows]
    of_entry = label[entries.row]
    tight = np.zeros(normal.rows.size, np.bool_)
    if x is not None:
        activity = normal.matrix @ x
        near = TIGHT * np.maximum(1.0, np.abs(activity))
        slack = np.minimum(activity - normal.row_lower, normal.row_upper - activity)
        tight = slack <= near
    counts = (
        np.bincount(stems.label, minlength=size),
        np.bincount(of_entry, minlength=size),
        np.bincount(of_entry[entries.beyond], minlength=size),
        np.bincount(label[~(normal.whole_sides & normal.whole_rows)], minlength=size),
        np.bincount(of_entry[entries.mixed], minlength=size),
        np.bincount(label[tight], minlength=size),
    )
    return tuple(
        Group(name, rows, *told)
        for name, rows, *told in zip(
            stems.names, stems.members(), *(count.tolist() for count in counts), strict=True
        )
    )

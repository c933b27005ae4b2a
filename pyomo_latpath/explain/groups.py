"""Groups of rows that belong together, and what each brings into the matrix."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from ..forms.blocks import Block
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
        Entries that are not 0 or +-1 after scaling, in blocks with integer columns.
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
class Oddities:
    """What a certificate of total unimodularity could not do with, in blocks that need one.

    Attributes
    ----------
    row, column : ndarray, shape (nnz,), int64
        Of each entry of the normalised matrix, in the order in which it is stored.
    beyond : ndarray, shape (nnz,), bool
        Entries that are not +-1 after scaling.
    mixed : ndarray, shape (nnz,), bool
        Entries at continuous columns, in rows with integer ones.
    sides : ndarray, shape (m',), bool
        Rows with a side that is not whole after scaling.
    bounds : ndarray, shape (n',), bool
        Columns alike; only continuous ones can have such bounds.
    """

    row: Integers
    column: Integers
    beyond: Flags
    mixed: Flags
    sides: Flags
    bounds: Flags


def oddities_of(normal: NormalForm, blocks: Sequence[Block]) -> Oddities:
    """Look at each number of the blocks with several columns of which some are integer."""
    row = np.asarray(normal.matrix.indices, np.int64)
    column = np.repeat(np.arange(normal.columns.size), np.diff(normal.matrix.indptr))
    at_integer = normal.integer[column]
    has_integer = np.zeros(normal.rows.size, np.bool_)
    has_integer[row[at_integer]] = True
    rows, columns = np.zeros(normal.rows.size, np.bool_), np.zeros(normal.columns.size, np.bool_)
    for block in blocks:
        needs_one = not block.trivial and bool(normal.integer[block.columns].any())
        rows[block.rows], columns[block.columns] = needs_one, needs_one
    return Oddities(
        row=row,
        column=column,
        beyond=columns[column] & (np.abs(normal.matrix.data) != 1),
        mixed=~at_integer & has_integer[row],
        sides=rows & ~normal.whole_sides,
        bounds=columns & ~normal.whole_bounds,
    )


def groups_of(
    normal: NormalForm, stems: Stems, odd: Oddities, x: Floats | None
) -> tuple[Group, ...]:
    """Tabulate the groups of rows.

    Parameters
    ----------
    normal : NormalForm
    stems : Stems
        Of the form's rows.
    odd : Oddities
    x : ndarray, shape (n',), float64, or None
        The relaxation's optimum.

    Returns
    -------
    tuple of Group
        In the order of the model.

    Examples
    --------
    >>> from pyomo_latpath.explain.stems import row_stems
    >>> from pyomo_latpath.forms.blocks import blocks_of
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 1], [3, 2]], row_lower=0, row_upper=[1, 4],
    ...     col_lower=0, col_upper=1, cost=0, row_names=["town[1]", "budget"])
    >>> normal = normalise(form)
    >>> odd = oddities_of(normal, blocks_of(normal))
    >>> [(g.name, g.size, g.beyond) for g in groups_of(normal, row_stems(form), odd, None)]
    [('town', 1, 0), ('budget', 1, 2)]
    """
    size = len(stems.names)
    label = stems.label[normal.rows]
    of_entry = label[odd.row]
    tight = np.zeros(normal.rows.size, np.bool_)
    if x is not None:
        activity = normal.matrix @ x
        near = TIGHT * np.maximum(1.0, np.abs(activity))
        slack = np.minimum(activity - normal.row_lower, normal.row_upper - activity)
        tight = slack <= near
    counts = (
        np.bincount(stems.label, minlength=size),
        np.bincount(of_entry, minlength=size),
        np.bincount(of_entry[odd.beyond], minlength=size),
        np.bincount(label[odd.sides], minlength=size),
        np.bincount(of_entry[odd.mixed], minlength=size),
        np.bincount(label[tight], minlength=size),
    )
    return tuple(
        Group(name, rows, *told)
        for name, rows, *told in zip(
            stems.names, stems.members(), *(count.tolist() for count in counts), strict=True
        )
    )

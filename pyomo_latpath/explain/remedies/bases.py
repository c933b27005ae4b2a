"""A basis carried over to a program that differs a little, so that it is solved in a few pivots."""

from __future__ import annotations

import numpy as np

from ...forms.normalise import NormalForm
from ...highs import Basis


def with_rows(basis: Basis, m: int) -> Basis:
    """Return the basis of a program with further rows, up to m: they are basic.

    Examples
    --------
    >>> with_rows(Basis(np.array([1], np.int8), np.array([2], np.int8)), 3).row_status
    array([2, 1, 1], dtype=int8)
    """
    basic = np.ones(m - basis.row_status.size, np.int8)
    return Basis(basis.col_status, np.append(basis.row_status, basic))


def declared_basis(normal: NormalForm, basis: Basis) -> Basis:
    """Return a basis of the normalised relaxation as one of the relaxation as declared.

    Columns that normalisation fixed rest at a bound, rows that it left out are basic.
    """
    m, n = normal.form.shape
    col_status, row_status = np.zeros(n, np.int8), np.ones(m, np.int8)
    col_status[normal.columns], row_status[normal.rows] = basis.col_status, basis.row_status
    return Basis(col_status, row_status)


def normalised_basis(normal: NormalForm, basis: Basis) -> Basis | None:
    """Return a basis of the relaxation as declared as one of the normalised relaxation.

    None where as many rows and columns are no longer basic as are needed.
    """
    part = Basis(basis.col_status[normal.columns], basis.row_status[normal.rows])
    basic = int((part.col_status == 1).sum() + (part.row_status == 1).sum())
    return part if basic == normal.rows.size else None

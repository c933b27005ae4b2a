"""The relaxation as the model declares it, before sides and bounds are rounded inwards."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ..deadline import Deadline
from ..forms.linear_form import Floats, LinearForm
from ..highs import Basis, LinearProgram
from ..integrality.sampling import FRACTIONAL
from .remedies.bases import with_rows


@dataclass(frozen=True, eq=False)
class Optimum:
    """The optimum of a form's relaxation as declared, without any rounding.

    Attributes
    ----------
    bound : float
        In the model's own sense; the worst infinite one where the relaxation is infeasible.
    fractional : int
        Columns declared integer that are fractional.
    x : ndarray, shape (n,), float64
    basis : Basis
    """

    bound: float
    fractional: int
    x: Floats
    basis: Basis


def optimum_of(form: LinearForm, deadline: Deadline, near: Basis | None = None) -> Optimum | None:
    """Optimise the relaxation of a form as declared.

    Parameters
    ----------
    form : LinearForm
    deadline : Deadline
    near : Basis, optional
        To start from: of a form with the same columns and the same first rows.

    Returns
    -------
    Optimum or None
        None where it is unbounded, or where the time ran out.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[2, 2]], row_lower=0, row_upper=3, col_lower=0,
    ...                               col_upper=[1, 0], cost=1, sense="max", integer=[True, False])
    >>> optimum = optimum_of(form.replace(row_upper=1), Deadline(None))
    >>> optimum.bound, optimum.fractional
    (0.5, 1)
    """
    sign = 1.0 if form.sense == "min" else -1.0
    limits = form.row_lower, form.row_upper, form.col_lower, form.col_upper
    program = LinearProgram(form.matrix, *limits, sign * form.cost)
    if near is not None:
        program.set_basis(with_rows(near, form.shape[0]))
    result = program.solve(deadline=deadline)
    if result.status == "infeasible":
        return Optimum(sign * math.inf, 0, result.x, program.basis())
    if result.status != "optimal":
        return None
    off = form.integer & (np.abs(result.x - np.rint(result.x)) > FRACTIONAL)
    bound = form.offset + float(form.cost @ result.x)
    return Optimum(bound, int(off.sum()), result.x, program.basis())

"""The relaxation of a whole form: its optimum, its vertices, and what it is without some rows."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp
from scipy.sparse.csgraph import connected_components

from ..deadline import Deadline
from ..forms.linear_form import Flags, Floats
from ..forms.normalise import NormalForm
from ..forms.numbers import Integers
from ..highs import Basis, LpResult
from ..integrality.sampling import FRACTIONAL, program_of


@dataclass(frozen=True, eq=False)
class Place:
    """Where a vertex is fractional: columns that hang together by rows tight there.

    Attributes
    ----------
    rows, columns : ndarray, int64
        Indices into the normalised form. All columns are fractional, at least one of them is
        integer; all rows meet some.
    """

    rows: Integers
    columns: Integers


class Relaxation:
    """The linear relaxation of a normalised form, kept warm from one question to the next.

    Parameters
    ----------
    normal : NormalForm

    Attributes
    ----------
    program : LinearProgram
    basis : Basis or None
        The first optimal one.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> triangle = LinearForm.from_arrays([[1, 1, 0], [0, 1, 1], [1, 0, 1]], row_lower=0,
    ...     row_upper=1, col_lower=0, col_upper=1, cost=1, offset=2.0, sense="max")
    >>> relaxation = Relaxation(normalise(triangle))
    >>> relaxation.objective(relaxation.optimum(Deadline(None)))
    3.5
    >>> without = relaxation.optimum(Deadline(None), kept=np.array([True, True, False]))
    >>> relaxation.objective(without)
    4.0
    """

    def __init__(self, normal: NormalForm) -> None:
        self.normal = normal
        self.program = program_of(normal)
        self.basis: Basis | None = None

    def optimum(self, deadline: Deadline, kept: Flags | None = None) -> LpResult:
        """Optimise, with the kept rows of the normalised form alone where these are given.

        Each time but the first from the basis that was optimal then.
        """
        lower, upper = self.normal.row_lower, self.normal.row_upper
        if kept is not None:
            lower, upper = np.where(kept, lower, -np.inf), np.where(kept, upper, np.inf)
        self.program.set_row_bounds(lower, upper)
        if self.basis is not None:
            self.program.set_basis(self.basis)
        result = self.program.solve(deadline=deadline)
        if self.basis is None and result.status == "optimal":
            self.basis = self.program.basis()
        return result

    def objective(self, result: LpResult) -> float:
        """The optimum in the model's own units and sense; infinite where unbounded."""
        form = self.normal.form
        sign = 1.0 if form.sense == "min" else -1.0
        if result.status == "unbounded":
            return -sign * float("inf")
        if result.status != "optimal":
            return float("nan")
        constant = form.offset + float(form.cost @ self.normal.fixed_value)
        return constant + sign * float(self.normal.cost @ result.x)

    def places(self, x: Floats) -> list[Place]:
        """Where the vertex of the last solve is fractional, smallest place first."""
        tight = np.flatnonzero(self.program.basis().row_status != 1)
        return places_of(self.normal, tight, np.flatnonzero(np.abs(x - np.rint(x)) > FRACTIONAL))


def fractional(normal: NormalForm, x: Floats) -> Flags:
    """Which integer columns are fractional at a point."""
    return np.asarray(normal.integer & (np.abs(x - np.rint(x)) > FRACTIONAL))


def places_of(normal: NormalForm, rows: Integers, columns: Integers) -> list[Place]:
    """Split rows and columns into the places where they hang together, smallest first.

    Parameters
    ----------
    normal : NormalForm
    rows, columns : ndarray, int64
        Rows that are tight, columns that are fractional at a vertex.
    """
    part = normal.matrix[:, columns].tocsr()[rows, :]
    graph = sp.block_array([[None, part], [part.T, None]], format="csr")
    _, label = connected_components(graph, directed=False)
    row_label, column_label = label[: rows.size], label[rows.size :]
    places = [
        Place(rows[row_label == k], columns[column_label == k])
        for k in np.unique(column_label[normal.integer[columns]]).tolist()
    ]
    return sorted(places, key=lambda place: place.columns.size)

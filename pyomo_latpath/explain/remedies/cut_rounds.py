"""Rounds of {0, 1/2} cuts: one fractional vertex cut off after the other, and told as a remedy."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np
import scipy.sparse as sp

from ...deadline import Deadline
from ...forms.linear_form import Floats
from ...forms.normalise import NormalForm
from ...highs import Basis, LinearProgram
from ...integrality.sampling import FRACTIONAL
from ...pages.markup import counted
from ..naming import listed
from ..telling.words import inequality
from .bases import with_rows
from .cuts import Cut, excess, follows, rows_of, system_of
from .drafts import Namer, numbered
from .half_cuts import NEAR, half_cuts
from .remedy import Derivation, Inequality, Remedy

#: Rounds, cuts of one round, and cuts after which no further round begins.
MOST_ROUNDS, CUTS_A_ROUND, MANY_CUTS = 10, 100, 300
#: Rounds without a better bound after which cutting ends, and the relative change that counts.
PATIENCE, BETTER = 3, 1e-7


def cut_rounds(normal: NormalForm, deadline: Deadline, near: Basis | None = None) -> list[Cut]:
    """Cut fractional optima off until one is whole, or cuts no longer help.

    Parameters
    ----------
    normal : NormalForm
    deadline : Deadline
    near : Basis, optional
        Of its relaxation, to start from.

    Returns
    -------
    list of Cut
        Those that are tight at the last optimum, and those that they rest on; all, where the
        time ran out before it was known. Each was checked by its multipliers; its rows are
        those of the normalised form, then the cuts before it.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> triangle = LinearForm.from_arrays([[1, 1, 0], [0, 1, 1], [1, 0, 1]], row_lower=0,
    ...     row_upper=1, col_lower=0, col_upper=1, cost=1, sense="max")
    >>> [(cut.coefficients, cut.side) for cut in cut_rounds(normalise(triangle), Deadline(None))]
    [((1, 1, 1), 1)]
    """
    first = system_of(normal)
    cuts: list[Cut] = []
    at = _optimum(normal, cuts, deadline, near)
    idle = 0
    for _ in range(MOST_ROUNDS):
        if at is None or deadline.passed or len(cuts) > MANY_CUTS or idle == PATIENCE:
            break
        if not (np.abs(at.x - np.rint(at.x))[normal.integer] > FRACTIONAL).any():
            break
        system = first.with_cuts(cuts)
        found = half_cuts(system, at.x, most=CUTS_A_ROUND, deadline=deadline)
        found = [cut for cut in found if not deadline.passed and follows(system, cut)]
        if not found:
            break
        cuts, before = [*cuts, *found], at.bound
        at = _optimum(normal, cuts, deadline, at.basis)
        if at is not None:
            idle = 0 if at.bound > before + BETTER * max(1.0, abs(before)) else idle + 1
    return cuts if at is None else _needed(cuts, at.x, normal.rows.size)


def cut_remedy(normal: NormalForm, cuts: Sequence[Cut], namer: Namer) -> Remedy:
    """Tell cuts in the names of the model."""
    form, name = normal.form, namer.free("half", "cuts")
    rows = []
    for cut in cuts:
        columns = normal.columns[list(cut.columns)]
        told = Inequality(
            name="",
            columns=columns,
            column_names=tuple(form.col_names[j] for j in columns.tolist()),
            coefficients=np.array(cut.coefficients, dtype=np.float64),
            lower=-np.inf,
            upper=float(cut.side),
            derivation=_derivation(normal, cut, name),
        )
        rows.append(told)
    used = np.unique([row for cut in cuts for row in cut.rows if row < normal.rows.size])
    inequalities = numbered(name, rows)
    return Remedy(
        kind="cut",
        name=name,
        title=f"Add {counted(len(cuts), 'valid inequality', 'valid inequalities')}",
        sentence=_why(inequalities[0]),
        names=tuple(form.row_names[i] for i in normal.rows[used.astype(np.int64)].tolist()),
        verified=(
            "Each is a sum of rows and bounds by multipliers that make its coefficients whole, "
            "its right side rounded down; checked exactly."
        ),
        inequalities=inequalities,
    )


@dataclass(frozen=True, eq=False)
class _Optimum:
    """The optimum of a normalised relaxation with cuts, in scaled units and minimised."""

    x: Floats
    bound: float
    basis: Basis


def _optimum(
    normal: NormalForm, cuts: Sequence[Cut], deadline: Deadline, near: Basis | None
) -> _Optimum | None:
    """Optimise with cuts, from a basis with fewer of them; None where there is no optimum."""
    matrix = normal.matrix
    if cuts:
        matrix = sp.vstack([matrix, rows_of(cuts, normal.columns.size)], format="csc")
    program = LinearProgram(
        matrix,
        np.append(normal.row_lower, np.full(len(cuts), -np.inf)),
        np.append(normal.row_upper, [float(cut.side) for cut in cuts]),
        normal.col_lower,
        normal.col_upper,
        normal.cost,
    )
    if near is not None:
        program.set_basis(with_rows(near, matrix.shape[0]))
    result = program.solve(deadline=deadline)
    if result.status != "optimal":
        return None
    return _Optimum(result.x, result.objective, program.basis())


def _needed(cuts: Sequence[Cut], x: Floats, count: int) -> list[Cut]:
    """Cuts that are tight at a point, and those they rest on, numbered anew."""
    wanted: set[int] = set()
    for k in reversed(range(len(cuts))):
        if k in wanted or excess(cuts[k], x) > -NEAR:
            wanted.add(k)
            wanted.update(row - count for row in cuts[k].rows if row >= count)
    place = {count + k: count + new for new, k in enumerate(sorted(wanted))}
    return [
        replace(cuts[k], rows=tuple(place.get(row, row) for row in cuts[k].rows))
        for k in sorted(wanted)
    ]


def _derivation(normal: NormalForm, cut: Cut, name: str) -> Derivation:
    """A cut's multipliers in the names of the model."""
    form, count = normal.form, normal.rows.size
    rows, names = [], []
    for row in cut.rows:
        own = row < count
        rows.append(int(normal.rows[row]) if own else form.shape[0] + row - count)
        names.append(form.row_names[rows[-1]] if own else f"{name}[{row - count + 1}]")
    columns = normal.columns[list(cut.bounds)]
    return Derivation(
        rows=np.array(rows, np.int64),
        row_names=tuple(names),
        row_multipliers=cut.row_multipliers,
        columns=columns,
        column_names=tuple(form.col_names[j] for j in columns.tolist()),
        bound_multipliers=cut.bound_multipliers,
    )


def _why(row: Inequality) -> str:
    """Say what a cut is the sum of."""
    told = row.derivation
    assert told is not None
    half = all(abs(multiplier) == Fraction(1, 2) for multiplier in told.row_multipliers)
    rows = "row" if len(told.row_names) == 1 else "rows"
    bounds = f" and the bounds of {listed(told.column_names, 4)}" if told.column_names else ""
    return (
        f"{inequality(row)}. It is {'half of' if half else 'a fraction of'} {rows} "
        f"{listed(told.row_names, 9)}{bounds} together, the right side rounded down: the left "
        "side is whole at every whole plan."
    )

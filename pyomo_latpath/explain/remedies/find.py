"""What can be done about a fractional relaxation: found, proven, and tried on the model."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from ...deadline import Deadline
from ...forms.linear_form import Floats, LinearForm
from ...forms.normalise import NormalForm
from ...forms.numbers import Integers
from ...highs import Basis
from ...integrality.sampling import FRACTIONAL
from ..declared import optimum_of
from ..stems import row_stems
from .bases import declared_basis
from .cut_rounds import cut_remedy, cut_rounds
from .declarations import declaration_remedy
from .remedy import Remedy
from .row_drafts import rounding_drafts, splitting_drafts, tightening_drafts
from .trial import Trial

#: Shares of the time left: for linear programs behind smaller coefficients, for cuts, and for
#: the search for declarations that can go.
PROBING_SHARE, CUTTING_SHARE, DROPPING_SHARE = 0.2, 0.5, 0.5


def find_remedies(normal: NormalForm, basis: Basis | None, deadline: Deadline) -> Iterator[Remedy]:
    """Find out what can be done about a fractional relaxation.

    Each remedy is proven to lose no whole plan when it is found, then tried on the model. One
    that makes neither the bound better nor fewer columns fractional, alone or after those before
    it, is not told; only dropping declarations needs no such effect.

    Parameters
    ----------
    normal : NormalForm
    basis : Basis or None
        The optimal one of its relaxation, to start from.
    deadline : Deadline
        The search ends then.

    Yields
    ------
    Remedy
        In the order in which `bound_together` counts them: sides and bounds rounded, smaller
        coefficients, rows split, cuts (derived from the model with all those before them), and
        declarations that can be dropped. None for models that are infeasible, unbounded or
        semicontinuous.
    """
    form = normal.form
    if normal.conflict is not None or form.semicontinuous.any():
        return
    near = None if basis is None else declared_basis(normal, basis)
    first = optimum_of(form, deadline, near)
    if first is None:
        return
    trial = Trial(normal, first, deadline)
    yield from trial.kept_of(list(rounding_drafts(normal)))
    rows = _rows_to_probe(form, first.x)
    early = deadline.within(PROBING_SHARE * deadline.left)
    yield from trial.kept_of(list(tightening_drafts(trial.normal, rows, trial.near, early)))
    yield from trial.kept_of(list(splitting_drafts(trial.form, deadline)))
    if trial.now.fractional:
        early = deadline.within(CUTTING_SHARE * deadline.left)
        cuts = cut_rounds(trial.normal, early, trial.near)
        tried = trial.tried(cut_remedy(trial.normal, cuts, trial.namer)) if cuts else None
        if tried is not None and trial.helps(tried):
            yield from trial.kept(tried)
    early = deadline.within(DROPPING_SHARE * deadline.left)
    dropped = None if early.passed else declaration_remedy(normal, trial.namer, early)
    tried = None if dropped is None else trial.tried(dropped)
    if tried is not None:
        yield from trial.kept(tried)


def _rows_to_probe(form: LinearForm, x: Floats) -> Integers:
    """Rows with a fractional binary column, then the other rows of their groups."""
    binary = form.integer & (form.col_lower >= 0) & (form.col_upper <= 1)
    off = binary & (np.abs(x - np.rint(x)) > FRACTIONAL)
    meets = (abs(form.matrix) > 0) @ off.astype(np.int64) > 0
    label = row_stems(form).label
    alike = np.isin(label, label[meets]) & ~meets
    return np.append(np.flatnonzero(meets), np.flatnonzero(alike))

"""Looking at vertices: seeded objectives, and the exact proof that a vertex is fractional.

Two kinds of objective take turns after the true one: Gaussian ones, and the given costs times
10^U(-1, 1) with their signs kept, which stay near the face that matters (on set-covering models
they meet fractional vertices where Gaussian ones meet none).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from ..deadline import Deadline
from ..forms.linear_form import Floats
from ..forms.normalise import NormalForm
from ..forms.numbers import Integers
from ..highs import Basis, LinearProgram, LpResult
from .exact_vertex import exact_vertex
from .finding import Witness
from .infeasible import conflicting_rows

#: How far from a whole number a value counts as fractional.
FRACTIONAL = 1e-6
#: Fractional vertices that are tried for an exact proof, at most.
MOST_TRIED = 4


@dataclass(frozen=True, eq=False)
class Sample:
    """What was seen at the vertices of a block.

    Attributes
    ----------
    count : int
        Vertices looked at.
    witness : Witness or None
        A fractional one; the search ends there.
    unconfirmed : int
        Vertices that look fractional but were not confirmed in exact arithmetic.
    infeasible : bool
        Whether there are no vertices, as it seems.
    conflict : ndarray, int64, or None
        Where that is beyond doubt: the rows that contradict each other within the bounds.
    """

    count: int
    witness: Witness | None = None
    unconfirmed: int = 0
    infeasible: bool = False
    conflict: Integers | None = None


def sample_vertices(
    piece: NormalForm,
    *,
    samples: int,
    seed: int,
    deadline: Deadline,
    first: tuple[LinearProgram, LpResult] | None = None,
) -> Sample:
    """Look at vertices until one is fractional, enough are seen, or time runs out.

    Parameters
    ----------
    piece : NormalForm
        A block.
    samples : int
        Vertices to look at, the optimum of the true objective included.
    seed : int
    deadline : Deadline
    first : pair of LinearProgram and LpResult, optional
        The block's linear program and its outcome for the true objective, where these are
        known: then that is looked at in any case. The objective is put back at the end.

    Returns
    -------
    Sample

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> triangle = LinearForm.from_arrays([[1, 1, 0], [0, 1, 1], [1, 0, 1]], row_lower=-np.inf,
    ...                                   row_upper=1, col_lower=0, col_upper=1, cost=-1)
    >>> sample = sample_vertices(normalise(triangle), samples=8, seed=0, deadline=Deadline(None))
    >>> sample.count, sample.witness.values
    (1, (Fraction(1, 2), Fraction(1, 2), Fraction(1, 2)))
    """
    if not first and (samples < 1 or deadline.passed):
        return Sample(0)
    program = first[0] if first else program_of(piece)
    count, unconfirmed = 0, 0
    for k, cost in enumerate(_objectives(piece, samples, seed)):
        if k and deadline.passed:
            break
        if k or not first:
            program.set_cost(cost)
            result = program.solve(deadline=deadline)
        else:
            result = first[1]
        if result.status == "unbounded":
            program.set_cost(_turned(piece, cost))
            result = program.solve(deadline=deadline)
        if result.status == "infeasible":
            return Sample(0, infeasible=True, conflict=conflicting_rows(piece, result.farkas))
        if result.status != "optimal":
            break
        count += 1
        value = result.x[piece.integer]
        if (np.abs(value - np.rint(value)) > FRACTIONAL).any():
            witness = fractional_witness(piece, program.basis())
            if witness is not None:
                return _put_back(piece, first, Sample(count, witness))
            unconfirmed += 1
            if unconfirmed == MOST_TRIED:
                break
    return _put_back(piece, first, Sample(count, unconfirmed=unconfirmed))


def program_of(piece: NormalForm) -> LinearProgram:
    """Return the relaxation of a block, its true objective to be minimised."""
    limits = piece.row_lower, piece.row_upper, piece.col_lower, piece.col_upper
    return LinearProgram(piece.matrix, *limits, piece.cost)


def _put_back(
    piece: NormalForm, first: tuple[LinearProgram, LpResult] | None, sample: Sample
) -> Sample:
    if first:
        first[0].set_cost(piece.cost)
    return sample


def _objectives(piece: NormalForm, samples: int, seed: int) -> Iterator[Floats]:
    rng = np.random.default_rng(seed)
    size = piece.cost.size
    yield piece.cost
    for k in range(1, samples):
        if k % 2 or not piece.cost.any():
            yield rng.standard_normal(size)
        else:
            yield piece.cost * 10.0 ** rng.uniform(-1.0, 1.0, size)


def _turned(piece: NormalForm, cost: Floats) -> Floats:
    """Turn an unbounded objective towards the finite bounds: then there is an optimum."""
    lower, upper = np.isfinite(piece.col_lower), np.isfinite(piece.col_upper)
    one_sided = np.where(lower, abs(cost), np.where(upper, -abs(cost), 0.0))
    return np.asarray(np.where(lower & upper, cost, one_sided))


def fractional_witness(piece: NormalForm, basis: Basis) -> Witness | None:
    """Prove in exact arithmetic that the vertex of a basis is fractional.

    Parameters
    ----------
    piece : NormalForm
        A block.
    basis : Basis
        Its nonbasic rows and columns define the vertex.

    Returns
    -------
    Witness or None
        None if all integer columns are whole, or the vertex could not be confirmed.
    """
    values = exact_vertex(piece, basis)
    if values is None:
        return None
    if all(values[j].denominator == 1 for j in np.flatnonzero(piece.integer).tolist()):
        return None
    factors = zip(piece.col_num.tolist(), piece.col_den.tolist(), strict=True)
    return Witness(
        columns=piece.columns,
        values=tuple(v * Fraction(p, q) for v, (p, q) in zip(values, factors, strict=True)),
        tight_rows=piece.rows[basis.row_status != 1],
        tight_bounds=piece.columns[basis.col_status != 1],
    )

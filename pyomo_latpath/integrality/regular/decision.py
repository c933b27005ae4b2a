"""Whether a matrix is totally unimodular: yes with a certificate, or no with a violator."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import scipy.sparse as sp

from ...certificates import BlockCertificate, Certificate, Part
from ...deadline import Deadline
from ...forms.numbers import Integers, read_fractions, simplest_fraction
from ..recognise import prove_tu
from .clock import OutOfTime
from .conflict import determinant, smallest_conflict
from .decompose import take_apart
from .summand import Contradiction


@dataclass(frozen=True, eq=False)
class Violator:
    """A square submatrix with determinant 2 or -2, or one entry other than 0, 1 and -1.

    Every proper submatrix is totally unimodular, so that none of its lines can be left out.

    Attributes
    ----------
    rows, columns : ndarray, shape (k,), int64
        Ascending.
    determinant : Fraction
        Its determinant; of a single entry, the entry as it is read (0.5 as 1/2).
    """

    rows: Integers
    columns: Integers
    determinant: Fraction


@dataclass(frozen=True, eq=False)
class TuDecision:
    """Whether a matrix is totally unimodular, and why.

    Attributes
    ----------
    holds : bool or None
        None if the time ran out.
    certificate : Certificate or None
        If it holds: `check_certificate` accepts it for the matrix.
    violator : Violator or None
        If it does not.
    """

    holds: bool | None
    certificate: Certificate | None = None
    violator: Violator | None = None


def totally_unimodular(A: Any, *, time_limit: float | None = None) -> TuDecision:
    """Decide whether a matrix is totally unimodular (TU): all its subdeterminants are 0, 1 or -1.

    The decision is complete, by Seymour's theorem (1980, Decomposition of regular matroids):
    reductions, network matrices and their transposes, then sums of these and of R10. Entries are
    read as in a model: the simplest rational within 1e-12 counts.

    Parameters
    ----------
    A : array_like or scipy.sparse array, shape (m, n)
    time_limit : float, optional
        Seconds.

    Returns
    -------
    TuDecision

    Raises
    ------
    ValueError
        For anything but a matrix of finite numbers, and a time limit below 0.

    Examples
    --------
    >>> yes = totally_unimodular([[1, 1, 0], [0, 1, 1]])
    >>> yes.holds, yes.certificate.blocks[0].part.kind
    (True, 'network')
    >>> no = totally_unimodular([[1, 1, 0, 1], [0, 1, 1, 0], [1, 0, 1, 0]])
    >>> no.holds, no.violator.rows, no.violator.columns, int(no.violator.determinant)
    (False, array([0, 1, 2]), array([0, 1, 2]), 2)
    """
    if time_limit is not None and not time_limit >= 0:
        raise ValueError(f"time_limit is {time_limit}; it must be a number of seconds from 0 on")
    deadline = Deadline(time_limit)
    given = _matrix_of(A)
    numerator, denominator, read = read_fractions(given.data)
    for place in np.flatnonzero(~read | (denominator != 1) | (np.abs(numerator) > 1))[:1].tolist():
        return TuDecision(False, violator=_single(given, place))
    matrix = sp.csc_array((numerator, given.indices, given.indptr), shape=given.shape)
    try:
        return _decide(matrix, deadline)
    except OutOfTime:
        return TuDecision(None)


def _decide(matrix: sp.csc_array, deadline: Deadline) -> TuDecision:
    try:
        quick = prove_tu(matrix, deadline, quick=True)
        part = take_apart(matrix, deadline) if quick is None else quick[1]
    except Contradiction as found:
        rows, columns = smallest_conflict(matrix, found, deadline)
        value = determinant(matrix[:, columns][rows, :].toarray())
        assert abs(value) == 2
        return TuDecision(False, violator=Violator(rows, columns, Fraction(value)))
    return TuDecision(True, certificate=Certificate("", (_block(part, *matrix.shape),)))


def _block(part: Part, m: int, n: int) -> BlockCertificate:
    return BlockCertificate(np.arange(m), np.arange(n), ("1",) * m, ("1",) * n, part)


def _single(matrix: sp.csc_array, place: int) -> Violator:
    """The violator of one entry."""
    column = np.searchsorted(matrix.indptr, place, side="right") - 1
    return Violator(
        rows=np.array([matrix.indices[place]], np.int64),
        columns=np.array([column], np.int64),
        determinant=simplest_fraction(float(matrix.data[place])),
    )


def _matrix_of(A: Any) -> sp.csc_array:
    """Read a matrix; canonical, float64."""
    try:
        matrix = A if sp.issparse(A) else np.asarray(A)
        real = not np.iscomplexobj(matrix)
        matrix = matrix.astype(np.float64) if real else matrix
    except (TypeError, ValueError) as error:
        raise ValueError(_refusal(A)) from error
    if not real or matrix.ndim != 2:
        raise ValueError(_refusal(A))
    matrix = sp.csc_array(matrix)
    matrix.sum_duplicates()
    matrix.eliminate_zeros()
    for place in np.flatnonzero(~np.isfinite(matrix.data))[:1].tolist():
        column = int(np.searchsorted(matrix.indptr, place, side="right")) - 1
        row, value = int(matrix.indices[place]), matrix.data[place]
        raise ValueError(f"the entry of A at row {row}, column {column} is {value}; use a number")
    return matrix


def _refusal(A: Any) -> str:
    return (
        f"A, a {type(A).__name__}, is no matrix of real numbers; pass a two-dimensional array, a "
        "list of rows of equal length or a sparse array"
    )

"""Recognisers of totally unimodular matrices, cheapest first.

A new structure is one new module with `recognise(matrix)`, and one line in `RECOGNISERS`.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import scipy.sparse as sp

from ..certificates import Conetwork, Network, Part
from ..deadline import Deadline
from . import incidence, interval, network, reductions
from .regular.clock import OutOfTime
from .regular.decompose import take_apart
from .regular.signs import odd_hole
from .regular.summand import Contradiction

Recogniser = Callable[[sp.csc_array, Deadline], Part | None]
#: A structure's name and a proof.
Proof = tuple[str, Part]
#: Seconds that taking a matrix apart may take in an assessment.
SUM_SECONDS = 10.0


def _at_once(recognise: Callable[[sp.csc_array], Part | None]) -> Recogniser:
    """A recogniser that needs no more time than reading the matrix takes."""
    return lambda matrix, deadline: recognise(matrix)


def _transposed(recognise: Callable[[sp.csc_array, Deadline], Part | None]) -> Recogniser:
    def recognise_transposed(matrix: sp.csc_array, deadline: Deadline) -> Conetwork | None:
        part = recognise(matrix.T.tocsc(), deadline)
        return Conetwork(part.tree, part.arcs) if isinstance(part, Network) else None

    return recognise_transposed


#: Linear-time tests of a matrix as it stands: the structure's name, and what recognises it.
QUICK: tuple[tuple[str, Recogniser], ...] = (
    ("incidence", _at_once(incidence.recognise)),
    ("interval", _at_once(interval.recognise)),
    ("conetwork", _transposed(_at_once(incidence.recognise))),
    ("conetwork", _transposed(_at_once(interval.recognise))),
)
#: All tests, in near-linear time, cheapest first, for what reductions leave.
RECOGNISERS: tuple[tuple[str, Recogniser], ...] = (
    *QUICK,
    ("network", network.recognise),
    ("conetwork", _transposed(network.recognise)),
)


def prove_tu(
    matrix: sp.csc_array, deadline: Deadline | None = None, *, quick: bool = False
) -> Proof | None:
    """Prove a matrix totally unimodular, if it has one of the known structures.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Canonical: sorted indices, no stored zeros.
    deadline : Deadline, optional
    quick : bool
        Make only the tests that take about as long as reading the matrix.

    Returns
    -------
    (str, Part) or None
        The structure's name and the proof.

    Examples
    --------
    >>> name, part = prove_tu(sp.csc_array([[1, 1, 0, 1], [0, 1, 1, 1]]))
    >>> name, part.kind
    ('incidence', 'network')
    >>> prove_tu(sp.csc_array([[1, 1], [1, -1]])) is None
    True
    """
    if (np.abs(matrix.data) != 1).any():
        return None
    deadline = deadline or Deadline(None)
    for name, recognise in QUICK:
        part = recognise(matrix, deadline)
        if part is not None:
            return name, part
    if quick or deadline.passed:
        return None
    reduction = reductions.reduce_matrix(matrix, deadline)
    if not reduction.rows.size and not reduction.columns.size:
        empty = np.empty((0, 2), np.int64)
        return "network", reduction.prove(Network(empty, empty))
    for name, recognise in RECOGNISERS if reduction.steps else RECOGNISERS[len(QUICK) :]:
        part = None if deadline.passed else recognise(reduction.matrix, deadline)
        if part is not None:
            whole = reduction.prove(part)
            if isinstance(whole, Network) and (reduction.steps or name == "network"):
                path = name != "incidence" and np.bincount(whole.tree.ravel()).max() <= 2
                name = "interval" if path else "network"
            return name, whole
    return None


def prove_sum(matrix: sp.csc_array, deadline: Deadline) -> Proof | None:
    """Prove a matrix totally unimodular that has no other structure, by taking it apart.

    Signs that contradict each other are found soon, and most matrices that are not TU have such.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Canonical, as for `prove_tu`.
    deadline : Deadline

    Returns
    -------
    (str, Part) or None
        None also where the time ran out; `regular.decision` tells these apart.
    """
    if (np.abs(matrix.data) != 1).any():
        return None
    deadline = deadline.within(SUM_SECONDS)
    try:
        if odd_hole(matrix, deadline) is not None:
            return None
        return "sum", take_apart(matrix, deadline)
    except (Contradiction, OutOfTime):
        return None

"""Matrices to decide, and what a decision must withstand."""

from __future__ import annotations

import itertools
import json
from fractions import Fraction

import numpy as np
import scipy.sparse as sp
from all_minors import is_tu, minors
from brute_force import determinant

from pyomo_latpath.certificates import Certificate, check_certificate
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality.regular.decision import TuDecision, totally_unimodular
from pyomo_latpath.integrality.regular.signs import odd_hole


def assert_proven(matrix: np.ndarray, decision: TuDecision) -> None:
    """A yes has a certificate that passes the checker, also by way of JSON; a no a violator.

    All subdeterminants of a small violator are worked out; of a larger one, what is left without
    any of its lines must have a certificate.
    """
    matrix = np.asarray(matrix)
    if decision.holds:
        assert decision.violator is None
        text = json.dumps(decision.certificate.to_dict())
        check_certificate(matrix, Certificate.from_dict(json.loads(text)))
        return
    assert decision.holds is False
    assert decision.certificate is None
    found = decision.violator
    entries = matrix[np.ix_(found.rows, found.columns)]
    assert len(set(found.rows.tolist())) == len(set(found.columns.tolist())) == len(entries)
    table = [[Fraction(int(x)) for x in row] for row in entries]
    assert determinant(table) == found.determinant
    if len(entries) == 1:
        assert abs(entries[0, 0]) > 1
        return
    assert abs(found.determinant) == 2
    if len(entries) <= 9:
        assert all(np.abs(values).max() <= 1 for values in list(minors(entries))[:-1])
        return
    for axis, k in itertools.product((0, 1), range(len(entries))):
        less = np.delete(entries, k, axis)
        decision = totally_unimodular(less)
        assert decision.holds
        assert_proven(less, decision)


def assert_right(matrix: np.ndarray, decision: TuDecision) -> None:
    """The answer for a small matrix is that of the definition, and proven."""
    assert decision.holds == is_tu(matrix)
    assert_proven(matrix, decision)


def small_matrix(rng: np.random.Generator, most: int = 8) -> np.ndarray:
    """Up to `most` rows and columns, about half of them totally unimodular.

    Half are drawn entry by entry; the others grow, mostly by columns that keep them so.
    """
    m, n = rng.integers(1, most + 1, 2)
    if rng.random() < 0.3:
        return rng.choice([-1, 0, 1], (m, n), p=[0.2, 0.6, 0.2])
    matrix = np.zeros((m, 0), np.int64)
    for _ in range(n):
        for _ in range(4):
            column = rng.choice([-1, 0, 1], (m, 1), p=[0.25, 0.4, 0.35])
            wider = np.hstack((matrix, column))
            if is_tu(wider) or rng.random() < 0.02:
                matrix = wider
                break
    if not matrix.shape[1]:
        matrix = column
    if rng.random() < 0.3:
        place = tuple(rng.integers(matrix.shape))
        matrix[place] = rng.choice([-1, 0, 1])
    return matrix.T if rng.random() < 0.5 else matrix


def changed(rng: np.random.Generator, matrix: np.ndarray) -> np.ndarray:
    """The matrix with one entry changed."""
    matrix = matrix.copy()
    places = np.argwhere(matrix) if rng.random() < 0.5 else np.argwhere(matrix == 0)
    place = tuple(places[rng.integers(len(places))])
    matrix[place] = rng.choice([x for x in (-1, 0, 1) if x != matrix[place]])
    return matrix


def without_odd_holes(rng: np.random.Generator, support: np.ndarray) -> np.ndarray | None:
    """Signs for some nonzeros in which `odd_hole` finds no fault; None if it takes too long."""
    matrix = np.array(support, dtype=np.int64)
    for _ in range(300):
        hole = odd_hole(sp.csc_array(matrix), Deadline(None))
        if hole is None:
            return matrix
        matrix[hole[-2 * int(rng.integers(2))], hole[-1] - len(matrix)] *= -1
    return None

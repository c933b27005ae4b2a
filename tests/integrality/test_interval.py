"""Interval matrices: any signs, in the order given or a hidden one, against brute force."""

import itertools

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from hypothesis import given
from hypothesis import strategies as st

from pyomo_latpath.integrality import interval

SIGN = st.sampled_from([1, -1])


@st.composite
def intervals(draw, most_rows=6, most_columns=7):
    """Runs of ones, then rows and columns negated at random."""
    m, n = draw(st.integers(1, most_rows)), draw(st.integers(1, most_columns))
    matrix = np.zeros((m, n), np.int64)
    for j in range(n):
        first = draw(st.integers(0, m - 1))
        matrix[first : draw(st.integers(first + 1, m)), j] = 1
    rows = np.array(draw(st.lists(SIGN, min_size=m, max_size=m)))
    columns = np.array(draw(st.lists(SIGN, min_size=n, max_size=n)))
    return rows[:, None] * matrix * columns


@st.composite
def any_matrix(draw, most_rows=4, most_columns=5):
    """Any matrix of 0, 1 and -1."""
    m, n = draw(st.integers(1, most_rows)), draw(st.integers(1, most_columns))
    entries = draw(st.lists(st.sampled_from([0, 1, 1, -1]), min_size=m * n, max_size=m * n))
    return np.array(entries, np.int64).reshape(m, n)


def is_interval(matrix) -> bool:
    """Whether some negation of rows leaves each column with one run of one sign."""
    m = len(matrix)
    for signs in itertools.product([1, -1], repeat=m - 1):
        turned = matrix * np.array([1, *signs])[:, None]
        if all(_is_run(column) for column in turned.T):
            return True
    return False


def _is_run(column) -> bool:
    places = np.flatnonzero(column)
    return places.size == 0 or (
        np.ptp(places) + 1 == places.size and np.unique(column[places]).size == 1
    )


@given(intervals())
def test_interval_matrices_are_recognised_and_totally_unimodular(matrix):
    part = interval.recognise(sp.csc_array(matrix))
    part.check(sp.csc_array(matrix))
    assert is_tu(matrix)


@given(any_matrix())
def test_recognised_if_and_only_if_signs_and_runs_agree(matrix):
    part = interval.recognise(sp.csc_array(matrix))
    assert (part is not None) == (is_interval(matrix) and bool(matrix.any()))
    if part is not None:
        part.check(sp.csc_array(matrix))


@pytest.mark.parametrize(
    "matrix", [[[2, 1], [0, 1]], [[0, 0], [0, 0]]], ids=["another entry", "nothing at all"]
)
def test_other_matrices_are_left_to_others(matrix):
    assert interval.recognise(sp.csc_array(np.array(matrix))) is None

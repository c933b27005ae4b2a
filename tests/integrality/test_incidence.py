"""Matrices with at most two nonzeros a column, against the definition of total unimodularity."""

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from hypothesis import given
from hypothesis import strategies as st

from pyomo_latpath.integrality import incidence


@st.composite
def narrow(draw, most_rows=5, most_columns=6):
    """A matrix of 0, 1 and -1 with at most two nonzeros in each column."""
    m, n = draw(st.integers(1, most_rows)), draw(st.integers(1, most_columns))
    matrix = np.zeros((m, n), np.int64)
    for j in range(n):
        for i in draw(st.lists(st.integers(0, m - 1), max_size=2, unique=True)):
            matrix[i, j] = draw(st.sampled_from([1, -1]))
    return matrix


@given(narrow())
def test_recognised_if_and_only_if_totally_unimodular(matrix):
    part = incidence.recognise(sp.csc_array(matrix))
    assert (part is not None) == is_tu(matrix)
    if part is not None:
        part.check(sp.csc_array(matrix))


@given(narrow(), narrow())
def test_blocks_side_by_side_fit_one_by_one(left, right):
    both = sp.csc_array(sp.block_diag([sp.csc_array(left), sp.csc_array(right)]))
    _, fits = incidence.star(both)
    # Within one block, a column may fit although the block is not TU; all fit only if it is.
    assert fits[: left.shape[1]].all() == is_tu(left)
    assert fits[left.shape[1] :].all() == is_tu(right)


def cycle(length: int, sign: int) -> sp.csc_array:
    """Edges of a cycle (sign 1) or arcs of a directed one (sign -1), as columns."""
    here, there = np.arange(length), (np.arange(length) + 1) % length
    data = np.r_[np.ones(length, np.int64), np.full(length, sign)]
    return sp.csc_array((data, (np.r_[here, there], np.r_[here, here])), shape=(length, length))


@pytest.mark.parametrize("length", [3, 4, 5, 6, 99, 100])
def test_edge_cycles_only_if_even_arc_cycles_always(length):
    assert (incidence.recognise(cycle(length, 1)) is not None) == (length % 2 == 0)
    part = incidence.recognise(cycle(length, -1))
    assert part is not None
    part.check(cycle(length, -1))


def test_many_parallel_columns_count_as_one_link():
    odd = cycle(3, 1)
    often = sp.csc_array(sp.hstack([odd[:, [0]]] * 512 + [odd[:, [1]]] * 256 + [odd[:, [2]]]))
    assert incidence.recognise(often) is None
    assert incidence.recognise(sp.csc_array(often[:, :-1])) is not None


@pytest.mark.parametrize(
    "matrix", [[[1], [1], [1]], [[2, 0], [0, 1]], [[1, 2], [0, -1]]], ids=["wide", "two", "mixed"]
)
def test_other_matrices_are_left_to_others(matrix):
    assert incidence.recognise(sp.csc_array(np.array(matrix))) is None


def test_rows_without_entries_and_empty_columns_are_fine():
    matrix = sp.csc_array(np.array([[0, 1, 0], [0, 0, 0], [0, 1, 0]]))
    part = incidence.recognise(matrix)
    part.check(matrix)

"""Reductions: nothing left to drop, nothing lost, and trees that grow back."""

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from hypothesis import given
from hypothesis import strategies as st

from pyomo_latpath.certificates import CertificateError, Conetwork, Network, Reduced
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality import incidence, reductions


@st.composite
def signed(draw, most_rows=6, most_columns=6):
    """Any matrix of 0, 1 and -1, mostly sparse."""
    m, n = draw(st.integers(1, most_rows)), draw(st.integers(1, most_columns))
    entries = draw(st.lists(st.sampled_from([0, 0, 1, -1]), min_size=m * n, max_size=m * n))
    return np.array(entries, np.int64).reshape(m, n)


def droppable(matrix) -> bool:
    """Whether a row is zero, unit, or a copy or negation of another."""
    for i, row in enumerate(matrix):
        if np.count_nonzero(row) <= 1:
            return True
        if any(abs(row @ other) == row @ row == other @ other for other in matrix[:i]):
            return True
    return False


@given(signed())
def test_nothing_is_left_to_drop_and_nothing_is_lost(matrix):
    reduction = reductions.reduce_matrix(sp.csc_array(matrix))
    left = matrix[np.ix_(reduction.rows, reduction.columns)]
    assert np.array_equal(reduction.matrix.toarray(), left)
    assert not droppable(left) and not droppable(left.T)
    assert is_tu(left) == is_tu(matrix)


@given(signed())
def test_a_proof_of_the_rest_becomes_one_of_the_whole(matrix):
    whole = sp.csc_array(matrix)
    reduction = reductions.reduce_matrix(whole)
    network = incidence.recognise(reduction.matrix)
    across = incidence.recognise(reduction.matrix.T.tocsc())
    for part in (network, across and Conetwork(across.tree, across.arcs)):
        if part is not None:
            grown = reduction.prove(part)
            assert type(grown) is type(part)
            grown.check(whole)
            Reduced(reduction.steps, part).check(whole)
            assert is_tu(matrix)


@given(signed())
def test_a_rest_of_another_kind_keeps_the_steps(matrix):
    whole = sp.csc_array(matrix)
    reduction = reductions.reduce_matrix(whole)
    empty = Reduced((), Network(np.empty((0, 2), np.int64), np.empty((0, 2), np.int64)))
    proof = reduction.prove(empty)
    if not reduction.rows.size and not reduction.columns.size:
        proof.check(whole)
        assert Reduced.from_dict(proof.to_dict()).to_dict() == proof.to_dict()
    else:
        with pytest.raises(CertificateError):
            proof.check(whole)


@given(signed())
def test_recognised_if_nothing_is_left(matrix):
    part = reductions.recognise(sp.csc_array(matrix))
    left = reductions.reduce_matrix(sp.csc_array(matrix))
    assert (part is not None) == (left.rows.size == left.columns.size == 0)
    if part is not None:
        part.check(sp.csc_array(matrix))


def test_other_entries_are_left_to_others():
    assert reductions.recognise(sp.csc_array(np.array([[2]]))) is None


def test_a_long_chain_falls_one_by_one():
    size = 2000
    chain = sp.csc_array(sp.diags_array([np.ones(size), -np.ones(size - 1)], offsets=[0, 1]))
    chain = chain.astype(np.int64)
    reductions.recognise(chain).check(chain)


def test_a_reduction_that_ran_out_of_time_is_valid_as_far_as_it_went():
    matrix = sp.csc_array(np.tril(np.ones((30, 30), np.int64)))
    reduction = reductions.reduce_matrix(matrix, Deadline(0))
    assert reduction.steps == ()
    assert np.array_equal(reduction.matrix.toarray(), matrix.toarray())


def test_a_ladder_of_copies_falls_rung_by_rung():
    # Column k is a copy of column k - 1 but for one entry, whose row is unit by then.
    size = 300
    matrix = sp.csc_array(np.tril(np.ones((size, size), np.int64)))
    reduction = reductions.reduce_matrix(matrix)
    assert reduction.rows.size == reduction.columns.size == 0
    assert {step.reason for step in reduction.steps} >= {"unit", "copy"}
    reductions.recognise(matrix).check(matrix)

"""The decision, both ways: against the definition, and by its proofs."""

import itertools
from fractions import Fraction

import numpy as np
import pytest
import scipy.sparse as sp
from decisions import assert_proven, assert_right, changed, small_matrix, without_odd_holes
from known_matrices import FANO, R10
from regular_models import disguised, regular

import pyomo_latpath as latpath
from pyomo_latpath.certificates import check_certificate
from pyomo_latpath.integrality.regular.decision import totally_unimodular

SIZE = 4


def all_matrices(size: int) -> np.ndarray:
    """All square matrices of 0, 1 and -1 up to orders and signs of rows and columns.

    Grown row by row. Rows are numbered; each order and signs of the columns turns a row into
    another, up to its sign. Of all that a matrix turns into, the one with the least rows stands
    for it. Zero rows and columns make the smaller ones of these.
    """
    rows = np.array(list(itertools.product([0, 1, -1], repeat=size)))
    number = {tuple(row): k for k, row in enumerate(rows.tolist())}
    turns = []
    for order in itertools.permutations(range(size)):
        for signs in itertools.product([1, -1], repeat=size):
            turned = (rows[:, order] * signs).tolist()
            turns.append([min(number[tuple(r)], number[tuple(-x for x in r)]) for r in turned])
    turn = np.array(turns)
    found = {()}
    for _ in range(size):
        grown = set()
        for some in found:
            for row in range(len(rows)):
                every = np.sort(turn[:, [*some, row]], axis=1)
                grown.add(tuple(every[np.lexsort(every.T[::-1])[0]].tolist()))
        found = grown
    return rows[np.array(sorted(found))]


def test_all_matrices_of_four_rows_and_columns():
    matrices = all_matrices(SIZE)
    assert len(matrices) > 500
    for matrix in matrices:
        for table in (matrix, matrix.T):
            assert_right(table, totally_unimodular(table))


@pytest.mark.parametrize("seed", range(100, 104))
def test_random_matrices_against_the_definition(seed):
    rng = np.random.default_rng(seed)
    answers = set()
    for _ in range(5000):
        matrix = small_matrix(rng)
        decision = totally_unimodular(matrix)
        assert_right(matrix, decision)
        answers.add(decision.holds)
    assert answers == {True, False}


def test_small_matrices_without_odd_holes_against_the_definition():
    rng = np.random.default_rng(1)
    others = 0
    for _ in range(250):
        support = rng.random(rng.integers(3, 9, 2)) < rng.choice([0.3, 0.5, 0.6])
        matrix = without_odd_holes(rng, support)
        if matrix is not None:
            decision = totally_unimodular(matrix)
            assert_right(matrix, decision)
            if not decision.holds:
                part = matrix[np.ix_(decision.violator.rows, decision.violator.columns)]
                others += (np.count_nonzero(part, axis=0) > 2).any()
    assert others > 2


@pytest.mark.parametrize("seed", range(30))
@pytest.mark.parametrize("orders", [(2,), (3,), (1, 2, 3)], ids=["two", "three", "all"])
def test_sums_of_networks_their_transposes_and_r10(seed, orders):
    rng = np.random.default_rng(seed)
    leaves, size = int(rng.integers(1, 7)), int(rng.integers(3, 9))
    piece = regular(rng, leaves, size, orders=orders)
    matrix = disguised(rng, piece, pivots=int(rng.integers(5))).matrix
    decision = totally_unimodular(matrix)
    assert decision.holds
    assert_proven(matrix, decision)
    for _ in range(2):
        other = changed(rng, matrix)
        assert_proven(other, totally_unimodular(other))


@pytest.mark.parametrize("seed", range(4))
def test_sums_of_hundreds_of_lines(seed):
    rng = np.random.default_rng(seed)
    piece = regular(rng, 12, 15, kinds=("network", "conetwork"), orders=(3, 3, 2))
    matrix = disguised(rng, piece, pivots=2).matrix
    assert sum(matrix.shape) > 250
    decision = totally_unimodular(sp.csr_array(matrix))
    assert decision.holds
    assert decision.certificate.blocks[0].part.kind == "sum"
    assert_proven(matrix, decision)
    other = changed(rng, matrix)
    assert_proven(other, totally_unimodular(other))


@pytest.mark.parametrize("seed", range(12))
def test_larger_matrices_without_odd_holes(seed):
    rng = np.random.default_rng(seed)
    while True:
        piece = disguised(rng, regular(rng, 3, 6), pivots=3)
        matrix = without_odd_holes(rng, changed(rng, np.abs(piece.matrix)) != 0)
        if matrix is not None:
            break
    assert_proven(matrix, totally_unimodular(matrix))


@pytest.mark.parametrize("matrix", [*R10, *(-table.T for table in R10)])
def test_r10(matrix):
    decision = totally_unimodular(matrix)
    assert decision.certificate.blocks[0].part.kind == "r10"
    assert_proven(matrix, decision)
    for place in np.argwhere(matrix):
        other = matrix.copy()
        other[tuple(place)] *= -1
        assert totally_unimodular(other).holds is False


def test_r10_in_a_matroid_that_is_not_regular():
    for column in itertools.product([0, 1], repeat=5):
        wider = np.hstack((np.abs(R10[0]), np.array(column)[:, None]))
        for signs in ([1] * 5, [1, -1, 1, -1, 1]):
            matrix = np.hstack((R10[0], (wider[:, 5] * signs)[:, None]))
            assert_right(matrix, totally_unimodular(matrix))


def test_no_signs_make_the_fano_matrix_tu():
    for signs in itertools.product([1, -1], repeat=6):
        matrix = FANO.copy()
        matrix[1:, 1:] *= np.array(signs).reshape(2, 3)
        for table in (matrix, matrix.T):
            decision = totally_unimodular(table)
            assert decision.holds is False
            assert_proven(table, decision)


def test_blocks_are_decided_one_by_one():
    rng = np.random.default_rng(3)
    pieces = [disguised(rng, regular(rng, 2, 4, orders=(3,))).matrix for _ in range(6)]
    matrix = sp.block_diag(pieces).toarray().astype(int)
    order = rng.permutation(len(matrix))
    decision = totally_unimodular(matrix[order])
    assert decision.holds
    assert_proven(matrix[order], decision)
    other = sp.block_diag([*pieces, FANO]).toarray().astype(int)
    decision = totally_unimodular(other)
    assert_proven(other, decision)
    assert decision.violator.rows.min() >= len(matrix)


@pytest.mark.parametrize("shape", [(0, 0), (0, 3), (3, 0), (2, 2)])
def test_matrices_without_entries(shape):
    decision = totally_unimodular(np.zeros(shape))
    assert decision.holds
    check_certificate(np.zeros(shape), decision.certificate)


@pytest.mark.parametrize(
    ("entry", "value"), [(2, 2), (-3, -3), (0.5, Fraction(1, 2)), (0.1 + 0.2, Fraction(3, 10))]
)
def test_one_entry_can_be_the_violator(entry, value):
    found = latpath.totally_unimodular([[1, 0, 1], [0, entry, 1]]).violator
    assert (found.rows.tolist(), found.columns.tolist()) == ([1], [1])
    assert found.determinant == value


def test_every_form_of_a_matrix():
    table = [[1, -1, 0], [0, 1, 1]]
    for matrix in (
        table,
        np.array(table),
        np.array(table, dtype=np.int8),
        np.array(table) * (1 + 1e-14),
        np.array(table, dtype=object),
        sp.coo_array(np.array(table)),
        sp.csr_matrix(np.array(table, dtype=float)),
        sp.csc_array(([1, -2, 1, 1, 1], ([0, 0, 0, 1, 1], [0, 1, 1, 1, 2])), shape=(2, 3)),
    ):
        decision = totally_unimodular(matrix)
        assert decision.holds, matrix
        check_certificate(matrix, decision.certificate)
    given = sp.csc_array(([1.0, 0.0], ([0, 1], [0, 0])), shape=(2, 2))
    totally_unimodular(given)
    assert given.nnz == 2  # what is given stays as it is


@pytest.mark.parametrize(
    ("matrix", "words"),
    [
        ([1, 0, 1], "a list, is no matrix"),
        (np.zeros((2, 2, 2)), "two-dimensional"),
        ([[1, 0], [1]], "rows of equal length"),
        ([["a", "b"]], "no matrix of real numbers"),
        ([[1j, 0]], "real numbers"),
        (None, "NoneType"),
        ([[0, 1], [np.nan, 1]], "at row 1, column 0 is nan"),
        (sp.csc_array([[0, np.inf]]), "row 0, column 1"),
    ],
)
def test_what_is_no_matrix_is_refused(matrix, words):
    with pytest.raises(ValueError, match=words):
        totally_unimodular(matrix)


@pytest.mark.parametrize("limit", [-1, np.nan])
def test_a_time_limit_out_of_range_is_refused(limit):
    with pytest.raises(ValueError, match="time_limit"):
        totally_unimodular([[1]], time_limit=limit)


def test_without_time_there_is_no_answer_but_the_obvious_one():
    rng = np.random.default_rng(0)
    matrix = disguised(rng, regular(rng, 8, 20, orders=(3, 2))).matrix
    decision = totally_unimodular(matrix, time_limit=0)
    assert (decision.holds, decision.certificate, decision.violator) == (None, None, None)
    assert totally_unimodular([[1, 2]], time_limit=0).holds is False
    assert totally_unimodular(matrix, time_limit=300).holds
    for limit in (0.001, 0.01, 0.05, 0.2):
        decision = totally_unimodular(matrix, time_limit=limit)
        assert decision.holds in (True, None)
        if decision.holds:
            assert_proven(matrix, decision)

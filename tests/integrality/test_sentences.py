"""What people read about a certificate: true of it, and short."""

import numpy as np
import pytest
import scipy.sparse as sp
from known_matrices import R10, R12
from regular_models import disguised, leaf, regular, two_sum
from sum_proofs import leaf_part, sum_proofs

from pyomo_latpath.certificates import (
    Network,
    Pivot,
    Reduced,
    Split,
    Step,
    Sum,
    Trivial,
    Unimodular,
)
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality.assess import assess
from pyomo_latpath.integrality.recognise import prove_tu
from pyomo_latpath.integrality.sentences import describe, describe_part, shape_of

LINE = Network(np.array([[0, 1]]), np.array([[0, 1], [1, 0]]))


def told(matrix):
    """The sentence on what is recognised."""
    matrix = sp.csc_array(np.array(matrix))
    return describe(*prove_tu(matrix), matrix)


def transport(sources, sinks):
    """One row for each source and each sink, one column for each pair of them."""
    pairs = np.eye(sources, dtype=np.int64), np.eye(sinks, dtype=np.int64)
    ones = [np.ones(size, np.int64) for size in (sources, sinks)]
    return np.vstack([np.kron(pairs[0], ones[1]), np.kron(ones[0], pairs[1])])


@pytest.mark.parametrize("signs", [1, -1])
def test_a_transport_network_has_two_sides(signs):
    matrix = transport(3, 5)
    matrix[:3] *= signs
    expected = "a transport network: 3 rows on one side, 5 on the other, 15 columns"
    assert told(matrix) == (expected if signs == 1 else "a flow network: 8 nodes, 15 arcs")


def test_a_network_with_nodes_on_two_sides():
    assert told([[1, 1, 0], [1, 0, 1], [0, -1, 1]]) == "a network: 3 nodes on two sides, 3 arcs"


def test_one_nonzero_in_each_column():
    matrix = sp.csc_array(np.array([[1, -1, 1]]))
    sentence = describe("incidence", prove_tu(matrix)[1], matrix)
    assert sentence == "3 columns over 1 row, each in one row only"


def test_intervals_networks_and_transposes():
    intervals = [[1, 1, 0, 1], [1, 1, 1, 0], [1, 0, 1, 0]]
    assert told(intervals) == "an interval matrix: 4 columns, each over consecutive ones of 3 rows"
    rng = np.random.default_rng(0)
    piece = leaf(rng, "network", 0, 1200, None)
    m, n = piece.matrix.shape
    assert m > 1000
    assert told(piece.matrix) == f"a network: {n:,} columns, each a path in a tree of {m:,} rows"
    assert told(piece.matrix.T) == (
        f"the transpose of a network: {n:,} rows, each a path in a tree of {m:,} columns"
    )


def test_few_summands_are_told_one_by_one():
    split = Split(np.array([1]), np.array([2]), np.array([[1, 0]]))
    part = Sum((split,), (LINE, leaf_part(sp.csc_array(R10[0]))))
    whole, *summands = describe_part(part, 5, 6)
    assert whole == "a 2-sum of a network matrix (1 row, 2 columns) and R10"
    assert summands == ["summand 1: a network matrix (1 row, 2 columns)", "summand 2: R10"]


def test_many_summands_are_counted():
    rng = np.random.default_rng(2)
    piece = leaf(rng, "R10", 0, 5, None)
    for name in range(1, 5):
        piece = two_sum(rng, piece, leaf(rng, "R10", name, 5, None))
    piece = two_sum(rng, piece, leaf(rng, "network", 5, 9, None))
    whole, *summands = describe_part(next(sum_proofs(piece)), *piece.matrix.shape)
    assert whole.startswith("five 2-sums of five copies of R10 and a network matrix (")
    assert len(summands) == 6


@pytest.mark.parametrize("seed", range(20))
def test_the_shape_of_a_sum_is_known_from_its_parts(seed):
    rng = np.random.default_rng(seed)
    piece = disguised(rng, regular(rng, 3, 6, orders=(1, 2, 3, 3)))
    for proof in sum_proofs(piece):
        assert shape_of(proof) == piece.matrix.shape
        m, n = piece.matrix.shape
        copied = Sum((Step("row", m, "copy", 0, 1), *proof.steps), proof.parts)
        assert shape_of(Pivot(0, 0, copied)) == (m + 1, n)
        zero = Step("column", n, "zero")
        assert shape_of(Reduced((zero,), Unimodular(np.empty((0, 3)), proof))) == (m, n + 1)


def test_what_is_done_before_the_rest_is_proven_is_told():
    assert describe_part(Pivot(0, 0, LINE), 1, 2) == [
        "after a pivot, a network matrix (1 row, 2 columns)"
    ]
    reduced = Reduced((Step("row", 1, "zero"),), LINE)
    assert describe_part(reduced, 2, 2) == [
        "a network matrix (1 row, 2 columns), once one line that is zero, unit or a copy is left "
        "out"
    ]
    system = Unimodular(np.array([[0, 1, 2], [0, 0, 3]]), Trivial())
    assert describe_part(system, 2, 7) == [
        "after 2 row operations with equations, bounds on single columns (2 rows, 7 columns)"
    ]


def test_a_finding_tells_what_a_sum_is_put_together_from():
    form = LinearForm.from_arrays(
        R12, row_lower=0, row_upper=3, col_lower=0, col_upper=2, cost=np.arange(6)
    )
    (block,) = assess(form).blocks
    assert block.structure == "sum"
    first, second = block.reason.removesuffix(" (Seymour 1980)").split(" and ")
    network, transpose = "a network matrix (4 rows, 5 columns)", "the transpose of "
    assert {first.removeprefix("a 3-sum of "), second} == {network, transpose + network}

"""The difference of two plans as a sum of elementary changes that agree with it in sign."""

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from hypothesis import given, settings
from hypothesis import strategies as st
from known_matrices import R10
from tu_models import KINDS, plans, tu_form

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality.recognise import prove_tu
from pyomo_latpath.paths import moves
from pyomo_latpath.paths.moves import cycles, elementary_changes
from pyomo_latpath.paths.network_oracle import NetworkStructure


def check_sum(matrix, difference, changes):
    """Whole changes with the sum asked for, none against it in any column or activity."""
    total = np.zeros(difference.size)
    for change in changes:
        vector = np.zeros(difference.size)
        vector[change.columns] = change.amounts
        assert (change.amounts != 0).all()
        assert (np.rint(change.amounts) == change.amounts).all()
        assert (np.diff(change.columns) > 0).all()
        for part, whole in ((vector, difference), (matrix @ vector, matrix @ difference)):
            assert (part * whole >= 0).all()
            assert (np.abs(part) <= np.abs(whole)).all()
        total += vector
    assert np.array_equal(total, difference)


def check_elementary(matrix, changes):
    """At most n multiples of vectors in {0, 1, -1} whose support holds no smaller one."""
    m, n = matrix.shape
    assert len(changes) <= n
    system = np.hstack([matrix, -np.eye(m)])
    for change in changes:
        vector = np.zeros(n)
        vector[change.columns] = change.amounts
        whole = np.concatenate([vector, matrix @ vector])
        assert len(set(np.abs(whole[whole != 0]))) == 1
        support = system[:, whole != 0]
        assert np.linalg.matrix_rank(support) == support.shape[1] - 1


def test_the_matrix_beyond_networks_is_totally_unimodular():
    assert all(is_tu(matrix) for matrix in R10)


@given(st.sampled_from(KINDS), st.integers(0, 10**6), st.booleans())
@settings(max_examples=150)
def test_elementary_changes_of_totally_unimodular_blocks(kind, seed, walked):
    rng = np.random.default_rng(seed)
    form, _ = tu_form(rng, kind, m=int(rng.integers(1, 6)), n=int(rng.integers(1, 7)))
    everything = plans(form)
    before, after = (everything[k] for k in rng.integers(0, len(everything), 2))
    matrix, difference = form.matrix, after - before
    structure = None
    if walked:
        proof = prove_tu(sp.csc_array(matrix.astype(np.int64)))
        if proof is not None and proof[1].kind == "network":
            structure = NetworkStructure(proof[1].tree, proof[1].arcs)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(moves, "MANY", -1)
        changes = elementary_changes(matrix, difference, form.cost, structure)
    check_sum(matrix, difference, changes)
    check_elementary(matrix.toarray(), changes)


@given(st.integers(0, 10**6))
@settings(max_examples=60)
def test_other_matrices_are_split_as_far_as_whole_numbers_go(seed):
    rng = np.random.default_rng(seed)
    m, n = rng.integers(1, 5, 2)
    matrix = sp.csc_array(rng.integers(-3, 4, (m, n)).astype(float))
    difference = rng.integers(-5, 6, n).astype(float)
    check_sum(matrix, difference, elementary_changes(matrix, difference, rng.normal(size=n)))


def test_an_odd_cycle_moves_as_a_whole():
    triangle = sp.csc_array([[1.0, 1, 0], [0, 1, 1], [1, 0, 1]])
    apart = elementary_changes(triangle, np.array([1.0, -1, 1]), np.zeros(3))
    check_sum(triangle, np.array([1.0, -1, 1]), apart)
    # Half of a change is none: what fits less than once stays with the rest.
    halves = sp.csc_array([[2.0, -1, -1]])
    (together,) = elementary_changes(halves, np.array([1.0, 1, 1]), np.array([0.0, -1, 1]))
    assert together.columns.tolist() == [0, 1, 2]
    apart = elementary_changes(sp.csc_array([[5.0, 5, -2]]), np.array([2.0, 4, 15]), -np.ones(3))
    assert {tuple(change.amounts) for change in apart} == {(2.0, 5.0), (4.0, 10.0)}


def test_the_best_gain_per_unit_comes_first():
    matrix = sp.csc_array([[1.0, 1, 1, 1, 1, 1]])
    difference, cost = np.array([-1.0, 1, -1, 1, -1, 1]), np.array([3.0, 1, 9, 2, 5, 4])
    gains = [
        -float(cost[change.columns] @ change.amounts)
        for change in elementary_changes(matrix, difference, cost)
    ]
    assert gains[0] == 8.0
    assert sum(gains) == 10.0


def test_without_time_all_stays_together():
    difference = np.array([-1.0, 1, -1, 1])
    matrix = sp.csc_array(np.ones((1, 4)))
    (change,) = elementary_changes(matrix, difference, np.ones(4), deadline=Deadline(0))
    assert change.amounts.tolist() == difference.tolist()


@given(st.integers(0, 10**6))
@settings(max_examples=100)
def test_a_circulation_is_a_sum_of_simple_cycles(seed):
    rng = np.random.default_rng(seed)
    tails, heads, amounts = [], [], []
    for _ in range(int(rng.integers(0, 6))):
        around = rng.permutation(6)[: rng.integers(1, 7)].tolist()
        tails += around
        heads += around[1:] + around[:1]
        amounts += [int(rng.integers(1, 5))] * len(around)
    left = list(amounts)
    found = list(cycles(tails, heads, amounts))
    assert len(found) <= len(amounts)
    for arcs, amount in found:
        assert amount > 0
        assert len({tails[arc] for arc in arcs}) == len(arcs)
        for arc, following in zip(arcs, arcs[1:] + arcs[:1], strict=True):
            assert heads[arc] == tails[following]
            left[arc] -= amount
    assert not any(left)


def test_what_is_no_circulation_is_refused():
    with pytest.raises(ValueError, match="node 1 takes in more"):
        list(cycles([0], [1], [1]))


def test_a_flow_of_many_arcs_is_walked():
    rng = np.random.default_rng(0)
    tail, step = rng.integers(0, 50, 2000), rng.integers(1, 50, 2000)
    head, index = (tail + step) % 50, np.arange(2000)
    matrix = sp.csc_array(
        (np.repeat([1.0, -1.0], 2000), (np.append(tail, head), np.tile(index, 2)))
    )
    difference = rng.integers(-3, 4, 2000).astype(float)
    proof = prove_tu(sp.csc_array(matrix.astype(np.int64)))
    structure = NetworkStructure(proof[1].tree, proof[1].arcs)
    changes = elementary_changes(matrix, difference, np.zeros(2000), structure)
    check_sum(matrix, difference, changes)
    assert len(changes) > 100

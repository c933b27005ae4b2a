"""Networks in disguise: all that are ones, none that is not, signs and certificates."""

import itertools

import numpy as np
import pytest
import scipy.sparse as sp
from graph_search import (
    bits,
    is_network,
    is_realisable,
    is_realisable_by_bridges,
)
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.sparse.csgraph import connected_components

from pyomo_latpath.certificates import Conetwork, Network
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality import network
from pyomo_latpath.integrality.graph_realisation import realise
from pyomo_latpath.integrality.recognise import prove_tu


def random_network(m, n, rng, reach=1000, local=1000):
    """A network matrix in disguise; small `reach`: long paths; small `local`: ends close by."""
    parent = [0] * (m + 1)
    for node in range(1, m + 1):
        parent[node] = int(rng.integers(max(0, node - reach), node))
    matrix = np.zeros((m, n), np.int64)
    for j in range(n):
        x = int(rng.integers(m + 1))
        y = int(np.clip(x + rng.integers(-local, local + 1), 0, m))
        while x != y:
            if x > y:
                matrix[x - 1, j], x = 1, parent[x]
            else:
                matrix[y - 1, j], y = -1, parent[y]
    return disguised(matrix, rng)


def disguised(matrix, rng):
    """Rows and columns in another order, some negated."""
    m, n = matrix.shape
    signs = rng.choice([1, -1], (m, 1)) * rng.choice([1, -1], n)
    return (signs * matrix)[rng.permutation(m)][:, rng.permutation(n)]


def judge(matrix):
    """Whether a network is found; a found one is checked."""
    matrix = sp.csc_array(matrix)
    part = network.recognise(matrix)
    if part is not None:
        part.check(matrix)
    return part is not None


def small_matrices(m, n):
    """One of each class that is alike up to the order and signs of columns, the order of rows."""
    up_to_sign = [c for c in itertools.product((0, 1, -1), repeat=m) if c >= tuple(-x for x in c)]
    seen = set()
    for columns in itertools.combinations_with_replacement(up_to_sign, n):
        if columns not in seen:
            yield np.array(columns).T
            for order in itertools.permutations(range(m)):
                again = [tuple(column[i] for i in order) for column in columns]
                again = [max(column, tuple(-x for x in column)) for column in again]
                seen.add(tuple(sorted(again, key=up_to_sign.index)))


@pytest.mark.parametrize(("m", "n"), [(3, 4), (4, 3)])
def test_all_small_matrices_up_to_symmetry(m, n):
    seen = {True: 0, False: 0}
    for matrix in small_matrices(m, n):
        answer = judge(matrix)
        assert answer == is_network(matrix), matrix
        seen[answer] += 1
    assert min(seen.values()) > 100


def test_random_matrices_against_all_trees():
    rng = np.random.default_rng(1)
    seen = {True: 0, False: 0}
    for k in range(1500):
        m, n = rng.integers(2, 7), rng.integers(1, 9)
        matrix = rng.choice([0, 0, 1, -1], (m, n))
        if k % 2:
            matrix = random_network(m, n, rng)
            for _ in range(rng.integers(3)):
                matrix[rng.integers(m), rng.integers(n)] = rng.integers(-1, 2)
        answer = judge(matrix)
        assert answer == is_network(matrix), matrix
        seen[answer] += 1
    assert min(seen.values()) > 300


def test_random_places_of_nonzeros_against_bridges():
    rng = np.random.default_rng(5)
    seen = {True: 0, False: 0}
    for _ in range(4000):
        matrix = rng.choice([0, 0, 1], rng.integers(4, 8, 2))
        answer = realise(sp.csc_array(matrix)) is not None
        assert answer == is_realisable_by_bridges(bits(matrix)), matrix
        seen[answer] += 1
    assert min(seen.values()) > 300


@given(st.data())
def test_places_of_nonzeros_against_all_trees(data):
    m, n = data.draw(st.integers(1, 6)), data.draw(st.integers(1, 8))
    column = st.integers(0, 2**m - 1)
    columns = data.draw(st.lists(column, min_size=n, max_size=n))
    matrix = np.array([[column >> i & 1 for column in columns] for i in range(m)])
    answer = realise(sp.csc_array(matrix)) is not None
    assert answer == is_realisable(matrix) == is_realisable_by_bridges(bits(matrix))


def test_larger_ones_with_changed_entries_against_bridges():
    rng = np.random.default_rng(2)
    seen = {True: 0, False: 0}
    for _ in range(600):
        m = int(rng.integers(5, 40))
        reach, local = rng.choice([1, 2, 3, 1000]), rng.choice([3, 8, 1000])
        matrix = random_network(m, int(rng.integers(2, 2 * m)), rng, reach, local)
        for _ in range(rng.integers(1, 3)):
            i, j = (rng.integers(size) for size in matrix.shape)
            matrix[i, j] = 0 if matrix[i, j] else 1
        answer = realise(sp.csc_array(matrix)) is not None
        assert answer == is_realisable_by_bridges(bits(matrix))
        seen[answer] += 1
    assert min(seen.values()) > 100


@pytest.mark.parametrize("reach", [1, 2, 5, 1000])
@pytest.mark.parametrize("local", [3, 20, 1000])
def test_hundreds_of_rows_in_disguise(reach, local):
    rng = np.random.default_rng(reach + local)
    for n in (150, 300, 600):
        matrix = random_network(300, n, rng, reach, local)
        assert judge(matrix)
        across = sp.csc_array(matrix.T)
        name, part = prove_tu(across)
        part.check(across)
        assert isinstance(part, Network | Conetwork), name


def test_hundreds_of_rows_with_one_entry_changed():
    """Places by the slow way; a wrong sign is one in a cycle of rows and columns (Camion 1965)."""
    rng = np.random.default_rng(3)
    seen = {(changed, answer): 0 for changed in (0, 1) for answer in (True, False)}
    for k in range(60):
        matrix = random_network(200, 250, rng, rng.choice([2, 1000]), rng.choice([6, 1000]))
        changed = k % 2
        if changed:
            i, j = (int(rng.choice(places)) for places in (200, 250))
            matrix[i, j] = 0 if matrix[i, j] else 1
            whole = is_realisable_by_bridges(bits(matrix))
            assert (realise(sp.csc_array(matrix)) is not None) == whole
        else:
            line = rng.permutation(np.flatnonzero((matrix != 0).sum(axis=k % 4 // 2) > 0))[0]
            one = matrix[:, line] if k % 4 == 0 else matrix[line]
            at = rng.choice(np.flatnonzero(one))
            i, j = (at, line) if k % 4 == 0 else (line, at)
            matrix[i, j] *= -1
            whole = in_no_cycle(matrix, i, j)
            assert judge(matrix) == whole
        seen[changed, whole] += 1
    assert all(seen.values()), seen


def in_no_cycle(matrix, i, j):
    """Whether an entry is a bridge of the graph that links rows and columns by the nonzeros."""
    m, n = matrix.shape
    without = matrix.copy()
    without[i, j] = 0
    links = sp.block_array([[sp.coo_array((m, m)), without], [None, sp.coo_array((n, n))]])
    _, piece = connected_components(links.tocsr(), directed=False)
    return piece[i] != piece[m + j]


@settings(max_examples=50)
@given(st.integers(0, 10**6))
def test_several_blocks_empty_lines_and_copies(seed):
    rng = np.random.default_rng(seed)
    parts = [random_network(*rng.integers(1, 9, 2), rng) for _ in range(rng.integers(1, 5))]
    whole = sp.block_diag(parts).toarray().astype(np.int64)
    whole = np.hstack([whole, -whole[:, rng.integers(whole.shape[1], size=2)]])
    whole = np.vstack([whole, whole[rng.integers(len(whole), size=2)], 0 * whole[:1]])
    assert judge(disguised(np.hstack([whole, 0 * whole[:, :1]]), rng))


@pytest.mark.parametrize("shape", [(0, 0), (0, 3), (3, 0), (1, 1), (4, 4)])
def test_zero_matrices_are_network_matrices(shape):
    assert judge(np.zeros(shape, np.int64))


def test_no_others_than_0_1_and_minus_1():
    assert not judge(np.array([[2]]))


def test_no_time_no_answer():
    matrix = sp.csc_array(random_network(5, 5, np.random.default_rng(4)))
    assert network.recognise(matrix, Deadline(0)) is None
    assert network.recognise(matrix) is not None


def test_deep_trees_of_members_and_the_column_across_them():
    """Each column overlaps the next by one row, so that polygons hang together in a long chain;
    one column across all of them makes one member of them."""
    size = 3000
    chain = sp.csc_array(
        sp.diags_array([np.ones(size)] * 2, offsets=[0, -1], shape=(size + 1, size))
    )
    ends = sp.csc_array((np.ones(2), ([0, size], [0, 0])), shape=(size + 1, 1))
    whole = sp.csc_array(np.ones((size + 1, 1)))
    # The rows are a path; as the size is even, its ends alone are none.
    assert judge(sp.hstack([chain, whole]).astype(np.int64))
    assert judge(sp.hstack([chain, ends, whole]).astype(np.int64)) is False

"""Published theorems and matrices, checked whole on small cases."""

import itertools
from fractions import Fraction

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu, minors
from brute_force import determinant, network_matrix, vertices
from known_matrices import FANO, R10
from small_forms import TRIANGLE

from pyomo_latpath.certificates import CertificateError, Conetwork, Network
from pyomo_latpath.integrality import incidence, interval
from pyomo_latpath.integrality.recognise import prove_tu


def random_matrices(count, most_rows, most_columns, seed, entries=(0, 0, 1, 1, -1)):
    rng = np.random.default_rng(seed)
    for _ in range(count):
        shape = rng.integers(1, most_rows + 1), rng.integers(1, most_columns + 1)
        yield rng.choice(entries, shape)


def all_whole_for_whole_sides(matrix, largest):
    """Whether {x >= 0, Ax <= b} has whole vertices for all whole b up to a size."""
    m, n = matrix.shape
    none, ever = np.full(m, -np.inf), np.full(n, np.inf)
    return all(
        value.denominator == 1
        for b in itertools.product(range(-largest, largest + 1), repeat=m)
        for point in vertices(matrix, none, np.array(b), np.zeros(n), ever)
        for value in point
    )


def rooted_trees(m):
    """Every tree on nodes 0 to m, as the list of its arcs; that of node i + 1 is row i."""
    for parents in itertools.product(range(m + 1), repeat=m):
        arcs = [(node + 1, parent) for node, parent in enumerate(parents)]
        if all(reaches_root(parents, node) for node in range(1, m + 1)):
            yield arcs


def reaches_root(parents, node):
    for _ in parents:
        if node == 0:
            return True
        node = parents[node - 1]
    return node == 0


def is_network(matrix):
    """Whether some tree, its arcs pointing either way, has all columns as paths."""
    m = len(matrix)
    pairs = list(itertools.product(range(m + 1), repeat=2))
    signs = [np.array(s)[:, None] for s in itertools.product((1, -1), repeat=m)]
    turned = [[tuple(column) for column in (s * matrix).T] for s in signs]
    for tree in rooted_trees(m):
        paths = {tuple(column) for column in network_matrix(tree, pairs).T}
        if any(all(column in paths for column in columns) for columns in turned):
            return True
    return False


def forged_networks(m, n, count, seed):
    """Network certificates of the right shape that mean other matrices."""
    rng = np.random.default_rng(seed)
    trees = list(rooted_trees(m))
    for _ in range(count):
        tree = np.array(trees[rng.integers(len(trees))])
        flip = rng.random(m) < 0.5
        tree[flip] = tree[flip][:, ::-1]
        yield tree, rng.integers(0, m + 1, (n, 2))


def test_hoffman_and_kruskal():
    """Hoffman, Kruskal (1956): TU if and only if all vertices are whole for all whole sides."""
    seen = set()
    for matrix in random_matrices(60, 2, 3, seed=1, entries=(0, 1, 1, -1, 2)):
        seen.add(is_tu(matrix))
        assert all_whole_for_whole_sides(matrix, 3) == is_tu(matrix)
    assert not all_whole_for_whole_sides(TRIANGLE, 1)
    assert seen == {True, False}


def test_hoffman_and_kruskal_on_what_is_proven():
    """The same, for matrices proven here."""
    proven = 0
    for matrix in random_matrices(40, 3, 3, seed=2):
        if prove_tu(sp.csc_array(matrix)) is not None:
            proven += 1
            assert all_whole_for_whole_sides(matrix, 1)
    assert proven > 10


def test_heller_and_tompkins():
    """Heller, Tompkins (1956): with at most two nonzeros a column, TU if and only if the rows
    fall into two sides: equal signs apart, unequal ones together."""
    rng = np.random.default_rng(3)
    seen = set()
    for _ in range(150):
        m, n = rng.integers(2, 6, 2)
        matrix = np.zeros((m, n), np.int64)
        for j in range(n):
            matrix[rng.choice(m, 2, replace=False), j] = rng.choice([1, 1, 1, -1], 2)
        sides = itertools.product((1, -1), repeat=m)
        divisible = any((np.abs(np.array(side) @ matrix) == 0).all() for side in sides)
        assert is_tu(matrix) == divisible
        assert (incidence.recognise(sp.csc_array(matrix)) is not None) == divisible
        seen.add(divisible)
    assert seen == {True, False}


def test_ghouila_houri():
    """Ghouila-Houri (1962): TU if and only if every set of rows can be given signs such that
    its sum has entries 0, 1 and -1 only."""
    seen = set()
    for matrix in random_matrices(150, 4, 4, seed=4):
        m = len(matrix)
        balanced = all(
            any(
                (np.abs(np.array(signs) @ matrix[list(rows)]) <= 1).all()
                for signs in itertools.product((1, -1), repeat=len(rows))
            )
            for size in range(1, m + 1)
            for rows in itertools.combinations(range(m), size)
        )
        assert is_tu(matrix) == balanced
        assert balanced or prove_tu(sp.csc_array(matrix)) is None
        seen.add(balanced)
    assert seen == {True, False}


def test_camion():
    """Camion (1965): a smallest matrix that is not TU has determinant 2 or -2 and even sums of
    rows and columns."""
    seen = 0
    for matrix in random_matrices(400, 4, 4, seed=5):
        size = len(matrix)
        if matrix.shape != (size, size) or is_tu(matrix):
            continue
        if any(np.abs(values).max() > 1 for values in list(minors(matrix))[:-1]):
            continue
        seen += 1
        assert abs(determinant([[Fraction(x) for x in row] for row in matrix.tolist()])) == 2
        assert not (matrix.sum(axis=0) % 2).any()
        assert not (matrix.sum(axis=1) % 2).any()
    assert seen > 0


@pytest.mark.parametrize("matrix", R10, ids=["circulant", "bordered"])
def test_r10_is_tu_but_neither_a_network_matrix_nor_the_transpose_of_one(matrix):
    """Schrijver (1986), section 19.4: TU, and not among the network matrices."""
    assert is_tu(matrix)
    assert not is_network(matrix)
    assert not is_network(matrix.T)
    proof = prove_tu(sp.csc_array(matrix))
    assert proof is None or not isinstance(proof[1], Network | Conetwork)
    for tree, arcs in forged_networks(5, 5, 200, seed=6):
        for part in (Network(tree, arcs), Conetwork(tree, arcs)):
            with pytest.raises(CertificateError):
                part.check(sp.csc_array(matrix))


def test_no_signs_make_the_fano_matrix_tu():
    """Tutte (1958), A homotopy theorem for matroids II: the Fano matroid is not regular, so its
    matrix is TU with no signs at all."""
    places = list(zip(*np.nonzero(FANO), strict=True))
    for signs in itertools.product((1, -1), repeat=len(places)):
        matrix = FANO.copy()
        for (i, j), sign in zip(places, signs, strict=True):
            matrix[i, j] = sign
        assert not is_tu(matrix)
        assert prove_tu(sp.csc_array(matrix)) is None
        assert prove_tu(sp.csc_array(matrix.T)) is None


def test_forged_certificates_of_the_fano_matrix_are_refused():
    """The same source: nothing can prove it."""
    assert not is_network(FANO)
    for tree, arcs in forged_networks(3, 4, 300, seed=7):
        with pytest.raises(CertificateError):
            Network(tree, arcs).check(sp.csc_array(FANO))
        with pytest.raises(CertificateError):
            Conetwork(tree, arcs).check(sp.csc_array(FANO.T))


@pytest.mark.parametrize("size", range(2, 8))
def test_a_graph_has_a_tu_incidence_matrix_if_and_only_if_it_is_bipartite(size):
    """Schrijver (1986), section 19.3, example 1; a cycle of odd length has determinant 2."""
    cycle = np.eye(size, dtype=np.int64) + np.roll(np.eye(size, dtype=np.int64), 1, axis=1)
    cycle = np.minimum(cycle, 1) if size > 2 else np.ones((2, 1), np.int64)
    bipartite = size % 2 == 0
    assert is_tu(cycle) == bipartite
    assert (prove_tu(sp.csc_array(cycle)) is not None) == bipartite


def test_interval_matrices_are_tu():
    """Schrijver (1986), section 19.3, example 7, all intervals of five rows at once; and they
    are network matrices of a path."""
    runs = [[b <= i < e for b, e in itertools.combinations(range(6), 2)] for i in range(5)]
    matrix = np.array(runs).astype(np.int64)
    assert is_tu(matrix[:, ::2]) and is_tu(matrix[:, 1::2])
    part = interval.recognise(sp.csc_array(matrix))
    part.check(sp.csc_array(matrix))
    assert np.bincount(part.tree.ravel()).max() == 2

"""Published regular matrices, and those that are just not: how each is decided and taken apart.

The statements are given from memory of their sources.
"""

import itertools

import networkx as nx
import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from brute_force import determinant
from known_matrices import FANO, R10, R12
from regular_models import disguised, graph_matrix, plain
from sum_proofs import r10_part, split_off

from pyomo_latpath import check_certificate, totally_unimodular
from pyomo_latpath.certificate_sums import pivoted
from pyomo_latpath.certificates import Conetwork, Network, Split, Sum
from pyomo_latpath.summands import Summands


def decided(matrix):
    """Whether it is TU, after a look at the proof, and the part that proves it."""
    decision = totally_unimodular(matrix)
    if decision.holds:
        check_certificate(matrix, decision.certificate)
        return True, decision.certificate.blocks[0].part
    found = decision.violator
    square = np.asarray(matrix)[np.ix_(found.rows, found.columns)]
    assert abs(determinant(square.tolist())) == 2
    for k in range(len(square)):
        assert is_tu(np.delete(square, k, axis=0)) and is_tu(np.delete(square, k, axis=1))
    return False, None


def bases(matrix):
    """Matrices of the same matroid for many of its bases, by pivots, in any order and signs."""
    rng = np.random.default_rng(1)
    return [disguised(rng, plain(matrix), k).matrix for k in range(12)]


def signings(support):
    """All signs of the nonzeros, up to negated lines: those of a spanning forest stay 1."""
    m = len(support)
    places = [(int(i), int(j)) for i, j in np.argwhere(support)]
    forest = nx.Graph()
    forest.add_nodes_from(range(sum(support.shape)))
    free = []
    for i, j in places:
        if nx.has_path(forest, i, m + j):
            free.append((i, j))
        else:
            forest.add_edge(i, m + j)
    for signs in itertools.product((1, -1), repeat=len(free)):
        matrix = np.abs(support)
        for place, sign in zip(free, signs, strict=True):
            matrix[place] = sign
        yield matrix


@pytest.mark.parametrize("matrix", R10, ids=["circulant", "bordered"])
def test_r10(matrix):
    """Schrijver (1986), section 19.4: the two matrices of R10, and in whatever basis no other;
    Seymour (1980): they are TU and neither network matrices nor transposes of such."""
    for other in (matrix, *bases(matrix), *bases(matrix.T)):
        part = r10_part(other)
        part.check(sp.csc_array(other))
        holds, found = decided(other)
        assert holds and found.kind == "r10"


def test_r10_has_162_bases():
    """Seymour (1980): R10 without an element is M(K3,3), and with it contracted M*(K3,3). K3,3
    has 81 spanning trees (common knowledge: 3^2 3^2), so R10 has 81 + 81 bases; the number of
    bases of a regular matroid is det(I + AA') (the matrix-tree theorem: Maurer 1976)."""
    for matrix in R10:
        assert round(np.linalg.det(np.eye(5) + matrix @ matrix.T)) == 2 * 81


@pytest.mark.parametrize(
    ("matrix", "count"),
    [(R10[0], 1), (R10[1], 1), (R12, 1), (FANO, 0), (FANO.T, 0)],
    ids=["R10", "R10'", "R12", "F7", "F7*"],
)
def test_signs_are_unique_or_impossible(matrix, count):
    """Camion (1963), Caracterisation des matrices unimodulaires: the signs that make a matrix TU
    are unique up to negated lines, if there are any. Tutte (1958): for the Fano matroid F7 and
    its dual there are none."""
    good = [signed for signed in signings(matrix) if decided(signed)[0]]
    assert len(good) == count
    assert all(is_tu(signed) for signed in good)


def test_r12():
    """Seymour (1980): R12 is regular, neither graphic nor cographic, and has one
    separation of order 3 with at least four elements on each side, into halves; along it,
    it is a 3-sum. In whatever basis."""
    assert is_tu(R12)
    for other in (R12, R12.T, *bases(R12)):
        holds, part = decided(other)
        assert holds and isinstance(part, Sum)
        (split,) = [step for step in part.steps if isinstance(step, Split)]
        assert split.order == 3
        assert split.rows.size + split.columns.size == 6
        assert {summand.kind for summand in part.parts} == {"network", "conetwork"}


@pytest.mark.parametrize("matrix", [FANO, FANO.T], ids=["F7", "F7*"])
def test_matrices_over_a_fano_minor(matrix):
    """Tutte (1958): a matrix with a Fano minor is not TU, whatever stands around it."""
    rng = np.random.default_rng(2)
    for _ in range(20):
        m, n = matrix.shape
        around = rng.choice([0, 0, 1, -1], (m + 3, n + 3))
        around[:m, :n] = matrix * rng.choice([1, -1], matrix.shape)
        assert not decided(around)[0]


@pytest.mark.parametrize(
    ("graph", "planar"),
    [
        (nx.complete_graph(5), False),
        (nx.complete_bipartite_graph(3, 3), False),
        (nx.petersen_graph(), False),
        (nx.heawood_graph(), False),
        (nx.octahedral_graph(), True),
        (nx.dodecahedral_graph(), True),
    ],
    ids=["K5", "K3,3", "Petersen", "Heawood", "octahedron", "dodecahedron"],
)
def test_graphs_and_their_duals(graph, planar):
    """Whitney (1932), Tutte (1959): the matrix of a graph is a network matrix in any basis; its
    transpose, the matrix of the dual, just if the graph is planar. Both are TU."""
    matrix = graph_matrix(graph)
    for other in bases(matrix)[:4]:
        for table, kind in ((other, Network), (other.T, Conetwork)):
            holds, part = decided(table)
            assert holds
            assert isinstance(part, Network | Conetwork if planar else kind)


def test_the_3_sum_of_schrijver():
    """Schrijver (1986), section 19.4, (44) (iii): [A a a; c 0 1] and [1 0 b; d d B] make
    [A ab; dc B], TU if both are. Taken apart, just these come out, up to signs of lines."""
    rng, seen = np.random.default_rng(3), 0
    while seen < 25:
        own, below = rng.choice([0, 0, 1, -1], (2, 2, 2))
        a, d = rng.choice([0, 1, -1], (2, 2, 1))
        b, c = rng.choice([0, 1, -1], (2, 1, 2))
        first = np.block([[own, a, a], [c, np.array([[0, 1]])]])
        second = np.block([[np.array([[1, 0]]), b], [d, d, below]])
        if not (a.any() and b.any() and c.any() and d.any() and is_tu(first) and is_tu(second)):
            continue
        seen += 1
        whole = np.block([[own, a @ b], [d @ c, below]])
        assert is_tu(whole)
        found = []
        for sign in (1, -1):
            summands = Summands(sp.csc_array(whole))
            summands.split(split_off(whole, np.array([2, 3]), np.array([2, 3]), sign))
            found.append([summands.summand(k)[2].toarray() for k in range(2)])
        # The second one comes with its row b last, and columns B, d, d with 1 below.
        wanted = first, np.vstack([second[1:], second[:1]])[:, [2, 3, 1, 0]]
        assert any(all(map(same_up_to_signs, summands, wanted)) for summands in found)


def same_up_to_signs(one, other):
    """Whether signs of rows and columns turn one into the other."""
    for signs in itertools.product((1, -1), repeat=len(one)):
        signed = np.array(signs)[:, None] * one
        if ((signed == other).all(axis=0) | (signed == -other).all(axis=0)).all():
            return True
    return False


def test_the_pivot_of_schrijver():
    """Schrijver (1986), section 19.4, (43) (iv): [e c; b D] becomes [-e ec; eb D-ebc]; here the
    first column has the other sign. TU is kept both ways."""
    rng, seen = np.random.default_rng(4), set()
    for _ in range(100):
        matrix = rng.choice([0, 0, 1, -1], (3, 4))
        if not matrix[0, 0]:
            continue
        e, c, b, rest = matrix[0, 0], matrix[:1, 1:], matrix[1:, :1], matrix[1:, 1:]
        published = np.block([[np.array([[-e]]), e * c], [e * b, rest - e * b @ c]])
        published[:, 0] *= -1
        result = pivoted(sp.csc_array(matrix), 0, 0).toarray()
        assert np.array_equal(result, published)
        assert is_tu(result) == is_tu(matrix)
        seen.add(is_tu(matrix))
    assert seen == {True, False}

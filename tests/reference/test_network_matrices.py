"""Which published matrices are network matrices, which are transposes of such, which neither."""

import itertools

import networkx as nx
import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from known_matrices import FANO, R10

from pyomo_latpath.certificates import Conetwork, Network
from pyomo_latpath.integrality import network
from pyomo_latpath.integrality.graph_realisation import realise
from pyomo_latpath.integrality.recognise import prove_tu

UTILITIES = nx.complete_bipartite_graph(3, 3)


def is_network(matrix):
    matrix = sp.csc_array(matrix)
    part = network.recognise(matrix)
    if part is not None:
        part.check(matrix)
    return part is not None


def network_matrix(graph, tree):
    """Signed tree paths between the ends of all other edges, every edge pointing upwards."""
    rows = {frozenset(edge): i for i, edge in enumerate(tree)}
    others = [edge for edge in graph.edges if frozenset(edge) not in rows]
    matrix = np.zeros((len(rows), len(others)), np.int64)
    for j, (tail, head) in enumerate(others):
        for a, b in itertools.pairwise(nx.shortest_path(nx.Graph(tree), tail, head)):
            matrix[rows[frozenset((a, b))], j] = 1 if a < b else -1
    return matrix


def random_tree(graph, seed):
    rng = np.random.default_rng(seed)
    weighted = nx.Graph()
    weighted.add_weighted_edges_from((*edge, rng.random()) for edge in graph.edges)
    return list(nx.minimum_spanning_tree(weighted).edges)


@pytest.mark.parametrize("matrix", R10, ids=["circulant", "bordered"])
def test_r10_is_neither(matrix):
    """Seymour (1980): R10 is regular, and neither graphic nor cographic."""
    assert is_tu(matrix)
    for table in (matrix, matrix.T):
        assert realise(sp.csc_array(table)) is None
        assert not is_network(table)


def test_leaving_out_any_element_of_r10_leaves_k33():
    """Seymour (1980): R10 without an element is the cycle matroid of K3,3; so a column left out
    leaves a network matrix, a row left out (contraction) the transpose of one."""
    for matrix in R10:
        for k in range(5):
            assert is_network(np.delete(matrix, k, axis=1))
            assert not is_network(np.delete(matrix, k, axis=1).T)
            assert is_network(np.delete(matrix, k, axis=0).T)
            assert not is_network(np.delete(matrix, k, axis=0))


def test_the_fano_matrix_has_no_tree_either_way():
    """Tutte (1959), Matroids and graphs: neither the Fano matroid nor its dual is graphic."""
    for table in (FANO, FANO.T):
        assert realise(sp.csc_array(table)) is None
    for signs in itertools.product((1, -1), repeat=9):
        signed = FANO.copy()
        signed[FANO != 0] = signs
        assert not is_network(signed)


@pytest.mark.parametrize(
    ("graph", "trees"), [(nx.complete_graph(5), 125), (UTILITIES, 81)], ids=["K5", "K3,3"]
)
def test_kuratowski_graphs_are_networks_but_not_conetworks(graph, trees):
    """Tutte (1959): the dual matroids of K5 and K3,3 are not graphic. All spanning trees: there
    are 125 and 81 (Cayley's formula and its counterpart for bipartite graphs)."""
    seen = 0
    for tree in itertools.combinations(graph.edges, len(graph) - 1):
        if nx.is_tree(nx.Graph(tree)) and len(nx.Graph(tree)) == len(graph):
            seen += 1
            matrix = network_matrix(graph, tree)
            assert is_network(matrix)
            assert not is_network(matrix.T)
            assert realise(sp.csc_array(matrix.T)) is None
    assert seen == trees
    for table, kind in ((matrix, Network), (matrix.T, Conetwork)):
        assert isinstance(prove_tu(sp.csc_array(table))[1], kind)


@pytest.mark.parametrize("edges_per_node", [1.2, 1.5, 1.7])
def test_conetwork_too_if_and_only_if_planar(edges_per_node):
    """Whitney (1932), Non-separable and planar graphs: a graph has a dual if and only if it is
    planar; networkx tells which are (Brandes 2009, The left-right planarity test)."""
    seen = {True: 0, False: 0}
    for seed in range(60):
        nodes = 6 + seed % 20
        graph = nx.gnm_random_graph(nodes, int(edges_per_node * nodes), seed=seed)
        graph = nx.Graph(graph.subgraph(max(nx.connected_components(graph), key=len)))
        matrix = network_matrix(graph, random_tree(graph, seed))
        assert is_network(matrix)
        planar = nx.check_planarity(graph)[0]
        assert is_network(matrix.T) == planar
        seen[planar] += 1
    assert all(seen.values())


def test_large_planar_grids_and_one_more_edge():
    """Whitney (1932) again, hundreds of rows: a grid is planar; tied by one more edge between
    its middle and its corner, it is not."""
    grid = nx.convert_node_labels_to_integers(nx.grid_2d_graph(15, 20))
    assert is_network(network_matrix(grid, random_tree(grid, 1)).T)
    grid.add_edge(0, 150)
    matrix = network_matrix(grid, random_tree(grid, 1))
    assert is_network(matrix)
    assert not is_network(matrix.T)


@pytest.mark.parametrize("nodes", [4, 7, 12])
def test_wheels_are_rigid_and_their_own_duals(nodes):
    """Tutte (1961), A theory of 3-connected graphs: wheels; self-duality is common knowledge."""
    wheel = nx.wheel_graph(nodes)
    for seed in range(5):
        matrix = network_matrix(wheel, random_tree(wheel, seed))
        assert is_network(matrix) and is_network(matrix.T)


@pytest.mark.parametrize("size", range(3, 9))
def test_incidence_matrices_of_graphs_if_and_only_if_bipartite(size):
    """Schrijver (1986), section 19.3, example 1: TU if and only if the graph is bipartite; the
    incidence matrices of digraphs (example 2) always are network matrices."""
    cycle = np.eye(size, dtype=np.int64) + np.roll(np.eye(size, dtype=np.int64), 1, axis=1)
    directed = np.eye(size, dtype=np.int64) - np.roll(np.eye(size, dtype=np.int64), 1, axis=1)
    for table in (cycle, cycle.T):
        assert is_network(table) == (size % 2 == 0)
    assert is_network(directed) and is_network(directed.T)


def test_interval_matrices_are_network_matrices():
    """Schrijver (1986), section 19.3: rows with consecutive ones are network matrices of a
    directed path; here in any order of the rows. With all intervals, no other tree is left."""
    runs = [[b <= i < e for b, e in itertools.combinations(range(9), 2)] for i in range(8)]
    matrix = np.array(runs).astype(np.int64)
    for seed in range(5):
        order = np.random.default_rng(seed).permutation(8)
        part = network.recognise(sp.csc_array(matrix[order]))
        part.check(sp.csc_array(matrix[order]))
        assert np.bincount(part.tree.ravel()).max() == 2

"""Explanations against what is published about fractional relaxations."""

import itertools
from fractions import Fraction

import networkx as nx
import numpy as np
import pytest
from brute_force import vertices
from hypothesis import given, settings
from hypothesis import strategies as st

import pyomo_latpath as latpath
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality.finding import Verdict


def incidence(graph):
    return np.abs(nx.incidence_matrix(graph, nodelist=sorted(graph)).toarray())


def packing(matrix, names, upper=1, weights=1):
    return LinearForm.from_arrays(
        matrix,
        row_lower=-np.inf,
        row_upper=upper,
        col_lower=0,
        col_upper=1,
        cost=weights,
        sense="max",
        row_names=names,
    )


def matching(graph, weights=1):
    return packing(incidence(graph), [f"degree[{v}]" for v in sorted(graph)], weights=weights)


def random_graph(seed):
    rng = np.random.default_rng(seed)
    graph = nx.gnp_random_graph(int(rng.integers(4, 8)), 0.6, seed=int(rng.integers(2**31)))
    for edge in graph.edges:
        graph.edges[edge]["weight"] = int(rng.integers(1, 10))
    return graph


# Padberg (1973), On the facial structure of set packing polyhedra: of the nodes of an odd hole of
# length 2k + 1 at most k are independent; with the edges alone each node can be 1/2. From memory.
@pytest.mark.parametrize("k", [1, 2, 3, 5])
def test_an_odd_hole_is_the_conflict_and_costs_one_half(k):
    size = 2 * k + 1
    matrix = incidence(nx.cycle_graph(size)).T
    told = latpath.explain(packing(matrix, [f"clash[{i}]" for i in range(size)]))
    assert (told.gap.declared_bound, told.gap.plan) == (pytest.approx(k + 0.5), k)
    assert set(told.witness.values) == {Fraction(1, 2)}
    (violator,) = told.violators
    assert violator.cycle and len(violator.rows) == size and abs(violator.determinant) == 2


def test_an_even_hole_is_whole():
    matrix = incidence(nx.cycle_graph(6)).T
    assert latpath.explain(packing(matrix, [f"clash[{i}]" for i in range(6)])).whole is not None


# Edmonds (1965), Maximum matching and a polyhedron with 0,1-vertices: degrees and odd sets (at
# most k edges within 2k + 1 nodes) describe the matching polytope.
@settings(max_examples=15)
@given(st.integers(0, 2**32))
def test_odd_sets_close_the_gap_of_matchings(seed):
    graph = random_graph(seed)
    if not graph.number_of_edges():
        return
    edges = list(graph.edges)
    weights = [graph.edges[edge]["weight"] for edge in edges]
    told = latpath.explain(matching(graph, weights))
    best = sum(graph.edges[edge]["weight"] for edge in nx.max_weight_matching(graph))
    assert told.gap.plan == pytest.approx(best)
    odd = [nodes for size in (3, 5, 7) for nodes in itertools.combinations(sorted(graph), size)]
    inside = [[float(u in nodes and v in nodes) for u, v in edges] for nodes in odd]
    closed = packing(
        np.vstack((incidence(graph), *inside)),
        [f"degree[{v}]" for v in graph] + [f"odd[{k}]" for k in range(len(odd))],
        upper=[1] * len(graph) + [len(nodes) // 2 for nodes in odd],
        weights=weights,
    )
    relaxed = latpath.solve(closed.replace(integer=False))
    assert relaxed.objective == pytest.approx(best)


# Vertices of the fractional matching polytope are 0, 1/2 and 1, the halves on disjoint odd cycles:
# common practice (after Balinski 1965).
@settings(max_examples=15)
@given(st.integers(0, 2**32))
def test_fractional_matchings_are_halves_on_odd_cycles(seed):
    graph = random_graph(seed)
    weights = [weight for _, _, weight in graph.edges(data="weight")]
    if not weights:
        return
    told = latpath.explain(matching(graph, weights))
    assert (told.verdict is Verdict.PROVEN) == nx.is_bipartite(graph)
    if told.witness is not None:
        assert set(told.witness.values) <= {0, Fraction(1, 2), 1}
        edges, places = list(graph.edges), told.witness.columns.tolist()
        pairs = zip(places, told.witness.values, strict=True)
        halves = [edges[place] for place, value in pairs if value == Fraction(1, 2)]
        cycles = graph.edge_subgraph(halves)
        assert all(degree == 2 for _, degree in cycles.degree)
        assert all(len(part) % 2 for part in nx.connected_components(cycles))
    for violator in told.violators:
        assert violator.cycle and len(violator.rows) % 2


def test_all_vertices_of_a_small_fractional_matching_polytope_are_halves():
    graph = nx.complete_graph(4)
    told = vertices(incidence(graph), np.full(4, -np.inf), np.ones(4), np.zeros(6), np.ones(6))
    assert {value for point in told for value in point} == {0, Fraction(1, 2), 1}


# Wolsey (1998), Integer Programming, section 1.6: with m = k n clients and sum_i x_ij <= m y_j,
# depots that serve k clients each may be opened to k / m; x_ij <= y_j cuts that off. From memory.
@pytest.mark.parametrize(("depots", "each"), [(2, 2), (3, 2), (2, 4)])
def test_aggregated_facility_location_is_repaired_by_splitting_its_rows(depots, each):
    clients = depots * each
    n = clients * depots
    serve = np.hstack((np.kron(np.eye(clients), np.ones(depots)), np.zeros((clients, depots))))
    link = np.hstack((np.kron(np.ones(clients), np.eye(depots)), -clients * np.eye(depots)))
    far = [10 * (client // each != depot) for client in range(clients) for depot in range(depots)]
    opening = 4
    form = LinearForm.from_arrays(
        np.vstack((serve, link)),
        row_lower=[1] * clients + [-np.inf] * depots,
        row_upper=[1] * clients + [0] * depots,
        col_lower=0,
        col_upper=1,
        cost=[*far, *[opening] * depots],
        row_names=[f"client[{i}]" for i in range(clients)] + [f"open[{j}]" for j in range(depots)],
    )
    told = latpath.explain(form)
    assert told.gap.declared_bound == pytest.approx(depots * opening * each / clients)
    best = min(count * opening + 10 * each * (depots - count) for count in range(1, depots + 1))
    assert told.gap.plan == pytest.approx(best)
    assert [culprit.groups for culprit in told.culprits] == [("open",)]
    split = np.hstack((np.eye(n), -np.tile(np.eye(depots), (clients, 1))))
    strong = LinearForm.from_arrays(
        np.vstack((serve, split)),
        row_lower=[1] * clients + [-np.inf] * n,
        row_upper=[1] * clients + [0] * n,
        col_lower=0,
        col_upper=1,
        cost=form.cost,
    )
    (remedy,) = (each for each in told.remedies if each.kind == "split")
    assert remedy.bound_after == pytest.approx(
        latpath.solve(strong.replace(integer=False)).objective
    )
    assert remedy.bound_after == pytest.approx(best)

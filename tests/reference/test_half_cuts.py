"""Published families of cuts, found among the {0, 1/2} cuts; sources as remembered."""

from fractions import Fraction

import networkx as nx
import numpy as np
import pytest

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.remedies.cut_rounds import cut_remedy, cut_rounds
from pyomo_latpath.explain.remedies.cuts import system_of
from pyomo_latpath.explain.remedies.drafts import Namer
from pyomo_latpath.explain.remedies.half_cuts import half_cuts
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.sampling import program_of


@pytest.mark.parametrize("size", [3, 5, 7, 9])
def test_an_odd_cycle_of_shared_vans_is_one_cut(size):
    """Odd-cycle inequality: of 2k + 1 that exclude their neighbours at most k (Padberg 1973)."""
    matrix = np.zeros((size, size))
    for i in range(size):
        matrix[i, i] = matrix[i, (i + 1) % size] = 1
    form = LinearForm.from_arrays(
        matrix, row_lower=-np.inf, row_upper=1, col_lower=0, col_upper=1, cost=-1
    )
    (cut,) = half_cuts(system_of(normalise(form)), np.full(size, 0.5))
    assert sorted(cut.columns) == list(range(size))
    assert set(cut.coefficients) == {1} and cut.side == size // 2
    assert set(cut.row_multipliers) == {Fraction(1, 2)} and len(cut.rows) == size


def matching_form(graph, cost):
    edges, nodes = list(graph.edges), list(graph.nodes)
    matrix = np.array([[float(v in edge) for edge in edges] for v in nodes])
    return LinearForm.from_arrays(
        matrix, row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=cost, sense="max"
    )


@pytest.mark.parametrize("size", [3, 5, 7])
def test_odd_set_inequalities_of_matchings_are_among_them(size):
    """Edmonds (1965): at most (|S| - 1) / 2 edges of a matching lie within an odd set S."""
    graph = nx.complete_graph(size)
    form = matching_form(graph, 1)
    system = system_of(normalise(form))
    x = np.full(graph.number_of_edges(), 1 / (size - 1))
    (cut,) = half_cuts(system, x)
    assert len(cut.columns) == graph.number_of_edges()
    assert set(cut.coefficients) == {1} and cut.side == (size - 1) // 2


@pytest.mark.parametrize("seed", range(200, 230))
def test_with_them_the_bound_of_a_matching_is_its_weight(seed):
    """Odd-set inequalities and degrees describe the matching polytope (Edmonds 1965).

    That they are found is no theorem; on these graphs it is so.
    """
    graph = nx.gnp_random_graph(7, 0.6, seed=seed)
    weights = np.random.default_rng(seed).integers(1, 9, graph.number_of_edges())
    for (a, b), weight in zip(graph.edges, weights.tolist(), strict=True):
        graph[a][b]["weight"] = weight
    best = sum(graph[a][b]["weight"] for a, b in nx.max_weight_matching(graph))
    form = matching_form(graph, weights)
    cuts = cut_rounds(normalise(form), Deadline(20))
    if cuts:
        form = cut_remedy(normalise(form), cuts, Namer(form)).apply_to(form)
    assert -program_of(normalise(form)).solve().objective == pytest.approx(best)

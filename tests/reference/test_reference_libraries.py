"""Random assignments and flows, compared with the answers of SciPy and NetworkX."""

from __future__ import annotations

import math

import networkx as nx
import numpy as np
import pytest
from scipy.optimize import linear_sum_assignment
from small_forms import assignment

from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.routing import solve


def assignment_form(cost: np.ndarray, sense: str) -> LinearForm:
    """Every row of the shorter side exactly once, of the longer one at most once."""
    m, n = cost.shape
    exact = np.concatenate([np.full(m, m <= n), np.full(n, n <= m)])
    return assignment(cost, row_lower=np.where(exact, 1.0, -math.inf), sense=sense)


@pytest.mark.parametrize("seed", range(16))
def test_assignments_cost_what_scipy_says(seed):
    """Source: SciPy's `linear_sum_assignment` (Crouse 2016)."""
    rng = np.random.default_rng(seed)
    m, n = rng.integers(1, 15, size=2)
    cost = rng.integers(-50, 50, size=(m, n)).astype(float)
    if seed % 4 == 3:
        cost = rng.normal(size=(m, n))
    sense = "max" if seed % 2 else "min"
    rows, columns = linear_sum_assignment(cost, maximize=sense == "max")
    solution = solve(assignment_form(cost, sense))
    assert solution.status == "optimal"
    assert solution.objective == pytest.approx(cost[rows, columns].sum(), rel=1e-9, abs=1e-9)
    assert solution.report.route == "path"


def random_network(rng: np.random.Generator) -> nx.MultiDiGraph:
    """A network with parallel arcs; some arcs have no capacity, some supplies no way out."""
    nodes = int(rng.integers(2, 12))
    graph = nx.MultiDiGraph()
    supply = rng.integers(-5, 6, size=nodes)
    supply[-1] -= supply.sum()
    without_capacity, cheapest = rng.choice([0.1, 0.6]), rng.choice([-12, 0])
    graph.add_nodes_from((i, {"demand": -int(b)}) for i, b in enumerate(supply))
    for _ in range(int(rng.integers(2 * nodes, 7 * nodes))):
        tail, head = (int(node) for node in rng.choice(nodes, size=2, replace=False))
        attributes = {"weight": int(rng.integers(cheapest, 30))}
        if rng.random() > without_capacity:
            attributes["capacity"] = int(rng.integers(0, 20))
        graph.add_edge(tail, head, **attributes)
    return graph


def network_form(graph: nx.MultiDiGraph) -> LinearForm:
    arcs = list(graph.edges(data=True))
    matrix = np.zeros((graph.number_of_nodes(), len(arcs)))
    for j, (tail, head, _) in enumerate(arcs):
        matrix[tail, j], matrix[head, j] = 1, -1
    supply = [-graph.nodes[node]["demand"] for node in graph]
    return LinearForm.from_arrays(
        matrix,
        row_lower=supply,
        row_upper=supply,
        col_lower=0,
        col_upper=[data.get("capacity", math.inf) for *_, data in arcs],
        cost=[data["weight"] for *_, data in arcs],
    )


def answer_of_networkx(graph: nx.MultiDiGraph) -> tuple[str, float | None]:
    """Status and least cost.

    A cheap cycle without capacities is looked for first: `network_simplex` may run for ever
    on such a network. The flow is then unbounded, if there is any.
    """
    free = nx.MultiDiGraph()
    free.add_nodes_from(graph)
    free.add_edges_from(arc for arc in graph.edges(data=True) if "capacity" not in arc[2])
    endless = nx.negative_edge_cycle(free)
    try:
        cost, _ = nx.network_simplex(graph, weight="none" if endless else "weight")
    except nx.NetworkXUnfeasible:
        return "infeasible", None
    return ("unbounded", None) if endless else ("optimal", cost)


@pytest.mark.parametrize("seed", range(40))
def test_flows_end_as_networkx_says(seed):
    """Source: NetworkX's `network_simplex` and `negative_edge_cycle`."""
    graph = random_network(np.random.default_rng(seed))
    status, cost = answer_of_networkx(graph)
    form = network_form(graph)
    solution = solve(form)
    assert solution.status == status
    if status == "optimal":
        assert solution.objective == cost
        assert solution.report.proof == "exact"


def test_the_random_flows_end_in_all_three_ways():
    graphs = (random_network(np.random.default_rng(seed)) for seed in range(40))
    assert {answer_of_networkx(graph)[0] for graph in graphs} == {
        "optimal",
        "infeasible",
        "unbounded",
    }

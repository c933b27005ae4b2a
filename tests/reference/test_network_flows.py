"""Published flows, through the network simplex alone; data and sources stand beside."""

from __future__ import annotations

import math

import numpy as np
import pytest
from flow_problems import assert_answer
from test_published_examples import ASSIGNMENTS, FLOWS, LARGEST_FLOWS, TRANSPORTS

from pyomo_latpath.paths.network_problem import NO_LIMIT, FlowProblem
from pyomo_latpath.paths.network_simplex import solve_flow


def flow_problem(arcs, supply):
    """Arcs (tail, head, capacity, cost) between nodes of any name."""
    number = {}
    for tail, head, *_ in arcs:
        number.setdefault(tail, len(number))
        number.setdefault(head, len(number))
    given = np.zeros(len(number), np.int64)
    for node, amount in supply.items():
        given[number[node]] = amount
    return FlowProblem.of(
        [number[arc[0]] for arc in arcs],
        [number[arc[1]] for arc in arcs],
        capacity=[NO_LIMIT if math.isinf(arc[2]) else arc[2] for arc in arcs],
        cost=[arc[3] for arc in arcs],
        supply=given,
    )


def least_cost(problem):
    """Solve, have the answer prove itself, and return its cost."""
    result = solve_flow(problem, compiled=False)
    assert_answer(problem, result)
    assert result.status == "optimal"
    return problem.value(result.flow)


@pytest.mark.parametrize(("arcs", "supply", "optimum", "_"), FLOWS.values(), ids=FLOWS)
def test_flows(arcs, supply, optimum, _):
    assert least_cost(flow_problem(arcs, supply)) == optimum


@pytest.mark.parametrize(
    ("arcs", "source", "sink", "optimum", "_"), LARGEST_FLOWS.values(), ids=LARGEST_FLOWS
)
def test_largest_flows(arcs, source, sink, optimum, _):
    closed = [(*arc, 0) for arc in arcs] + [(sink, source, math.inf, -1)]
    assert least_cost(flow_problem(closed, {})) == -optimum


@pytest.mark.parametrize(
    ("arcs", "source", "sink", "optimum", "_"), LARGEST_FLOWS.values(), ids=LARGEST_FLOWS
)
def test_one_more_than_the_largest_flow_meets_a_least_cut(arcs, source, sink, optimum, _):
    """The largest flow equals the least cut (Ford and Fulkerson 1956)."""
    problem = flow_problem([(*arc, 0) for arc in arcs], {source: optimum + 1, sink: -(optimum + 1)})
    result = solve_flow(problem, compiled=False)
    assert result.status == "infeasible"
    assert_answer(problem, result)
    assert result.cut.shortfall == 1
    leaves = result.cut.nodes[problem.tail] & ~result.cut.nodes[problem.head]
    assert problem.capacity[leaves].sum() == optimum


@pytest.mark.parametrize(("cost", "optimum", "_"), ASSIGNMENTS.values(), ids=ASSIGNMENTS)
def test_assignments(cost, optimum, _):
    """The shorter side is all assigned; the longer one has a way out."""
    scaled = np.asarray(cost, dtype=float)
    scaled = scaled.T if scaled.shape[0] > scaled.shape[1] else scaled
    m, n = scaled.shape
    assert (scaled == np.rint(scaled)).all()
    arcs = [(("row", i), ("column", j), 1, int(scaled[i, j])) for i in range(m) for j in range(n)]
    arcs += [(("column", j), "out", 1, 0) for j in range(n)]
    supply = {("row", i): 1 for i in range(m)} | {"out": -m}
    assert least_cost(flow_problem(arcs, supply)) == optimum


@pytest.mark.parametrize(
    ("cost", "most", "least", "optimum", "_"), TRANSPORTS.values(), ids=TRANSPORTS
)
def test_transports(cost, most, least, optimum, _):
    """Costs in thousandths; what is not shipped goes nowhere at no cost."""
    scaled = np.rint(np.asarray(cost) * 1000).astype(int)
    m, n = scaled.shape
    arcs = [
        (("from", i), ("to", j), math.inf, int(scaled[i, j])) for i in range(m) for j in range(n)
    ]
    arcs += [(("from", i), "nowhere", math.inf, 0) for i in range(m)]
    supply = {("from", i): amount for i, amount in enumerate(most)}
    supply |= {("to", j): -amount for j, amount in enumerate(least)}
    supply["nowhere"] = sum(least) - sum(most)
    assert least_cost(flow_problem(arcs, supply)) == pytest.approx(1000 * optimum, abs=1e-6)

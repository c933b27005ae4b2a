"""Random flow problems, and checks that an answer proves itself."""

from __future__ import annotations

import highspy
import networkx as nx
import numpy as np
import scipy.sparse as sp
from with_highs import highs, program

from pyomo_latpath.paths.network_problem import NO_LIMIT, FlowProblem, FlowResult, shortfall


def random_problem(rng: np.random.Generator) -> FlowProblem:
    """Up to 8 nodes; loops, parallel arcs, empty arcs, no limits, negative costs; any status."""
    nodes = int(rng.integers(1, 9))
    arcs = int(rng.integers(0, 3 * nodes + 3))
    tail, head = rng.integers(0, nodes, (2, arcs))
    kind = rng.random()
    lower = np.where(rng.random(arcs) < 0.6, 0, rng.integers(-4, 4, arcs))
    capacity = lower + np.where(rng.random(arcs) < 0.2, 0, rng.integers(0, 8, arcs))
    flow = np.minimum(capacity, lower + rng.integers(0, 4, arcs))
    if kind < 0.6:
        capacity = np.where(rng.random(arcs) < 0.15, NO_LIMIT, capacity)
    if kind < 0.3:
        lower = np.where(rng.random(arcs) < 0.15, -NO_LIMIT, lower)
    if rng.random() < 0.7:
        supply = np.zeros(nodes, np.int64)
        np.add.at(supply, tail, flow)
        np.subtract.at(supply, head, flow)
        supply[0] += rng.random() < 0.1
    else:
        supply = rng.integers(-3, 4, nodes)
        supply[0] -= supply.sum() * (rng.random() < 0.8)
    cost = rng.integers(-5 if rng.random() < 0.5 else 0, 10, arcs)
    return FlowProblem.of(tail, head, lower=lower, capacity=capacity, cost=cost, supply=supply)


def feasible_problem(
    rng: np.random.Generator, nodes: int, arcs: int, largest: int = 20
) -> tuple[FlowProblem, np.ndarray]:
    """A bounded problem with limits on all arcs, and a flow that meets it."""
    tail, head = rng.integers(0, nodes, (2, arcs))
    lower = rng.integers(-3, 3, arcs)
    capacity = lower + rng.integers(0, 9, arcs)
    flow = rng.integers(lower, capacity + 1)
    supply = np.zeros(nodes, np.int64)
    np.add.at(supply, tail, flow)
    np.subtract.at(supply, head, flow)
    cost = rng.integers(-largest, largest + 1, arcs)
    problem = FlowProblem.of(tail, head, lower=lower, capacity=capacity, cost=cost, supply=supply)
    return problem, flow


def program_of(problem: FlowProblem) -> highspy.HighsLp:
    """The linear program of a flow."""
    n, m = problem.supply.size, problem.tail.size
    ends, arcs = np.append(problem.tail, problem.head), np.tile(np.arange(m), 2)
    supply = problem.supply.astype(float)
    return program(
        sp.csc_array((np.repeat([1.0, -1.0], m), (ends, arcs)), shape=(n, m)),
        problem.cost.astype(float),
        supply,
        supply,
        np.where(problem.lower == -NO_LIMIT, -np.inf, problem.lower),
        np.where(problem.capacity == NO_LIMIT, np.inf, problem.capacity),
    )


def by_highs(problem: FlowProblem) -> tuple[str, float]:
    """Status and cost by HiGHS's dual simplex without presolve."""
    solver = highs(program_of(problem), presolve="off")
    solver.run()
    status = solver.modelStatusToString(solver.getModelStatus()).lower()
    return status, solver.getInfo().objective_function_value


def assert_answer(problem: FlowProblem, result: FlowResult) -> None:
    """Hold an answer to the definition of what it says."""
    flow = result.flow
    assert ((flow >= problem.lower) & (flow <= problem.capacity)).all()
    if result.status == "infeasible":
        assert shortfall(problem, result.cut.nodes, result.cut.outward) == result.cut.shortfall
        assert result.cut.shortfall > 0
        return
    assert result.unmet == 0
    assert not problem.imbalance(flow).any()
    if result.status == "unbounded":
        ray = result.ray.astype(np.int64)
        assert np.array_equal(problem.imbalance(ray), problem.supply)
        assert problem.cost @ ray < 0
        assert ((ray <= 0) | (problem.capacity == NO_LIMIT)).all()
        assert ((ray >= 0) | (problem.lower == -NO_LIMIT)).all()
        return
    assert result.status == "optimal"
    reduced = problem.cost.astype(object) + (
        result.potential.astype(object)[problem.tail] - result.potential[problem.head]
    )
    assert all(reduced[flow > problem.lower] <= 0)
    assert all(reduced[flow < problem.capacity] >= 0)
    assert_basis(problem, result, reduced)


def assert_basis(problem: FlowProblem, result: FlowResult, reduced: np.ndarray) -> None:
    """A spanning tree per connected part, priced at 0; all other arcs rest at a limit."""
    tree, rest = result.tree, ~result.tree
    assert not reduced[tree].any()
    lower, capacity, flow = problem.lower[rest], problem.capacity[rest], result.flow[rest]
    free = (lower == -NO_LIMIT) & (capacity == NO_LIMIT)
    assert ((flow == lower) | (flow == capacity) | (free & (flow == 0))).all()
    parts = [_parts(problem, np.ones_like(tree)), _parts(problem, tree)]
    assert parts[0] == parts[1] == result.roots.sum()
    assert tree.sum() == problem.supply.size - parts[0]


def _parts(problem: FlowProblem, chosen: np.ndarray) -> int:
    """Number of connected parts of the network of the chosen arcs."""
    graph = nx.Graph()
    graph.add_nodes_from(range(problem.supply.size))
    graph.add_edges_from(
        zip(problem.tail[chosen].tolist(), problem.head[chosen].tolist(), strict=True)
    )
    return nx.number_connected_components(graph)

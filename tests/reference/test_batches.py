"""Whole batches of DIMACS files against three other programs, each with a method of its own.

NetworkX 3 (Hagberg, Schult, Swart 2008, "Exploring network structure, dynamics, and function using
NetworkX"): `network_simplex`, primal, pure Python. SciPy 1: `linear_sum_assignment`, shortest
augmenting paths (Crouse 2016, "On implementing 2D rectangular assignment algorithms"). OR-Tools,
where installed: `SimpleMinCostFlow`, cost scaling (Goldberg 1997, "An efficient implementation of a
scaling minimum-cost flow algorithm"). The formats are those of the first DIMACS challenge (1991).
"""

from __future__ import annotations

from pathlib import Path

import networkx as nx
import numpy as np
import pytest
from scipy.optimize import linear_sum_assignment

import pyomo_latpath as latpath

FLOWS, ASSIGNMENTS = 60, 30


class Flow:
    """Wheels from dairies to markets over roads; about a third have too little road."""

    def __init__(self, seed: int) -> None:
        rng = np.random.default_rng(seed)
        self.nodes = int(rng.integers(4, 25))
        arcs = int(rng.integers(3, 5) * self.nodes)
        self.tail = rng.integers(0, self.nodes, arcs)
        self.head = (self.tail + rng.integers(1, self.nodes, arcs)) % self.nodes
        self.capacity = rng.integers(1, 12, arcs)
        self.cost = rng.integers(0, 40, arcs)
        self.supply = rng.integers(-6, 7, self.nodes)
        self.supply[0] -= self.supply.sum()

    def text(self) -> str:
        lines = [f"p min {self.nodes} {self.tail.size}"]
        lines += [f"n {k + 1} {amount}" for k, amount in enumerate(self.supply) if amount]
        arcs = zip(self.tail + 1, self.head + 1, self.capacity, self.cost, strict=True)
        lines += [f"a {tail} {head} 0 {capacity} {cost}" for tail, head, capacity, cost in arcs]
        return "\n".join(lines) + "\n"


def by_networkx(flow: Flow) -> int | None:
    graph = nx.MultiDiGraph()
    for node, amount in enumerate(flow.supply.tolist()):
        graph.add_node(node, demand=-amount)
    arcs = (flow.tail, flow.head, flow.capacity, flow.cost)
    for tail, head, capacity, cost in zip(*(values.tolist() for values in arcs), strict=True):
        graph.add_edge(tail, head, capacity=capacity, weight=cost)
    try:
        return nx.network_simplex(graph)[0]
    except nx.NetworkXUnfeasible:
        return None


def by_ortools(flow: Flow) -> int | None:
    min_cost_flow = pytest.importorskip("ortools.graph.python.min_cost_flow")
    solver = min_cost_flow.SimpleMinCostFlow()
    solver.add_arcs_with_capacity_and_unit_cost(flow.tail, flow.head, flow.capacity, flow.cost)
    solver.set_nodes_supplies(np.arange(flow.nodes), flow.supply)
    return solver.optimal_cost() if solver.solve() == solver.OPTIMAL else None


@pytest.fixture(scope="module")
def batch(tmp_path_factory):
    """All files, solved in one batch by two processes."""
    folder: Path = tmp_path_factory.mktemp("batch")
    flows = {folder / f"flow{seed}.min": Flow(seed) for seed in range(FLOWS)}
    for path, flow in flows.items():
        path.write_text(flow.text())
    costs = {}
    for seed in range(ASSIGNMENTS):
        rng = np.random.default_rng(seed)
        size = int(rng.integers(2, 15))
        cost = costs[folder / f"turns{seed}.asn"] = rng.integers(-20, 60, (size, size))
        lines = [f"p asn {2 * size} {size * size}", *(f"n {i + 1}" for i in range(size))]
        lines += [f"a {i + 1} {size + j + 1} {c}" for (i, j), c in np.ndenumerate(cost)]
        (folder / f"turns{seed}.asn").write_text("\n".join(lines) + "\n")
    records = list(latpath.solve_many(folder, workers=2, progress=False))
    assert len(records) == FLOWS + ASSIGNMENTS
    return {Path(record.instance): record for record in records}, flows, costs


@pytest.mark.parametrize("reference", [by_networkx, by_ortools])
def test_flows(batch, reference):
    records, flows, _ = batch
    infeasible = 0
    for path, flow in flows.items():
        optimum, record = reference(flow), records[path]
        assert record.status == ("infeasible" if optimum is None else "optimal")
        assert record.objective == optimum
        assert (record.verdict, record.proof, record.error) == ("proven", "exact", None)
        infeasible += optimum is None
    assert 5 <= infeasible <= FLOWS - 20


def test_assignments(batch):
    records, _, costs = batch
    for path, cost in costs.items():
        assert records[path].objective == cost[linear_sum_assignment(cost)].sum()
        assert (records[path].status, records[path].proof) == ("optimal", "exact")

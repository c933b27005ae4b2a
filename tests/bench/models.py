"""Pyomo models of the sizes that the benchmarks speak of, from seeds."""

from __future__ import annotations

import numpy as np
import pyomo.environ as pyo


def assignment(size: int, seed: int = 0, cost: np.ndarray | None = None) -> pyo.ConcreteModel:
    """Every keeper one cave, every cave one keeper; size**2 binaries."""
    drawn = np.random.default_rng(seed).integers(1, 1000, (size, size)) if cost is None else cost
    cost = drawn.reshape(size, size).tolist()
    model = pyo.ConcreteModel()
    model.places = pyo.RangeSet(0, size - 1)
    model.x = pyo.Var(model.places, model.places, domain=pyo.Binary)
    model.rows = pyo.Constraint(
        model.places, rule=lambda m, i: pyo.quicksum(m.x[i, j] for j in m.places) == 1
    )
    model.cols = pyo.Constraint(
        model.places, rule=lambda m, j: pyo.quicksum(m.x[i, j] for i in m.places) == 1
    )
    model.cost = pyo.Objective(expr=pyo.quicksum(cost[i][j] * v for (i, j), v in model.x.items()))
    return model


def shifts(periods: int = 500, count: int = 8000, seed: int = 0) -> pyo.ConcreteModel:
    """Man shifts of 2 to 60 consecutive periods so that each period has the hands it needs.

    The need is that of a hidden roster in which one shift in twenty is manned.
    """
    rng = np.random.default_rng(seed)
    length = rng.integers(2, 61, count)
    begin = (rng.random(count) * (periods - length + 1)).astype(int)
    cost = rng.integers(1, 100, count).tolist()
    manned = rng.random(count) < 0.05
    covering: list[list[int]] = [[] for _ in range(periods)]
    need = [0] * periods
    for k, (start, run) in enumerate(zip(begin.tolist(), length.tolist(), strict=True)):
        for period in range(start, start + run):
            covering[period].append(k)
            need[period] += int(manned[k])
    model = pyo.ConcreteModel()
    model.shifts = pyo.RangeSet(0, count - 1)
    model.x = pyo.Var(model.shifts, domain=pyo.Binary)
    model.cover = pyo.Constraint(
        [p for p in range(periods) if covering[p]],
        rule=lambda m, p: pyo.quicksum(m.x[k] for k in covering[p]) >= need[p],
    )
    model.cost = pyo.Objective(expr=pyo.quicksum(cost[k] * v for k, v in model.x.items()))
    return model


def flow(nodes: int = 5000, arcs: int = 45_000, seed: int = 0) -> pyo.ConcreteModel:
    """Minimum-cost flow on a random network with a dear arc from every node to the next."""
    rng = np.random.default_rng(seed)
    tail = np.concatenate([np.arange(nodes), rng.integers(0, nodes, arcs - nodes)])
    head = np.concatenate([(np.arange(nodes) + 1) % nodes, rng.integers(0, nodes, arcs - nodes)])
    keep = tail != head
    tail, head = tail[keep].tolist(), head[keep].tolist()
    cost = rng.integers(1, 1000, len(tail))
    capacity = rng.integers(1, 100, len(tail))
    cost[:nodes], capacity[:nodes] = 10_000, 10**6
    supply = rng.integers(-20, 21, nodes)
    supply[0] -= supply.sum()
    out_of: list[list[int]] = [[] for _ in range(nodes)]
    into: list[list[int]] = [[] for _ in range(nodes)]
    for k, (a, b) in enumerate(zip(tail, head, strict=True)):
        out_of[a].append(k)
        into[b].append(k)
    model = pyo.ConcreteModel()
    model.arcs = pyo.RangeSet(0, len(tail) - 1)
    limit = capacity.tolist()
    model.x = pyo.Var(model.arcs, domain=pyo.NonNegativeIntegers, bounds=lambda m, k: (0, limit[k]))
    model.balance = pyo.Constraint(
        range(nodes),
        rule=lambda m, i: (
            pyo.quicksum(m.x[k] for k in out_of[i]) - pyo.quicksum(m.x[k] for k in into[i])
            == int(supply[i])
        ),
    )
    price = cost.tolist()
    model.cost = pyo.Objective(expr=pyo.quicksum(price[k] * v for k, v in model.x.items()))
    return model


def relaxed(model: pyo.ConcreteModel) -> pyo.ConcreteModel:
    """The same model, integers relaxed by hand: declared as numbers with the same bounds."""
    for variable in model.component_data_objects(pyo.Var):
        low, high = variable.bounds
        variable.domain = pyo.Reals
        variable.setlb(low)
        variable.setub(high)
    return model

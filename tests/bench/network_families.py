"""Families of minimum-cost flow problems, from seeds; every problem has a flow."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from pyomo_latpath.paths.network_from_tree import network_from_tree
from pyomo_latpath.paths.network_problem import FlowProblem

Whole = NDArray[np.int64]


def assignment(size: int, each: int, dearest: int = 1000) -> FlowProblem:
    """Assign `size` to `size`; each may go to `each` others (all of them: dense)."""
    rng = np.random.default_rng(size)
    if each == size:
        tail, head = np.divmod(np.arange(size * size), size)
    else:
        tail = np.tile(np.arange(size), each)
        head = np.concatenate([np.arange(size), *(rng.permutation(size) for _ in range(each - 1))])
    supply = np.repeat([1, -1], size)
    cost = rng.integers(0, dearest + 1, tail.size)
    return FlowProblem.of(tail, head + size, capacity=1, cost=cost, supply=supply)


def transport(sources: int, sinks: int) -> FlowProblem:
    """Ship from every source to every sink."""
    rng = np.random.default_rng(sources)
    tail, head = np.divmod(np.arange(sources * sinks), sinks)
    demand = rng.integers(1, 1000, sinks)
    supply = np.append(_shares(demand.sum(), rng.random(sources) + 0.2), -demand)
    cost = rng.integers(1, 1001, tail.size)
    return FlowProblem.of(
        tail, head + sources, capacity=int(demand.sum()), cost=cost, supply=supply
    )


def grid(side: int) -> FlowProblem:
    """Carry supplies of one node in twenty over a square grid, both ways on every edge."""
    rng = np.random.default_rng(side)
    node = np.arange(side * side).reshape(side, side)
    ends = [(node[:, :-1], node[:, 1:]), (node[:-1], node[1:])]
    one = np.concatenate([a.ravel() for a, _ in ends])
    other = np.concatenate([b.ravel() for _, b in ends])
    tail, head = np.append(one, other), np.append(other, one)
    return FlowProblem.of(
        tail,
        head,
        capacity=rng.integers(50, 101, tail.size),
        cost=rng.integers(1, 1001, tail.size),
        supply=_supplies(side * side, 20, 20, rng),
    )


def sparse(nodes: int, arcs: int, digits: float | None = None) -> FlowProblem:
    """Random arcs over a dear cycle; with `digits`, costs spread over so many digits."""
    rng = np.random.default_rng(nodes)
    ring = rng.permutation(nodes)
    tail = np.append(ring, rng.integers(0, nodes, arcs - nodes))
    head = np.append(np.roll(ring, -1), rng.integers(0, nodes, arcs - nodes))
    supply = _supplies(nodes, 10, 1000, rng)
    capacity = rng.integers(1, 1001, arcs)
    capacity[:nodes] = supply[supply > 0].sum()
    if digits is None:
        cost = rng.integers(1, 10_001, arcs)
    else:
        cost = np.floor(10 ** rng.uniform(0, digits, arcs)).astype(np.int64)
    cost[:nodes] = cost.max()
    return FlowProblem.of(tail, head, capacity=capacity, cost=cost, supply=supply)


def long_path(nodes: int) -> FlowProblem:
    """From one end of a path to the other, by arcs that skip up to two nodes."""
    rng = np.random.default_rng(nodes)
    tail = np.concatenate([np.arange(nodes - k) for k in (1, 2, 3)])
    head = tail + np.repeat([1, 2, 3], [nodes - 1, nodes - 2, nodes - 3])
    capacity = rng.integers(30, 120, tail.size)
    capacity[: nodes - 1] = 100
    supply = np.zeros(nodes, np.int64)
    supply[[0, -1]] = 100, -100
    cost = rng.integers(1, 1001, tail.size)
    return FlowProblem.of(tail, head, capacity=capacity, cost=cost, supply=supply)


def shifts(periods: int, count: int) -> FlowProblem:
    """Cover periods by shifts of 2 to 60 of them on end: a matrix of intervals."""
    rng = np.random.default_rng(periods)
    length = rng.integers(2, 61, count)
    begin = (rng.random(count) * (periods - length + 1)).astype(np.int64)
    begin[: periods // 2] = np.minimum(np.arange(0, 2 * (periods // 2), 2), periods - 2)
    length[: periods // 2] = 2
    return network_from_tree(
        np.stack([np.arange(periods), np.arange(1, periods + 1)], axis=1),
        np.stack([begin, begin + length], axis=1),
        row_lower=rng.integers(1, 30, periods).astype(np.float64),
        row_upper=np.full(periods, np.inf),
        col_lower=np.zeros(count),
        col_upper=np.full(count, np.inf),
        cost=10 + 3 * length + rng.integers(0, 30, count),
    ).problem


#: By family: name of a size, and what builds it.
FAMILIES: dict[str, dict[str, Callable[[], FlowProblem]]] = {
    "assignment, dense": {f"{n}x{n}": lambda n=n: assignment(n, n) for n in (100, 200, 400, 670)},
    "assignment, sparse": {
        f"{n}x8": lambda n=n: assignment(n, 8, 100_000) for n in (1000, 5000, 25_000)
    },
    "transport": {
        f"{a}x{b}": lambda a=a, b=b: transport(a, b)
        for a, b in ((30, 100), (100, 400), (300, 1500))
    },
    "grid": {f"{n}x{n}": lambda n=n: grid(n) for n in (30, 100, 300)},
    "random sparse": {
        f"{n}/{m}": lambda n=n, m=m: sparse(n, m)
        for n, m in ((1000, 8000), (5000, 45_000), (16_000, 140_000), (50_000, 450_000))
    },
    "long path": {f"{n}": lambda n=n: long_path(n) for n in (1000, 3000, 10_000)},
    "heavy degeneracy": {
        f"{n}x{k}": lambda n=n, k=k: assignment(n, k, 3)
        for n, k in ((200, 200), (3000, 12), (600, 600))
    },
    "huge cost range": {
        f"{n}/{m}": lambda n=n, m=m: sparse(n, m, 10)
        for n, m in ((2000, 16_000), (5000, 45_000), (20_000, 200_000))
    },
    "interval rows": {
        f"{p}x{c}": lambda p=p, c=c: shifts(p, c)
        for p, c in ((100, 1600), (500, 8000), (2000, 32_000))
    },
}


def _shares(total: int, weights: NDArray[np.float64]) -> Whole:
    """Whole shares of a total."""
    shares = np.floor(weights / weights.sum() * total).astype(np.int64)
    shares[: total - shares.sum()] += 1
    return shares


def _supplies(nodes: int, one_in: int, most: int, rng: np.random.Generator) -> Whole:
    """Supplies up to `most` at one node in so many, taken out evenly at as many others."""
    count = nodes // one_in
    chosen = rng.permutation(nodes)
    supply = np.zeros(nodes, np.int64)
    supply[chosen[:count]] = rng.integers(1, most, count)
    supply[chosen[count : 2 * count]] = -_shares(supply.sum(), np.ones(count))
    return supply

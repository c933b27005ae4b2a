"""Models in which some integer declarations imply others: openings decide, amounts follow."""

from __future__ import annotations

import math

import numpy as np

from pyomo_latpath.forms.linear_form import LinearForm

Row = tuple[dict[int, float], float, float]


def form_of_rows(rows: list[Row], cost, col_upper, **data) -> LinearForm:
    """Make a form of integer columns from 0 on; a row is its entries with its two sides."""
    matrix = np.zeros((len(rows), len(cost)))
    for i, (entries, _, _) in enumerate(rows):
        matrix[i, list(entries)] = list(entries.values())
    return LinearForm.from_arrays(
        matrix,
        row_lower=[row[1] for row in rows],
        row_upper=[row[2] for row in rows],
        col_lower=0,
        col_upper=col_upper,
        cost=cost,
        **data,
    )


def lot_sizing(rng: np.random.Generator, products: int, days: int) -> LinearForm:
    """Amounts made and stored (all whole), set-ups, and one vat for all products of a day."""
    made, stored, set_up = np.arange(3 * products * days).reshape(3, products, days)
    need = rng.integers(0, 20, (products, days))
    vat = int(need.sum() / days * 1.6) + 20
    rows: list[Row] = []
    for p in range(products):
        for t in range(days):
            balance = {made[p, t]: 1, stored[p, t]: -1}
            balance |= {stored[p, t - 1]: 1} if t else {}
            rows.append((balance, need[p, t], need[p, t]))
            rows.append(({made[p, t]: 1, set_up[p, t]: -vat}, -math.inf, 0))
    for t in range(days):
        amounts = dict.fromkeys(made[:, t], 1) | dict.fromkeys(set_up[:, t], 3)
        rows.append((amounts, -math.inf, vat))
    size = (products, days)
    cost = [rng.integers(1, 4, size), rng.integers(1, 5, size), rng.integers(20, 90, size)]
    upper = np.full((3, products * days), math.inf)
    upper[2] = 1
    return form_of_rows(rows, np.ravel(cost), upper.ravel())


def fixed_charge_flow(rng: np.random.Generator, nodes: int, arcs: int) -> LinearForm:
    """Whole flows on arcs that cost something to open."""
    ends = [(v, v + 1) for v in range(nodes - 1)]
    while len(ends) < arcs:
        tail, head = rng.choice(nodes, 2, replace=False)
        ends.append((int(tail), int(head)))
    supply = np.zeros(nodes)
    for _ in range(max(2, nodes // 4)):
        first, last = np.sort(rng.choice(nodes, 2, replace=False))
        amount = rng.integers(2, 20)
        supply[first] += amount
        supply[last] -= amount
    most = float(np.maximum(supply, 0).sum())
    rows: list[Row] = []
    for v in range(nodes):
        balance = {
            a: 1 if tail == v else -1 for a, (tail, head) in enumerate(ends) if v in (tail, head)
        }
        rows.append((balance, supply[v], supply[v]))
    rows += [({a: 1, arcs + a: -most}, -math.inf, 0) for a in range(arcs)]
    cost = np.concatenate([rng.integers(1, 10, arcs), rng.integers(20, 200, arcs)])
    return form_of_rows(rows, cost, np.repeat([most, 1], arcs))


def location(rng: np.random.Generator, sites: int, towns: int, *, split: bool) -> LinearForm:
    """Towns served from opened sites; one row a pair (`split`) or one row a site."""
    served = np.arange(sites * towns).reshape(sites, towns)
    opened = sites * towns + np.arange(sites)
    rows: list[Row] = [(dict.fromkeys(served[:, t], 1), 1, 1) for t in range(towns)]
    for i in range(sites):
        if split:
            rows += [({j: 1, opened[i]: -1}, -math.inf, 0) for j in served[i]]
        else:
            rows.append((dict.fromkeys(served[i], 1) | {opened[i]: -towns}, -math.inf, 0))
    where = rng.random((sites, 1, 2)) - rng.random((1, towns, 2))
    cost = np.concatenate(
        [np.rint(100 * np.linalg.norm(where, axis=2)).ravel(), rng.integers(60, 200, sites)]
    )
    return form_of_rows(rows, cost, np.ones(cost.size))


def served_amounts(rng: np.random.Generator, sites: int, towns: int) -> LinearForm:
    """Whole amounts from sites of limited size, which cost something to open, to towns."""
    sent = np.arange(sites * towns).reshape(sites, towns)
    opened = sites * towns + np.arange(sites)
    need = rng.integers(3, 30, towns)
    room = rng.integers(int(need.max()), int(need.max()) + 60, sites)
    room[0] = max(int(room[0]), int(need.sum()) // 2)
    rows: list[Row] = [(dict.fromkeys(sent[:, t], 1), need[t], need[t]) for t in range(towns)]
    rows += [
        (dict.fromkeys(sent[i], 1) | {opened[i]: -room[i]}, -math.inf, 0) for i in range(sites)
    ]
    cost = np.concatenate([rng.integers(1, 12, sent.size), rng.integers(50, 300, sites)])
    return form_of_rows(rows, cost, np.repeat([math.inf, 1], [sent.size, sites]))


FAMILIES = {
    "lot sizing": lambda rng, k: lot_sizing(rng, 1 + k, 2 + 2 * k),
    "fixed-charge flow": lambda rng, k: fixed_charge_flow(rng, 4 + 4 * k, 8 + 14 * k),
    "location, split": lambda rng, k: location(rng, 2 + 4 * k, 3 + 7 * k, split=True),
    "location, aggregated": lambda rng, k: location(rng, 2 + 3 * k, 3 + 6 * k, split=False),
    "location with sizes": lambda rng, k: served_amounts(rng, 2 + 3 * k, 3 + 7 * k),
}

"""Small models that have remedies: switches, aggregated rows, odd cycles; and all their plans."""

from __future__ import annotations

import itertools

import networkx as nx
import numpy as np

from pyomo_latpath.forms.linear_form import LinearForm


def switched_form(rng: np.random.Generator, *, continuous: bool = False) -> LinearForm:
    """Caves that are opened (y) before lots ripen in them (x), with a big M in each row.

    Some rows are written the other way round (>=, or with a cave closed in place of opened).
    """
    caves, lots = int(rng.integers(1, 3)), int(rng.integers(2, 4))
    n = caves * lots + caves
    rows, low, high = [], [], []
    for c in range(caves):
        row = np.zeros(n)
        row[c * lots : (c + 1) * lots] = rng.choice([1, 1, 2, 0.5], lots)
        y, big = caves * lots + c, float(rng.choice([lots, lots + 1, 10, 100, 7.3]))
        if rng.random() < 0.3:  # y says that the cave is closed
            row[y], side = big, big
        else:
            row[y], side = -big, 0.0
        flip = -1.0 if rng.random() < 0.3 else 1.0
        rows.append(flip * row)
        low.append(-side if flip < 0 else -np.inf)
        high.append(np.inf if flip < 0 else side)
    for k in range(lots):
        row = np.zeros(n)
        row[k : caves * lots : lots] = 1
        rows.append(row)
        low.append(float(rng.integers(0, 2)))
        high.append(np.inf if rng.random() < 0.5 else float(rng.integers(2, 4)))
    upper = np.append(rng.integers(1, 3, caves * lots), np.ones(caves))
    integer = np.full(n, True)
    if continuous:
        integer[: caves * lots] = rng.random(caves * lots) < 0.5
    cost = np.append(rng.integers(-3, 4, caves * lots), rng.integers(-1, 6, caves))
    return LinearForm.from_arrays(
        rows,
        row_lower=low,
        row_upper=high,
        col_lower=0,
        col_upper=upper,
        cost=cost,
        integer=integer,
        row_names=[f"{'open' if i < caves else 'lot'}[{i}]" for i in range(len(rows))],
    )


def packing_form(rng: np.random.Generator, *, transposed: bool = False) -> LinearForm:
    """A matching (or a stable set, transposed) in a small random graph, weighted."""
    graph = nx.gnm_random_graph(6, int(rng.integers(5, 10)), seed=int(rng.integers(10**6)))
    edges = list(graph.edges)
    matrix = np.zeros((6, len(edges)))
    for k, ends in enumerate(edges):
        matrix[list(ends), k] = 1
    matrix = matrix.T if transposed else matrix
    return LinearForm.from_arrays(
        matrix,
        row_lower=-np.inf,
        row_upper=1,
        col_lower=0,
        col_upper=1,
        cost=rng.integers(1, 6, matrix.shape[1]),
        sense="max",
    )


def whole_plans(form: LinearForm) -> np.ndarray:
    """All whole plans of a bounded form of integer columns, one a row, rows read with 1e-9."""
    ranges = [
        np.arange(np.ceil(low - 1e-9), np.floor(high + 1e-9) + 1)
        for low, high in zip(form.col_lower, form.col_upper, strict=True)
    ]
    every = np.array(list(itertools.product(*ranges)), dtype=float).reshape(-1, len(ranges)).T
    activity = form.matrix @ every
    inside = activity >= form.row_lower[:, None] - 1e-9
    inside &= activity <= form.row_upper[:, None] + 1e-9
    return every[:, inside.all(axis=0)].T

"""Explaining a large model: 10,000 rows in ten groups, 20,000 columns, one group to blame.

Flows of wheels between dairies, caves, depots and towns (nine groups of balances), and vans that
three arcs share each (the tenth group). Prints when which answer came, and the peak memory beside
the memory before.

Run: python tests/bench/explain.py [--seconds S] [--seed S]
"""

from __future__ import annotations

import argparse
import resource
import time

import numpy as np
import scipy.sparse as sp

import pyomo_latpath as latpath

PLACES = ("dairy", "cave", "cellar", "depot", "hut", "market", "meadow", "salt", "town")


def shared_vans(
    nodes: int = 1000, vans: int = 1000, arcs: int = 20_000, seed: int = 0
) -> latpath.LinearForm:
    """Return the model: `nodes` balances in each of nine groups, and a row for each van."""
    rng = np.random.default_rng(seed)
    size = len(PLACES) * nodes
    tail, head = rng.integers(0, size, (2, arcs))
    tail[: size - 1], head[: size - 1] = np.arange(size - 1), np.arange(1, size)
    head = np.where(head == tail, (head + 1) % size, head)
    shared = rng.choice(arcs, (vans, 3), replace=False)
    rows = np.concatenate((tail, head, np.repeat(size + np.arange(vans), 3)))
    columns = np.concatenate((np.tile(np.arange(arcs), 2), shared.ravel()))
    data = np.concatenate((np.ones(arcs), -np.ones(arcs), np.ones(3 * vans)))
    matrix = sp.csc_array((data, (rows, columns)), shape=(size + vans, arcs))
    flow = rng.integers(0, 5, arcs)
    balance = (matrix @ flow)[:size]
    cost = 30.0 + rng.integers(0, 100, arcs)
    cost[shared] = rng.integers(1, 10, shared.shape)
    return latpath.LinearForm.from_arrays(
        matrix,
        row_lower=np.append(balance, np.full(vans, -np.inf)),
        row_upper=np.append(balance, flow[shared].sum(axis=1)),
        col_lower=0,
        col_upper=flow + rng.integers(0, 4, arcs),
        cost=cost,
        row_names=[f"{place}[{i}]" for place in PLACES for i in range(nodes)]
        + [f"van[{i}]" for i in range(vans)],
    )


def main() -> None:
    """Explain the model, and print what came when."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seconds", type=float, default=None)
    parser.add_argument("--seed", type=int, default=0)
    options = parser.parse_args()
    form = shared_vans(seed=options.seed)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    begun = time.perf_counter()

    def tell(line: str) -> None:
        print(f"{time.perf_counter() - begun:8.2f} s  {line}", flush=True)

    told = latpath.explain(form, time_limit=options.seconds, seed=options.seed, progress=tell)
    tell("done")
    after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    rows, columns = form.shape
    print(f"{rows:,} rows in {len(told.groups)} groups, {columns:,} columns")
    print(f"to blame: {[culprit.groups for culprit in told.culprits]}; {told.verdict}")
    print(f"memory: {before / 1024:.0f} MB before, {after / 1024:.0f} MB at most")
    for part, seconds in told.seconds.items():
        print(f"  {part:18} {seconds:6.2f} s")


if __name__ == "__main__":
    main()

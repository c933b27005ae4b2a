"""The network simplex beside OR-Tools, SciPy, NetworkX and HiGHS on families of flow problems.

Every way starts from arrays and ends with the cost of the flow it found, in turns; OR-Tools
gets arcs with zero lower limits, ready made. Ratios are our seconds over theirs: below 1 we
are faster. Floors: the geometric mean over OR-Tools at most 1.0 up to 50,000 arcs with no
family above 2.0, at most 3.0 above that; never slower than HiGHS's LP.

Run: python tests/bench/network_engine.py [--quick] [family ...]
"""

from __future__ import annotations

import statistics
import sys
import time
from collections.abc import Callable
from pathlib import Path

import highspy
import networkx as nx
import numpy as np
from network_families import FAMILIES
from ortools.graph.python import min_cost_flow
from scipy.optimize import linear_sum_assignment
from timing import medians

sys.path.insert(0, str(Path(__file__).parents[1]))
from flow_problems import program_of
from with_highs import highs

from pyomo_latpath.paths.network_problem import FlowProblem
from pyomo_latpath.paths.network_simplex import solve_flow
from pyomo_latpath.paths.network_standard import StandardForm, standard_form

#: Arcs up to which a way is tried at all.
NETWORKX_ARCS, PRESOLVE_ARCS = 10_000, 50_000
#: A way that takes longer than so many seconds is timed once.
PATIENCE = 5.0
#: The floors speak of problems up to this size and above.
SMALL = 50_000


def ours(problem: FlowProblem) -> int:
    """Cost of our flow."""
    result = solve_flow(problem)
    assert result.status == "optimal"
    return problem.value(result.flow)


def by_ortools(form: StandardForm, cost: np.ndarray) -> int:
    """Cost of OR-Tools' flow on the standard arcs."""
    flow = min_cost_flow.SimpleMinCostFlow()
    flow.add_arcs_with_capacity_and_unit_cost(form.tail, form.head, form.capacity, cost)
    flow.set_nodes_supplies(np.arange(form.excess.size), form.excess)
    assert flow.solve() == flow.OPTIMAL
    return flow.optimal_cost()


def by_highs(problem: FlowProblem, presolve: str) -> float:
    """Cost by HiGHS's dual simplex."""
    solver = highs(program_of(problem), threads=1, presolve=presolve, solver="simplex")
    solver.run()
    assert solver.getModelStatus() == highspy.HighsModelStatus.kOptimal
    return solver.getInfo().objective_function_value


def by_networkx(form: StandardForm, cost: np.ndarray) -> int:
    """Cost of NetworkX's flow on the standard arcs."""
    graph = nx.MultiDiGraph()
    graph.add_nodes_from((v, {"demand": -s}) for v, s in enumerate(form.excess.tolist()))
    rows = (form.tail.tolist(), form.head.tolist(), cost.tolist(), form.capacity.tolist())
    graph.add_edges_from(
        (u, v, {"weight": c, "capacity": k}) for u, v, c, k in zip(*rows, strict=True)
    )
    return nx.network_simplex(graph)[0]


def by_scipy(problem: FlowProblem, size: int) -> int:
    """Cost of a dense assignment."""
    cost = problem.cost.reshape(size, size)
    rows, columns = linear_sum_assignment(cost)
    return int(cost[rows, columns].sum())


def compare(problem: FlowProblem) -> dict[str, float]:
    """Seconds of every way that takes a problem of this kind and size."""
    form = standard_form(problem)
    cost, arcs = form.costs(problem.cost), problem.tail.size
    base = int(problem.cost @ form.offset)
    most = int(form.excess[form.excess > 0].sum())
    limited = StandardForm(
        form.tail, form.head, np.minimum(form.capacity, most), *list(vars(form).values())[3:]
    )
    ways: dict[str, Callable[[], float]] = {
        "ours": lambda: ours(problem),
        "ortools": lambda: base + by_ortools(limited, cost),
        "highs": lambda: by_highs(problem, "off"),
    }
    if arcs <= PRESOLVE_ARCS:
        ways["presolved"] = lambda: by_highs(problem, "on")
    if arcs <= NETWORKX_ARCS:
        ways["networkx"] = lambda: base + by_networkx(limited, cost)
    size = problem.supply.size // 2
    if arcs == size * size and (problem.capacity == 1).all():
        ways["scipy"] = lambda: by_scipy(problem, size)
    costs, first = {}, {}
    for name, way in ways.items():
        begun = time.perf_counter()
        costs[name] = way()
        first[name] = time.perf_counter() - begun
    assert np.allclose(list(costs.values()), costs["ours"], rtol=1e-9), costs
    quick = {name: way for name, way in ways.items() if name == "ours" or first[name] < PATIENCE}
    return first | medians(quick, 3 if arcs > SMALL else 7)


def main(chosen: list[str], quick: bool) -> None:
    """Print a line per problem, growth per family, and the floors."""
    ratios: dict[str, list[tuple[int, float]]] = {}
    for family, sizes in FAMILIES.items():
        if chosen and family not in chosen:
            continue
        seconds = []
        for name, build in list(sizes.items())[: 1 if quick else None]:
            problem = build()
            arcs = problem.tail.size
            taken = compare(problem)
            seconds.append((arcs, taken["ours"]))
            ratios.setdefault(family, []).append((arcs, taken["ours"] / taken["ortools"]))
            told = "  ".join(
                f"{way} {value * 1e3:.1f} ({taken['ours'] / value:.2f})"
                for way, value in taken.items()
                if way != "ours"
            )
            print(
                f"{family:20}{name:>14} {arcs:>7,} arcs  ours {taken['ours'] * 1e3:.1f} ms  {told}",
                flush=True,
            )
        if len(seconds) > 1:
            growth = np.polyfit(*np.log(np.array(seconds)).T, 1)[0]
            print(f"{family:20} time grows as arcs ** {growth:.2f}")
    tell_floors(ratios)


def tell_floors(ratios: dict[str, list[tuple[int, float]]]) -> None:
    """Print the geometric means over OR-Tools below and above the size that the floors name."""
    small = {
        family: statistics.geometric_mean(near)
        for family, rows in ratios.items()
        if (near := [ratio for arcs, ratio in rows if arcs <= SMALL])
    }
    pooled = [r for rows in ratios.values() for arcs, r in rows if arcs <= SMALL]
    large = [r for rows in ratios.values() for arcs, r in rows if arcs > SMALL]
    worst = max(small, key=lambda family: small[family])
    mean = statistics.geometric_mean(pooled)
    print(f"over OR-Tools up to {SMALL:,} arcs: {mean:.2f} (floor 1.0)")
    print(f"worst family there: {worst} {small[worst]:.2f} (floor 2.0)")
    if large:
        print(f"above that: {statistics.geometric_mean(large):.2f} (floor 3.0)")


if __name__ == "__main__":
    arguments = sys.argv[1:]
    families = [word for word in arguments if word != "--quick"]
    if unknown := set(families) - set(FAMILIES):
        sys.exit(
            f"no family is called {min(unknown)!r}; there are {', '.join(map(repr, FAMILIES))}"
        )
    main(families, "--quick" in arguments)

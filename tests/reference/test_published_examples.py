"""Small examples that others published with their optimum, solved and compared.

Each example carries the address (or book) of its data and of its optimum.
"""

from __future__ import annotations

import math
from collections.abc import Hashable, Sequence

import numpy as np
import pytest
from small_forms import pairs

from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality.finding import Verdict
from pyomo_latpath.routing import solve

INF = math.inf

SCIPY_TESTS = (
    "https://github.com/scipy/scipy scipy/sparse/csgraph/tests/test_matching.py, "
    "linear_sum_assignment_test_cases"
)
NETWORKX_TESTS = (
    "https://github.com/networkx/networkx networkx/algorithms/flow/tests/test_networksimplex.py"
)

# Name: cost matrix, least cost, source. The longer side may stay partly unassigned.
ASSIGNMENTS = {
    "SciPy, linear_sum_assignment": (
        [[4, 1, 3], [2, 0, 5], [3, 2, 2]],
        5,
        "https://docs.scipy.org/doc/scipy/reference/generated/"
        "scipy.optimize.linear_sum_assignment.html",
    ),
    "SciPy, tests, square": (
        [[400, 150, 400], [400, 450, 600], [300, 225, 300]],
        850,
        SCIPY_TESTS,
    ),
    "SciPy, tests, 3 x 4": (
        [[400, 150, 400, 1], [400, 450, 600, 2], [300, 225, 300, 3]],
        452,
        SCIPY_TESTS,
    ),
    "SciPy, tests, second square": (
        [[10, 10, 8], [9, 8, 1], [9, 7, 4]],
        18,
        SCIPY_TESTS,
    ),
    "SciPy, tests, second 3 x 4": (
        [[10, 10, 8, 11], [9, 8, 1, 1], [9, 7, 4, 10]],
        15,
        SCIPY_TESTS,
    ),
    "SciPy, min_weight_full_bipartite_matching": (
        [[3, 3, 6], [4, 3, 5], [10, 1, 8]],
        9,
        "https://docs.scipy.org/doc/scipy/reference/generated/"
        "scipy.sparse.csgraph.min_weight_full_bipartite_matching.html",
    ),
    "OR-Tools, linear sum assignment": (
        [[90, 76, 75, 70], [35, 85, 55, 65], [125, 95, 90, 105], [45, 110, 95, 115]],
        265,
        "https://developers.google.com/optimization/assignment/linear_assignment",
    ),
    "OR-Tools, five workers for four tasks": (
        [
            [90, 80, 75, 70],
            [35, 85, 55, 65],
            [125, 95, 90, 95],
            [45, 110, 95, 115],
            [50, 100, 90, 100],
        ],
        265,
        "https://developers.google.com/optimization/assignment/assignment_example",
    ),
    "lp_solve, DIMACS assignment": (
        [
            [22, 30, 26, 16, 25],
            [27, 29, 28, 20, 32],
            [33, 25, 21, 29, 23],
            [24, 24, 30, 19, 26],
            [30, 33, 32, 37, 31],
        ],
        118,
        "https://lpsolve.sourceforge.net/5.5/DIMACS_asn.htm",
    ),
}

# Name: cost matrix, supplies, demands, least cost, source.
TRANSPORTS = {
    "Powerco": (
        [[8, 6, 10, 9], [9, 12, 13, 7], [14, 9, 16, 5]],
        [35, 50, 40],
        [45, 20, 30, 30],
        1020,
        "http://www.columbia.edu/~cs2035/courses/ieor3608.F05/powerco.html for the data; the "
        "optimum, from memory, in Winston, Operations Research: Applications and Algorithms",
    ),
    "canning plants": (
        [[0.225, 0.153, 0.162], [0.225, 0.162, 0.126]],
        [350, 600],
        [325, 300, 275],
        153.675,
        "Dantzig (1963), Linear Programming and Extensions, section 3.3, as in "
        "https://github.com/PyPSA/linopy examples/transport-tutorial.ipynb",
    ),
    "steel mills": (
        [
            [39, 14, 11, 14, 16, 82, 8],
            [27, 9, 12, 9, 26, 95, 17],
            [24, 14, 17, 13, 28, 99, 20],
        ],
        [1400, 2600, 2900],
        [900, 1200, 600, 400, 1700, 1100, 1000],
        196200,
        "https://github.com/jump-dev/JuMP.jl/blob/v0.21.4/examples/transp.jl",
    ),
}

# Name: arcs (tail, head, capacity, cost), supplies, least cost, source.
FLOWS = {
    "OR-Tools, minimum-cost flow": (
        [
            (0, 1, 15, 4),
            (0, 2, 8, 4),
            (1, 2, 20, 2),
            (1, 3, 4, 2),
            (1, 4, 10, 6),
            (2, 3, 15, 1),
            (2, 4, 4, 3),
            (3, 4, 20, 2),
            (4, 2, 5, 3),
        ],
        {0: 20, 3: -5, 4: -15},
        150,
        "https://developers.google.com/optimization/flow/mincostflow for the data; "
        + NETWORKX_TESTS
        + " test_google_or_tools_example for the optimum",
    ),
    "NetworkX, tests, with one more node": (
        [
            (0, 1, 15, 4),
            (0, 2, 8, 4),
            (1, 2, 20, 2),
            (1, 3, 4, 2),
            (1, 4, 10, 6),
            (2, 3, 15, 1),
            (2, 4, 4, 3),
            (3, 4, 20, 2),
            (4, 2, 5, 3),
            (3, 5, 10, 4),
        ],
        {0: 23, 3: -5, 4: -15, 5: -3},
        183,
        NETWORKX_TESTS + " test_google_or_tools_example2",
    ),
    "NetworkX, network_simplex": (
        [("a", "b", 4, 3), ("a", "c", 10, 6), ("b", "d", 9, 1), ("c", "d", 5, 2)],
        {"a": 5, "d": -5},
        24,
        "https://networkx.org/documentation/stable/reference/algorithms/generated/"
        "networkx.algorithms.flow.network_simplex.html",
    ),
    "NetworkX, tests, transshipment without capacities": (
        [
            ("a", "c", INF, 3),
            ("r", "a", INF, 2),
            ("b", "a", INF, 9),
            ("r", "c", INF, 0),
            ("b", "r", INF, -6),
            ("c", "d", INF, 5),
            ("e", "r", INF, 4),
            ("e", "f", INF, 3),
            ("h", "b", INF, 4),
            ("f", "d", INF, 7),
            ("f", "h", INF, 12),
            ("g", "d", INF, 12),
            ("f", "g", INF, -1),
            ("h", "g", INF, -10),
        ],
        {"a": -1, "b": 2, "c": 2, "d": -3, "e": 4, "f": 4, "g": -3, "h": -2, "r": -3},
        41,
        NETWORKX_TESTS + " test_transshipment",
    ),
    "Bradley, Hax, Magnanti": (
        [
            (1, 2, 15, 4),
            (1, 3, 8, 4),
            (2, 3, INF, 2),
            (2, 4, 4, 2),
            (2, 5, 10, 6),
            (3, 4, 15, 1),
            (3, 5, 5, 3),
            (4, 5, INF, 2),
            (5, 3, 4, 1),
        ],
        {1: 20, 4: -5, 5: -15},
        150,
        "Bradley, Hax, Magnanti (1977), Applied Mathematical Programming, as in "
        + NETWORKX_TESTS
        + " test_digraph1",
    ),
    "lp_solve, DIMACS minimum-cost flow": (
        [(1, 2, 4, 2), (1, 3, 2, 2), (2, 3, 2, 1), (2, 4, 3, 3), (3, 4, 5, 1)],
        {1: 4, 4: -4},
        14,
        "https://lpsolve.sourceforge.net/5.5/DIMACS_mcf.htm",
    ),
}

# Name: arcs (tail, head, capacity), source node, sink node, largest flow, source of the data.
LARGEST_FLOWS = {
    "SciPy, maximum_flow": (
        [
            (0, 1, 16),
            (0, 2, 13),
            (1, 2, 10),
            (1, 3, 12),
            (2, 1, 4),
            (2, 4, 14),
            (3, 2, 9),
            (3, 5, 20),
            (4, 3, 7),
            (4, 5, 4),
        ],
        0,
        5,
        23,
        "https://docs.scipy.org/doc/scipy/reference/generated/"
        "scipy.sparse.csgraph.maximum_flow.html",
    ),
    "OR-Tools, maximum flow": (
        [
            (0, 1, 20),
            (0, 2, 30),
            (0, 3, 10),
            (1, 2, 40),
            (1, 4, 30),
            (2, 3, 10),
            (2, 4, 20),
            (3, 2, 5),
            (3, 4, 20),
        ],
        0,
        4,
        60,
        "https://developers.google.com/optimization/flow/maxflow",
    ),
    "OR-Tools, csflow": (
        [
            (0, 1, 5),
            (0, 2, 8),
            (0, 3, 5),
            (0, 4, 3),
            (1, 3, 4),
            (2, 4, 5),
            (3, 4, 6),
            (3, 5, 6),
            (4, 5, 4),
        ],
        0,
        5,
        10,
        "https://github.com/google/or-tools examples/dotnet/csflow.cs, expectedTotalFlow",
    ),
}

# People needed in each hour of the day; shifts of eight hours begin at every hour and run on
# past midnight. Fewest shifts: 55.
# https://github.com/sevenxx07/LP-Scheduling-problem, README
CALL_CENTRE = [
    6,
    6,
    6,
    6,
    6,
    8,
    9,
    12,
    18,
    22,
    25,
    21,
    21,
    20,
    18,
    21,
    21,
    24,
    24,
    18,
    18,
    18,
    12,
    8,
]
CALL_CENTRE_SHIFTS = 55


def transport_form(cost, most: Sequence[float], least: Sequence[float]) -> LinearForm:
    """Ship from each row at most, into each column at least so much."""
    cost = np.asarray(cost, dtype=float)
    m, n = cost.shape
    return LinearForm.from_arrays(
        pairs(m, n),
        row_lower=[-INF] * m + list(least),
        row_upper=list(most) + [INF] * n,
        col_lower=0,
        col_upper=INF,
        cost=cost.ravel(),
    )


def flow_form(arcs: Sequence[tuple], supply: dict[Hashable, float]) -> LinearForm:
    nodes = sorted({end for tail, head, *_ in arcs for end in (tail, head)})
    matrix = np.zeros((len(nodes), len(arcs)))
    for j, (tail, head, *_) in enumerate(arcs):
        matrix[nodes.index(tail), j] += 1
        matrix[nodes.index(head), j] -= 1
    balance = [supply.get(node, 0) for node in nodes]
    return LinearForm.from_arrays(
        matrix,
        row_lower=balance,
        row_upper=balance,
        col_lower=0,
        col_upper=[arc[2] for arc in arcs],
        cost=[arc[3] for arc in arcs],
    )


def check(form: LinearForm, optimum: float) -> Verdict:
    """Solve, and demand the published optimum at a whole plan that keeps all rows."""
    solution = solve(form)
    assert solution.status == "optimal"
    assert solution.objective == pytest.approx(optimum, rel=1e-12)
    assert np.array_equal(solution.x, np.round(solution.x))
    activity = form.matrix @ solution.x
    assert (activity >= form.row_lower).all()
    assert (activity <= form.row_upper).all()
    assert (solution.x >= form.col_lower).all()
    assert (solution.x <= form.col_upper).all()
    assert solution.report.proof == "exact"
    return solution.report.finding.verdict


@pytest.mark.parametrize(("cost", "optimum", "_"), ASSIGNMENTS.values(), ids=ASSIGNMENTS)
def test_assignments(cost, optimum, _):
    cost = np.asarray(cost, dtype=float)
    if cost.shape[0] > cost.shape[1]:
        cost = cost.T  # now every row must be assigned
    m, n = cost.shape
    form = transport_form(cost.T, [1] * n, [1] * m)
    assert check(form, optimum) == Verdict.PROVEN


@pytest.mark.parametrize(
    ("cost", "supply", "demand", "optimum", "_"), TRANSPORTS.values(), ids=TRANSPORTS
)
def test_transports(cost, supply, demand, optimum, _):
    assert check(transport_form(cost, supply, demand), optimum) == Verdict.PROVEN


@pytest.mark.parametrize(("arcs", "supply", "optimum", "_"), FLOWS.values(), ids=FLOWS)
def test_flows(arcs, supply, optimum, _):
    assert check(flow_form(arcs, supply), optimum) == Verdict.PROVEN


@pytest.mark.parametrize(
    ("arcs", "source", "sink", "optimum", "_"), LARGEST_FLOWS.values(), ids=LARGEST_FLOWS
)
def test_largest_flows(arcs, source, sink, optimum, _):
    """An arc back from the sink closes the flow; it alone is worth something."""
    closed = [(*arc, 0) for arc in arcs] + [(sink, source, INF, 1)]
    assert check(flow_form(closed, {}).replace(sense="max"), optimum) == Verdict.PROVEN


def test_shifts_around_the_clock():
    hours = np.arange(24)
    covers = (hours[:, None] - hours[None, :]) % 24 < 8
    form = LinearForm.from_arrays(
        covers.astype(float),
        row_lower=CALL_CENTRE,
        row_upper=INF,
        col_lower=0,
        col_upper=INF,
        cost=1,
    )
    # Circular intervals need not have whole vertices only; this optimum is whole.
    check(form, CALL_CENTRE_SHIFTS)

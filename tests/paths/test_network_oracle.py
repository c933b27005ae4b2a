"""The network engine under the walks: the same optima, exact steps, exact prices."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pyomo_latpath.certificates import Network
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.certify import certify
from pyomo_latpath.paths import network_oracle, path_solver
from pyomo_latpath.paths.box import box_of
from pyomo_latpath.paths.cost_scaling import phase_bound, phase_costs, scaling_walk
from pyomo_latpath.paths.face_fixing import face_fixing_walk, rounding_size
from pyomo_latpath.paths.network_oracle import NetworkOracle, NetworkStructure
from pyomo_latpath.paths.path_solver import vertex_at_least_as_good, walk_to_optimum
from pyomo_latpath.paths.vertex_oracle import HighsBasis, Tableau
from pyomo_latpath.proof import (
    WholeCosts,
    prove_infeasible,
    prove_optimal,
    prove_unbounded,
    whole_costs,
)
from pyomo_latpath.routing import solve

FOREVER = Deadline(None)


def random_block(seed, kind, cost=None, feasible=True):
    """A connected certified block, its structure, and a whole plan in it."""
    rng = np.random.default_rng(seed)
    while True:
        m, n = int(rng.integers(2, 6)), int(rng.integers(3, 12))
        A = np.zeros((m, n))
        for j in range(n):
            if kind == "interval":
                a, b = np.sort(rng.integers(0, m + 1, 2))
                A[a:b, j] = rng.choice([-1, 1])
            else:
                ends = rng.choice(m + 1, 2, replace=False)
                for end, sign in zip(ends, (1, -1), strict=True):
                    if end < m:
                        A[end, j] = sign
        upper = rng.integers(1, 4, n)
        x = rng.integers(0, upper + 1)
        slack = rng.integers(0, 2, m)
        side = A @ x if feasible else rng.integers(-9, 10, m)
        form = LinearForm.from_arrays(
            A,
            row_lower=side - slack,
            row_upper=side + slack,
            col_lower=0,
            col_upper=upper,
            cost=rng.integers(-50, 50, n) if cost is None else cost(rng, n),
        )
        normal = normalise(form)
        blocks = blocks_of(normal)
        if normal.conflict or len(blocks) != 1 or blocks[0].trivial:
            continue
        found = certify(normal, blocks, FOREVER)[0]
        if found is not None and isinstance(found[1].part, Network):
            part = found[1].part
            return normal, NetworkStructure(part.tree, part.arcs), x[normal.columns].astype(float)


seeds, kinds = st.integers(0, 2**32 - 1), st.sampled_from(["interval", "incidence"])


@settings(max_examples=100)
@given(seeds, kinds)
def test_the_engines_agree_and_the_prices_prove_it(seed, kind):
    normal, structure, _ = random_block(seed, kind)
    costs = whole_costs(normal)
    ends = [
        oracle.optimise(costs.numerators, FOREVER)
        for oracle in (NetworkOracle(normal, structure, compiled=False), HighsBasis(normal))
    ]
    assert {end.status for end in ends} == {"optimal"}
    assert normal.cost @ ends[0].x == normal.cost @ ends[1].x
    assert prove_optimal(normal, costs, ends[0].x, ends[0].row_dual).exact


@settings(max_examples=60)
@given(seeds, kinds)
def test_basis_prices_are_exact_for_costs_of_any_size(seed, kind):
    normal, structure, _ = random_block(seed, kind)
    rng = np.random.default_rng(seed)
    huge = np.array([int(v) << 80 for v in rng.integers(-99, 99, normal.columns.size)], object)
    oracle = NetworkOracle(normal, structure, compiled=False)
    end = oracle.optimise(huge, FOREVER)
    prices = oracle.basis_prices(huge, np.zeros(normal.rows.size, object))
    reduced = huge - normal.matrix.T.toarray().astype(int).astype(object) @ prices
    basic = (end.x > normal.col_lower) & (end.x < normal.col_upper)
    assert not reduced[basic].any()
    activity = normal.matrix @ end.x
    assert not prices[(activity > normal.row_lower) & (activity < normal.row_upper)].any()


@settings(max_examples=60)
@given(seeds, kinds)
def test_scaling_walks_from_a_start_keep_their_bound(seed, kind):
    normal, structure, x = random_block(seed, kind)
    start = vertex_at_least_as_good(normal, x, FOREVER)
    costs = whole_costs(normal).numerators
    box = box_of(normal)
    oracle = NetworkOracle(normal, structure, start, compiled=False)
    end, phases = scaling_walk(oracle, costs, FOREVER)
    assert phases == len(phase_costs(costs))
    assert oracle.steps <= phase_bound(box.total, int(np.abs(costs).max()))
    tableau = Tableau(normal, *start)
    assert costs @ end.x == costs @ scaling_walk(tableau, costs, FOREVER)[0].x


@settings(max_examples=60)
@given(seeds, kinds)
def test_face_fixing_on_the_engine_settles_huge_costs(seed, kind):
    normal, structure, x = random_block(seed, kind)
    rng = np.random.default_rng(seed)
    costs = np.array(
        [int(v) << int(s) for v, s in rng.integers(0, 90, (normal.columns.size, 2))], object
    )
    box = box_of(normal)
    oracle = NetworkOracle(normal, structure, vertex_at_least_as_good(normal, x, FOREVER), False)

    def optimal(vertex):
        guess = vertex.row_dual
        return prove_optimal(
            normal, WholeCosts(costs, 1), vertex.x, guess, oracle.basis_prices
        ).exact

    walk = face_fixing_walk(
        normal,
        costs,
        box,
        oracle,
        optimal,
        largest=rounding_size(normal, box),
        stride=False,
        deadline=FOREVER,
    )
    assert walk.settled
    assert oracle.steps <= walk.step_bound


@settings(max_examples=60)
@given(seeds, kinds)
def test_infeasible_blocks_come_with_multipliers_that_prove_it(seed, kind):
    normal, structure, _ = random_block(seed, kind, feasible=False)
    oracle = NetworkOracle(normal, structure, compiled=False)
    end = oracle.optimise(whole_costs(normal).numerators, FOREVER)
    assert end.status == HighsBasis(normal).optimise(whole_costs(normal).numerators, FOREVER).status
    if end.status == "infeasible":
        assert prove_infeasible(normal, end.farkas)


def test_an_endless_improvement_comes_with_its_ray():
    form = LinearForm.from_arrays(
        [[1, -1]], row_lower=0, row_upper=0, col_lower=0, col_upper=np.inf, cost=[1, -2]
    )
    normal = normalise(form)
    structure = NetworkStructure(np.array([[1, 0]]), np.array([[1, 0], [0, 1]]))
    end = NetworkOracle(normal, structure, compiled=False).optimise(np.array([1, -2]), FOREVER)
    assert end.status == "unbounded"
    assert prove_unbounded(normal, whole_costs(normal), end.ray)


def test_blocks_are_glued_to_one_network(monkeypatch):
    monkeypatch.setattr(path_solver, "repays", lambda structure, walks: True)
    A = np.kron(np.eye(3), [[1, 1, 0, 0], [0, 0, 1, 1], [1, 0, 1, 0], [0, 1, 0, 1]])
    form = LinearForm.from_arrays(
        A, row_lower=1, row_upper=1, col_lower=0, col_upper=1, cost=[3, 1, 1, 3] * 3
    )
    solution = solve(form)
    assert solution.objective == 6.0
    assert solution.report.proof == "exact"
    assert solution.report.walk.engine == "network"


@pytest.mark.parametrize(
    ("size", "numba_loaded", "on_disk", "expected"),
    [
        (500, True, True, False),
        (5_000, True, True, True),
        (5_000, False, True, False),
        (50_000, False, True, True),
        (50_000, True, False, False),
        (200_000, False, False, True),
    ],
)
def test_the_engine_serves_where_it_repays(monkeypatch, size, numba_loaded, on_disk, expected):
    modules = {"numba": None} if numba_loaded else {}
    monkeypatch.setattr(network_oracle, "sys", type("Modules", (), {"modules": modules}))
    monkeypatch.setattr(network_oracle, "compiled_before", lambda: on_disk)
    structure = NetworkStructure(np.zeros((0, 2), np.int64), np.zeros((size, 2), np.int64))
    assert network_oracle.repays(structure) is expected


def test_the_compiled_engine_solves_an_assignment():
    size = 60
    cell = np.arange(size * size)
    rng = np.random.default_rng(0)
    A = np.zeros((2 * size, cell.size))
    A[cell // size, cell] = A[size + cell % size, cell] = 1
    normal = normalise(
        LinearForm.from_arrays(
            A, row_lower=1, row_upper=1, col_lower=0, col_upper=1, cost=rng.random(cell.size)
        )
    )
    part = certify(normal, blocks_of(normal), FOREVER)[0][1].part
    oracle = NetworkOracle(normal, NetworkStructure(part.tree, part.arcs))
    costs = whole_costs(normal)
    end = oracle.optimise(costs.numerators, FOREVER)
    reference = walk_to_optimum(normal, costs, FOREVER)
    assert np.isclose(normal.cost @ end.x, normal.cost @ reference.x, rtol=1e-9)

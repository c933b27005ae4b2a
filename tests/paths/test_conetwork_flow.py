"""The dual flow under conetwork blocks: the same optima as HiGHS, proven in whole numbers."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pyomo_latpath.certificates import Conetwork
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.certify import certify
from pyomo_latpath.paths import path_solver
from pyomo_latpath.paths.box import box_of
from pyomo_latpath.paths.conetwork_flow import ConetworkOracle, ConetworkStructure
from pyomo_latpath.paths.face_fixing import face_fixing_walk
from pyomo_latpath.paths.network_oracle import NetworkStructure
from pyomo_latpath.paths.path_solver import walk_to_optimum
from pyomo_latpath.paths.vertex_oracle import HighsBasis
from pyomo_latpath.proof import (
    WholeCosts,
    exact_objective,
    plan_holds,
    prove_infeasible,
    prove_optimal,
    prove_unbounded,
    whole_costs,
)
from pyomo_latpath.routing import solve

FOREVER = Deadline(None)
KINDS = ("difference", "tree path")


def random_block(seed, kind, *, feasible=True, bounded=True):
    """A block of paths in a random tree, a row each, with the network of its transpose."""
    rng = np.random.default_rng(seed)
    while True:
        m, n = int(rng.integers(3, 12)), int(rng.integers(2, 6))
        tree = np.array(
            [[rng.integers(0, v + 1) if kind == "tree path" else 0, v + 1] for v in range(n)]
        )
        turned = rng.random(n) < 0.5
        tree[turned] = tree[turned, ::-1]
        paths = np.zeros((n + 1, n), np.int64)
        for j in range(n):
            # Every node's path from the root; parents come before children.
            child = tree[j].max()
            paths[child] = paths[tree[j].min()]
            paths[child, j] = 1 if tree[j, 1] == child else -1
        arcs = rng.integers(0, n + 1, (m, 2))
        A = paths[arcs[:, 1]] - paths[arcs[:, 0]]
        x = rng.integers(-3, 4, n)
        side = A @ x if feasible else rng.integers(-9, 10, m)
        ends = {
            "row_lower": side - rng.integers(0, 3, m).astype(float),
            "row_upper": side + rng.integers(0, 3, m).astype(float),
            "col_lower": x - rng.integers(0, 4, n).astype(float),
            "col_upper": x + rng.integers(0, 4, n).astype(float),
        }
        for name, values in ends.items():
            if not bounded or name.startswith("row"):
                values[rng.random(values.size) < 0.6] = -np.inf if "lower" in name else np.inf
        normal = normalise(LinearForm.from_arrays(A, cost=rng.integers(-50, 50, n), **ends))
        blocks = blocks_of(normal)
        if normal.conflict or len(blocks) != 1 or blocks[0].trivial or normal.columns.size != n:
            continue
        # The scaling leaves entries of 1 and -1 as they are, or turns whole rows and columns.
        if (normal.row_num == 1).all() and (normal.col_num == 1).all():
            return normal, ConetworkStructure(NetworkStructure(tree, arcs[normal.rows]))


def agree(normal, structure):
    """Let both engines solve a block; check all that is claimed and return the status."""
    costs = whole_costs(normal)
    end = ConetworkOracle(normal, structure, compiled=False).optimise(costs.numerators, FOREVER)
    other = HighsBasis(normal).optimise(costs.numerators, FOREVER)
    assert end.status == other.status
    if end.status == "optimal":
        assert exact_objective(costs, end.x) == exact_objective(costs, other.x)
        assert prove_optimal(normal, costs, end.x, end.row_dual).exact
        np.testing.assert_array_equal(
            end.reduced_cost, normal.cost - normal.matrix.T @ end.row_dual
        )
        assert is_vertex(normal, end.x)
    elif end.status == "infeasible":
        assert prove_infeasible(normal, end.farkas)
    else:
        assert prove_unbounded(normal, costs, end.ray)
    return end.status


def is_vertex(normal, x):
    """Whether the limits that are tight at x leave no line to move on, but those none stops."""
    A = normal.matrix.toarray()
    every = np.vstack([np.eye(x.size), A])
    low = np.concatenate([normal.col_lower, normal.row_lower])
    high = np.concatenate([normal.col_upper, normal.row_upper])
    value = every @ x
    tight = (value == low) | (value == high)
    limited = np.isfinite(low) | np.isfinite(high)
    rank = np.linalg.matrix_rank
    return rank(every[tight]) == rank(every[limited]) if tight.any() else not limited.any()


seeds, kinds = st.integers(0, 2**32 - 1), st.sampled_from(KINDS)


@settings(max_examples=150)
@given(seeds, kinds)
def test_bounded_blocks_have_the_optimum_that_highs_finds(seed, kind):
    assert agree(*random_block(seed, kind)) == "optimal"


@settings(max_examples=150)
@given(seeds, kinds, st.booleans())
def test_blocks_of_any_status_are_settled_with_a_proof(seed, kind, feasible):
    agree(*random_block(seed, kind, feasible=feasible, bounded=False))


def test_every_status_is_met():
    met = {
        agree(*random_block(seed, kind, feasible=feasible, bounded=False))
        for seed in range(30)
        for kind in KINDS
        for feasible in (False, True)
    }
    assert met == {"optimal", "infeasible", "unbounded"}


def test_a_block_without_plan_or_prices_is_infeasible():
    """x1 - x0 >= 1 and <= 0 (by a second row), while x2 - x1 may grow for ever."""
    normal = normalise(
        LinearForm.from_arrays(
            [[-1, 1, 0], [-1, 1, 0], [0, -1, 1]],
            row_lower=[1, -np.inf, 0],
            row_upper=[np.inf, 0, np.inf],
            col_lower=-np.inf,
            col_upper=np.inf,
            cost=[0, 0, -1],
        )
    )
    star = NetworkStructure(np.array([[0, 1], [0, 2], [0, 3]]), np.array([[1, 2], [1, 2], [2, 3]]))
    assert agree(normal, ConetworkStructure(star)) == "infeasible"


@settings(max_examples=60)
@given(seeds, kinds)
def test_basis_prices_prove_optima_for_costs_of_any_size(seed, kind):
    normal, structure = random_block(seed, kind)
    rng = np.random.default_rng(seed)
    powers = rng.integers(0, 300, (normal.columns.size, 2)).tolist()
    huge = np.array([(v - 150) << s for v, s in powers], object)
    oracle = ConetworkOracle(normal, structure, compiled=False)
    end = oracle.optimise(huge, FOREVER)
    prices = oracle.basis_prices(huge, np.zeros(normal.rows.size, object))
    reduced = huge - normal.matrix.T.toarray().astype(int).astype(object) @ prices
    for price, value, low, high in (
        (prices, normal.matrix @ end.x, normal.row_lower, normal.row_upper),
        (reduced, end.x, normal.col_lower, normal.col_upper),
    ):
        assert (value[price > 0] == low[price > 0]).all()
        assert (value[price < 0] == high[price < 0]).all()


@settings(max_examples=60)
@given(seeds, kinds)
def test_face_fixing_settles_costs_that_must_be_rounded(seed, kind):
    normal, structure = random_block(seed, kind)
    rng = np.random.default_rng(seed)
    powers = rng.integers(0, 90, (normal.columns.size, 2))
    costs = np.array([int(v) << int(s) for v, s in powers], object)
    oracle = ConetworkOracle(normal, structure, compiled=False)

    def optimal(vertex):
        exact = WholeCosts(costs, 1)
        return prove_optimal(normal, exact, vertex.x, vertex.row_dual, oracle.basis_prices).exact

    walk = face_fixing_walk(
        normal,
        costs,
        box_of(normal),
        oracle,
        optimal,
        largest=5_000,
        stride=True,
        deadline=FOREVER,
    )
    assert walk.settled


@settings(max_examples=60)
@given(seeds, kinds)
def test_held_rows_and_columns_stay(seed, kind):
    normal, structure = random_block(seed, kind)
    rng = np.random.default_rng(seed)
    costs = whole_costs(normal)
    oracle = ConetworkOracle(normal, structure, compiled=False)
    before = oracle.optimise(-costs.numerators, FOREVER).x
    rows, columns = rng.random(normal.rows.size) < 0.3, rng.random(normal.columns.size) < 0.3
    oracle.hold(rows, columns)
    held = oracle.optimise(costs.numerators, FOREVER).x
    np.testing.assert_array_equal(held[columns], before[columns])
    np.testing.assert_array_equal((normal.matrix @ held)[rows], (normal.matrix @ before)[rows])
    assert plan_holds(normal, held)
    oracle.release()
    end = oracle.optimise(costs.numerators, FOREVER)
    assert prove_optimal(normal, costs, end.x, end.row_dual).exact


def test_limits_that_are_too_far_do_not_fit():
    star = ConetworkStructure(NetworkStructure(np.array([[0, 1], [0, 2]]), np.array([[1, 2]])))

    def normal(side):
        return normalise(
            LinearForm.from_arrays(
                [[-1, 1]], row_lower=-np.inf, row_upper=side, col_lower=0, col_upper=9, cost=1
            )
        )

    assert star.fits(normal(2.0**40))
    assert not star.fits(normal(2.0**59))


def schedule(size, seed=0):
    """Gaps between starts, as a model."""
    rng = np.random.default_rng(seed)
    pairs = np.sort(rng.integers(0, size, (4 * size, 2)), axis=1)
    pairs = pairs[pairs[:, 0] < pairs[:, 1]]
    A = np.zeros((pairs.shape[0], size))
    A[np.arange(pairs.shape[0]), pairs[:, 0]] = -1
    A[np.arange(pairs.shape[0]), pairs[:, 1]] = 1
    return LinearForm.from_arrays(
        A,
        row_lower=rng.integers(1, 9, pairs.shape[0]),
        row_upper=np.inf,
        col_lower=0,
        col_upper=20 * size,
        cost=rng.integers(-9, 20, size),
        integer=True,
    )


def test_the_compiled_engine_schedules():
    normal = normalise(schedule(120))
    found = certify(normal, blocks_of(normal), FOREVER)[0]
    assert isinstance(found[1].part, Conetwork)
    part = found[1].part
    structure = ConetworkStructure(NetworkStructure(part.tree, part.arcs))
    costs = whole_costs(normal)
    end = ConetworkOracle(normal, structure).optimise(costs.numerators, FOREVER)
    reference = walk_to_optimum(normal, costs, FOREVER)
    assert exact_objective(costs, end.x) == exact_objective(costs, reference.x)


@pytest.mark.parametrize("repays", [False, True])
def test_models_are_solved_by_the_engine_that_repays(monkeypatch, repays):
    monkeypatch.setattr(path_solver, "repays", lambda structure, walks: repays)
    solution = solve(schedule(40))
    assert solution.report.proof == "exact"
    assert solution.report.walk.engine == ("conetwork" if repays else "highs")
    monkeypatch.undo()
    assert solution.objective == solve(schedule(40)).objective


def test_blocks_are_glued_to_one_network(monkeypatch):
    monkeypatch.setattr(path_solver, "repays", lambda structure, walks: True)
    rng = np.random.default_rng(3)
    # Stretches of days in each of four caves.
    days = np.array([[1, 1, 1, 0, 0], [0, 1, 1, 1, 0], [0, 0, 1, 1, 1], [1, 1, 1, 1, 1]])
    A = np.kron(np.eye(4), days)
    plan = rng.integers(0, 5, A.shape[1])
    model = LinearForm.from_arrays(
        A,
        row_lower=A @ plan - 1,
        row_upper=A @ plan + 1,
        col_lower=0,
        col_upper=9,
        cost=rng.integers(-9, 9, A.shape[1]),
    )
    normal = normalise(model)
    found = certify(normal, blocks_of(normal), FOREVER)
    assert [type(proof[1].part) for proof in found] == [Conetwork] * 4
    solution = solve(model)
    reference = HighsBasis(normal).optimise(whole_costs(normal).numerators, FOREVER)
    assert solution.report.proof == "exact"
    assert solution.objective == normal.cost @ reference.x
    assert solution.report.walk.engine == "conetwork"

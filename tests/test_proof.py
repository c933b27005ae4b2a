"""The exact check says yes to what is true and no to what is not."""

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from small_forms import TRIANGLE

from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.highs import LinearProgram
from pyomo_latpath.proof import (
    exact_objective,
    plan_holds,
    prove_infeasible,
    prove_optimal,
    prove_unbounded,
    whole_costs,
)

INF = np.inf


def make(A, row_lower, row_upper, col_lower, col_upper, cost, **more):
    return normalise(
        LinearForm.from_arrays(
            A,
            row_lower=row_lower,
            row_upper=row_upper,
            col_lower=col_lower,
            col_upper=col_upper,
            cost=cost,
            **more,
        )
    )


def relaxation(normal):
    return LinearProgram(
        normal.matrix,
        normal.row_lower,
        normal.row_upper,
        normal.col_lower,
        normal.col_upper,
        normal.cost,
    ).solve()


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_only_optimal_plans_are_proven_optimal(seed):
    rng = np.random.default_rng(seed)
    n = 4
    normal = make(
        rng.integers(-1, 2, (2, n)), -2, 3, 0, 2, rng.integers(-9, 9, n) / 4, integer=True
    )
    if normal.conflict or not normal.rows.size:
        return
    result = relaxation(normal)
    if result.status != "optimal":
        return
    costs = whole_costs(normal)
    plans = [
        np.array(plan, dtype=float)
        for plan in itertools.product(range(3), repeat=normal.columns.size)
        if plan_holds(normal, np.array(plan, dtype=float))
    ]
    best = min(exact_objective(costs, plan) for plan in plans)
    for plan in plans:
        proof = prove_optimal(normal, costs, plan, result.row_dual)
        if proof.exact:
            assert exact_objective(costs, plan) == best
        elif exact_objective(costs, plan) == best:
            # Only a gap between the relaxation and the whole optimum may hide an optimum.
            assert float(best) > result.objective + 1e-9


def test_a_gap_below_the_unit_of_the_costs_is_no_gap():
    normal = make(TRIANGLE, 1, INF, 0, 1, 3)
    result = relaxation(normal)
    assert result.objective == pytest.approx(4.5)
    costs = whole_costs(normal)
    assert prove_optimal(normal, costs, np.array([1.0, 1, 0]), result.row_dual).exact
    assert not prove_optimal(normal, costs, np.array([1.0, 1, 1]), result.row_dual).exact


def test_a_plan_that_misses_a_row_by_a_little_does_not_hold():
    normal = make([[1, 1]], 1, 1, 0, 1, 0, integer=[True, False])
    assert plan_holds(normal, np.array([1.0, 0.0]))
    assert not plan_holds(normal, np.array([1.0, 1e-6]))
    assert not plan_holds(normal, np.array([0.5, 0.5]))


def test_prices_are_exact_even_where_floats_are_not():
    tiny = 2.0**-38
    normal = make([[1, 1]], 1, 1, 0, 1, [1 + tiny, 1])
    costs = whole_costs(normal)
    right, wrong = np.array([0.0, 1.0]), np.array([1.0, 0.0])
    assert prove_optimal(normal, costs, right, np.array([1.0])).exact
    assert not prove_optimal(normal, costs, wrong, np.array([1.0])).exact


def test_multipliers_prove_infeasibility_only_where_it_holds():
    infeasible = make([[1, 1], [1, 1]], [3, -INF], [INF, 1], 0, 5, 0)
    assert prove_infeasible(infeasible, np.array([1.0, -1.0]))
    assert prove_infeasible(infeasible, np.array([-0.3333333, 0.3333333]))
    assert not prove_infeasible(infeasible, np.array([1.0, 0.0]))
    assert not prove_infeasible(infeasible, None)
    feasible = make([[1, 1], [1, 1]], [1, -INF], [INF, 1], 0, 5, 0)
    assert not prove_infeasible(feasible, np.array([1.0, -1.0]))


def test_a_ray_proves_unboundedness_only_where_it_improves_for_ever():
    normal = make([[1, -1]], 0, 0, 0, INF, [1, -2])
    costs = whole_costs(normal)
    assert prove_unbounded(normal, costs, np.array([0.5, 0.5]))
    assert not prove_unbounded(normal, costs, np.array([1.0, 0.0]))
    assert not prove_unbounded(normal, costs, np.array([-1.0, -1.0]))
    boxed = make([[1, -1]], 0, 0, 0, [INF, 7], [1, -2])
    assert not prove_unbounded(boxed, whole_costs(boxed), np.array([1.0, 1.0]))


def test_sums_beyond_64_bits_do_not_wrap():
    big = 2.0**52
    normal = make([[1, 1, 1]], 0, 3, 0, 1, [-big * 2**30, -big * 2**30, big * 2**30])
    costs = whole_costs(normal)
    plan = np.array([1.0, 1.0, 0.0])
    assert exact_objective(costs, plan) == -(2 ** (52 + 31))
    assert prove_optimal(normal, costs, plan, np.array([0.0])).exact

"""Which route a model takes, how its parts are merged, and what is said about it."""

import itertools
import time

import numpy as np
import pytest
import scipy.sparse as sp
from hypothesis import given, settings
from hypothesis import strategies as st
from small_forms import TRIANGLE

from pyomo_latpath import routing
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.highs import OptionError
from pyomo_latpath.routing import solve

INF = np.inf


def form_of(A, row_lower, row_upper, cost, col_lower=0, col_upper=1, **more):
    return LinearForm.from_arrays(
        A,
        row_lower=row_lower,
        row_upper=row_upper,
        col_lower=col_lower,
        col_upper=col_upper,
        cost=cost,
        **more,
    )


def side_by_side(*forms):
    """One form with the given ones as blocks."""

    def joined(name):
        return np.concatenate([getattr(form, name) for form in forms])

    return LinearForm.from_arrays(
        sp.block_diag([form.matrix for form in forms]),
        row_lower=joined("row_lower"),
        row_upper=joined("row_upper"),
        col_lower=joined("col_lower"),
        col_upper=joined("col_upper"),
        cost=joined("cost"),
        integer=joined("integer"),
        semicontinuous=joined("semicontinuous"),
        sense=forms[0].sense,
    )


assignment = form_of([[1, 1, 0, 0], [0, 0, 1, 1], [1, 0, 1, 0], [0, 1, 0, 1]], 1, 1, [3, 1, 1, 3])
triangle = form_of(TRIANGLE, -INF, 1, [-1, -1, -1])
infeasible = form_of([[1, 1], [1, 1]], [2, 0], [2, 1], [0, 0])
endless = form_of([[1, -1]], 0, 0, [-1, 0], col_upper=INF)


def test_a_certified_model_takes_the_path_with_exact_prices():
    solution = solve(assignment)
    assert (solution.status, solution.report.route) == ("optimal", "path")
    assert solution.x.tolist() == [0, 1, 1, 0]
    assert (solution.objective, solution.bound) == (2.0, 2.0)
    assert solution.report.proof == "exact"
    assert solution.report.prices == "true"
    dual_value = solution.row_dual.sum() + np.minimum(solution.reduced_cost, 0).sum()
    assert dual_value == solution.objective
    assert solution.report.walk.steps <= solution.report.walk.step_bound


def test_a_fractional_optimum_goes_to_branch_and_bound():
    solution = solve(triangle)
    assert (solution.status, solution.report.route) == ("optimal", "highs")
    assert solution.objective == -1.0
    assert solution.report.finding.verdict == "refuted"
    witness = solution.report.finding.blocks[0].witness
    assert [str(v) for v in witness.values] == ["1/2"] * 3
    assert np.isnan(solution.row_dual).all()
    assert solution.report.prices == "none"


def test_another_objective_of_the_same_model_takes_the_path():
    solution = solve(triangle.replace(cost=[-3, -1, -1]))
    assert (solution.status, solution.report.route) == ("optimal", "path")
    assert solution.objective == -3.0
    assert solution.report.finding.verdict != "proven"
    assert "at this objective" in solution.report.why


def test_blocks_each_way_make_a_split():
    solution = solve(side_by_side(assignment, triangle))
    assert (solution.status, solution.report.route) == ("optimal", "split")
    assert solution.objective == 1.0
    assert not np.isnan(solution.row_dual[:4]).any()
    assert np.isnan(solution.row_dual[4:]).all()
    assert solution.report.prices == "in part"


def test_loose_columns_do_not_make_a_split():
    loose = form_of([[2]], 1, INF, [1], col_upper=9)
    solution = solve(side_by_side(triangle, loose))
    assert (solution.report.route, solution.objective) == ("highs", 0.0)
    assert solution.x[3] == 1.0


@pytest.mark.parametrize("other", [assignment, triangle, endless])
def test_infeasible_beats_everything(other):
    for form in (side_by_side(infeasible, other), side_by_side(other, infeasible)):
        solution = solve(form)
        assert solution.status == "infeasible"
        assert solution.x is None
        assert np.isnan(solution.objective)
        assert len(solution.report.blame) == 2


def test_unbounded_beats_optimal_and_comes_with_a_ray():
    solution = solve(side_by_side(triangle, endless))
    assert solution.status == "unbounded"
    assert solution.ray[:3].tolist() == [0, 0, 0]
    assert solution.ray[3] == solution.ray[4] > 0
    solution = solve(endless)
    assert solution.report.proof == "exact"


def test_farkas_multipliers_prove_infeasibility():
    solution = solve(infeasible)
    y = solution.farkas
    y = y if y[0] > 0 else -y
    assert y[0] * 2 + y[1] * 1 > max(0, 2 * (y @ [1, 1]))


def test_the_shortfall_is_told_in_names():
    form = form_of([[1, 1, 0], [0, 1, 1]], [3, 0], INF, [0, 0, 0], row_names=["market", "inn"])
    solution = solve(form)
    assert solution.status == "infeasible"
    assert "market ask for 1 more than can be had" in solution.report.why
    assert solution.report.proof == "exact"


def test_rounding_alone_can_show_that_there_is_no_plan():
    solution = solve(form_of([[2, 2]], 1, 1, [0, 0]))
    assert solution.status == "infeasible"
    assert solution.report.proof == "exact"
    assert solution.report.blame == ("r1",)


def test_maximisation_offset_and_fixed_columns_come_back_in_the_models_own_terms():
    form = form_of(
        [[1, 1, 1]], -INF, 4, [2, 1, 5], col_lower=[0, 0, 2], col_upper=[3, 3, 2], offset=7
    ).replace(sense="max")
    solution = solve(form)
    assert solution.objective == 7 + 10 + 4
    assert solution.x.tolist() == [2, 0, 2]
    assert solution.row_dual.tolist() == [2]
    assert solution.reduced_cost.tolist() == [0, -1, 3]


def test_semicontinuous_columns_go_to_highs_as_they_are():
    form = form_of(
        [[1, 1]],
        3,
        INF,
        [1, 3],
        col_lower=[4, 0],
        col_upper=9,
        integer=False,
        semicontinuous=[True, False],
    )
    solution = solve(form)
    assert (solution.status, solution.report.route) == ("optimal", "highs")
    assert solution.x.tolist() == [4, 0]
    assert solution.report.largest_violation == 0.0


def test_models_without_rows_or_columns():
    assert solve(form_of(np.zeros((0, 2)), [], [], [1, -1])).x.tolist() == [0, 1]
    empty = form_of(np.zeros((0, 0)), [], [], [], col_lower=[], col_upper=[], offset=3)
    assert (solve(empty).status, solve(empty).objective) == ("optimal", 3.0)


def test_prices_of_the_fixed_plan_come_on_request():
    form = form_of(
        np.hstack([TRIANGLE, [[1], [0], [0]]]),
        -INF,
        [1.5, 1, 1],
        [-2, -2, -2, -1],
        integer=[True, True, True, False],
    )
    assert solve(form).report.prices == "none"
    solution = solve(form, fixed_plan_prices=True)
    assert solution.report.route == "highs"
    assert solution.report.prices == "fixed plan"
    assert not np.isnan(solution.row_dual).any()


def knapsacks():
    rng = np.random.default_rng(0)
    A, worth = rng.integers(1, 100, (40, 60)), rng.integers(50, 99, 60)
    return form_of(A, -INF, 1000, -worth)


@pytest.mark.parametrize("limit", [0.0, 1.0])
def test_a_time_limit_holds_for_all_stages_together(limit):
    begun = time.perf_counter()
    solution = solve(knapsacks(), time_limit=limit)
    assert time.perf_counter() - begun < limit + 20
    assert solution.status == "time_limit"
    if solution.x is not None:
        assert solution.bound <= solution.objective
        assert solution.report.largest_violation <= 1e-6


def test_one_hard_block_leaves_time_for_the_others():
    hard, rng = knapsacks(), np.random.default_rng(1)
    A, worth = rng.integers(1, 100, (40, 60)), rng.integers(50, 99, 60)
    both = form_of(sp.block_diag([hard.matrix, A], format="csc"), -INF, 1000, [*hard.cost, *-worth])
    solution = solve(both, time_limit=4.0)
    assert solution.status == "time_limit"
    assert solution.x is not None
    assert solution.x[:60].any()
    assert solution.x[60:].any()


def test_limits_among_highs_options_are_told_apart_from_optima():
    solution = solve(knapsacks(), highs_options={"mip_max_nodes": 1})
    assert solution.status == "limit"
    assert solution.bound < solution.objective


def test_a_gap_lets_branch_and_bound_stop_early():
    solution = solve(knapsacks(), rel_gap=0.5)
    assert solution.status == "optimal"
    assert solution.objective - solution.bound <= 0.5 * abs(solution.objective)


@pytest.mark.parametrize(
    ("options", "error", "message"),
    [
        ({"highs_options": {"no_such": 1}}, OptionError, "no option 'no_such'"),
        ({"time_limit": -1}, ValueError, "time_limit is -1"),
        ({"time_limit": float("nan")}, ValueError, "time_limit is nan"),
        ({"samples": -1}, ValueError, "samples is -1"),
        ({"start": [1, 1]}, ValueError, "shape"),
        ({"start": [1, 0, 0, 0.5]}, ValueError, "column 'x4'"),
        ({"start": [1, 0, 1, 0]}, ValueError, "row 'r3' is at 2"),
        ({"start": [2, -1, 0, 1]}, ValueError, "column 'x1' is at 2"),
    ],
)
def test_bad_requests_are_named_whatever_the_route(options, error, message):
    with pytest.raises(error, match=message):
        solve(assignment, **options)


def test_a_start_is_walked_from():
    solution = solve(assignment, start=[1, 0, 0, 1])
    assert solution.objective == 2.0
    assert 0 < solution.report.walk.steps <= solution.report.walk.step_bound
    assert solution.report.walk.exact_steps
    assert solution.report.walk.engine == "tableau"


def test_samples_decide_between_sampled_and_undecided():
    form = triangle.replace(cost=[-3, -1, -1])
    assert solve(form, samples=1).report.finding.verdict == "sampled"
    assert solve(form, samples=32).report.finding.verdict == "refuted"


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_merged_blocks_are_the_sum_of_their_answers(seed):
    rng = np.random.default_rng(seed)
    forms = [
        form_of(rng.integers(-1, 2, (2, 3)), -1, 2, rng.integers(-5, 6, 3), col_upper=2)
        for _ in range(3)
    ]
    apart = [solve(form) for form in forms]
    together = solve(side_by_side(*forms))
    assert together.status == "optimal"
    assert together.objective == sum(solution.objective for solution in apart)
    assert together.bound <= together.objective + 1e-9


def test_the_report_is_plain_data():
    import json

    report = solve(side_by_side(assignment, triangle)).report.to_dict()
    assert json.loads(json.dumps(report)) == report
    assert set(report["seconds"]) == {"compile", "assess", "solve", "proof"}


@pytest.mark.parametrize("size", [1e9, 1e10, 1e12])
def test_a_small_part_of_a_large_budget_counts(size):
    form = form_of([[size, 3]], -INF, size, [-1, -1])
    solution = solve(form)
    assert (solution.status, solution.objective) == ("optimal", -1)
    assert solution.report.largest_violation == 0.0
    with pytest.raises(ValueError, match="row 'r1' is at"):
        solve(form, start=[1, 1])


def test_large_budgets_against_every_choice():
    rng = np.random.default_rng(0)
    choices = np.array(list(itertools.product([0, 1], repeat=5)))
    for _ in range(60):
        first = float(rng.integers(10 ** int(rng.integers(8, 13))))
        weight = np.append(first, rng.integers(1, 100, 4))
        worth = np.append(rng.integers(100, 999), rng.integers(1, 12, 4))
        budget = first + rng.integers(0, 200)
        best = max(worth @ x for x in choices if weight @ x <= budget)
        assert solve(form_of(weight[None], -INF, budget, -worth), rel_gap=0).objective == -best


def test_a_plan_that_misses_a_row_is_not_told_without_a_warning(monkeypatch):
    monkeypatch.setattr(routing, "largest_violation", lambda form, x: 3.0)
    report = solve(knapsacks(), highs_options={"mip_max_nodes": 1}).report
    assert report.why.endswith("beware: the plan misses a row, bound or declaration by 3")


def test_coefficients_too_large_for_highs_are_told():
    with pytest.raises(ValueError, match=r"a row has the coefficient 2e\+15, and HiGHS takes none"):
        solve(form_of([[2e15, 3.0]], -INF, 2e15, [-1, -1]))

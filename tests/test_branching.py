"""Branch and bound with the declarations that are needed, and no others."""

from __future__ import annotations

import math

import numpy as np
import pytest
from mixed_models import FAMILIES

from pyomo_latpath import branching, routing
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.highs_mip import MipSettings, branch_and_bound
from pyomo_latpath.integrality.implied import mostly_implied
from pyomo_latpath.routing import solve

INF = math.inf


def highs_optimum(form):
    """Status and objective with all declarations, gap 0."""
    kinds = form.integer.astype(np.int32)
    sign = 1.0 if form.sense == "min" else -1.0
    data = (form.matrix, form.row_lower, form.row_upper, form.col_lower, form.col_upper)
    settings = MipSettings(rel_gap=0.0, abs_gap=0.0)
    result = branch_and_bound(*data, sign * form.cost, kinds, settings, Deadline(None))
    value = None if result.x is None else float(form.cost @ result.x) + form.offset
    return result.status, value


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("seed", range(4))
def test_fewer_declarations_have_the_same_optimum(family, seed):
    form = FAMILIES[family](np.random.default_rng(seed), 1)
    solution = solve(form, rel_gap=0.0)
    status, value = highs_optimum(form)
    assert solution.status == status
    assert solution.report.declared == form.shape[1]
    if status == "optimal":
        assert solution.objective == pytest.approx(value, abs=1e-6)
        assert solution.x.tolist() == np.rint(solution.x).tolist()
        assert solution.report.largest_violation <= 1e-9


def opened_vans(**data):
    """x1 + x2 + x3 = 7 cheeses (sides of halves round to it), at most 4 z_i in van i."""
    rows = [[1, 1, 1, 0, 0, 0], *np.hstack([np.eye(3), -4 * np.eye(3)]).tolist()]
    return LinearForm.from_arrays(
        rows,
        row_lower=[6.5, -INF, -INF, -INF],
        row_upper=[7.4, 0, 0, 0],
        col_lower=0,
        col_upper=[3.5, 9, 9, 1, 1, 1],
        **({"cost": [1, 2, 3, 5, 5, 4]} | data),
    )


def test_the_report_counts_what_branch_and_bound_was_told():
    solution = solve(opened_vans(), rel_gap=0.0)
    assert solution.report.route == "highs"
    assert (solution.report.declared, solution.report.needed) == (6, 3)
    assert "with 3 of 6 integer declarations" in solution.report.why
    assert solution.report.to_dict()["needed"] == 3


def test_sides_and_bounds_are_rounded_where_declarations_are_left_out():
    solution = solve(opened_vans(), rel_gap=0.0)
    assert solution.x.tolist() == np.rint(solution.x).tolist()
    assert solution.objective == highs_optimum(opened_vans())[1]


def test_the_sense_is_kept():
    form = opened_vans(cost=[-1, -2, -3, -5, -5, -4], sense="max", offset=100)
    solution = solve(form, rel_gap=0.0)
    assert solution.objective == highs_optimum(form)[1]
    assert solution.bound == pytest.approx(solution.objective)


def test_prices_of_the_fixed_plan_hold_all_declared_columns():
    solution = solve(opened_vans(), fixed_plan_prices=True)
    assert solution.report.prices == "fixed plan"
    worth = solution.reduced_cost + opened_vans().matrix.T @ solution.row_dual
    assert worth == pytest.approx(opened_vans().cost)


def test_a_start_is_taken():
    best = solve(opened_vans(), rel_gap=0.0)
    again = solve(opened_vans(), rel_gap=0.0, start=best.x)
    assert again.objective == best.objective


def test_declarations_come_back_where_tolerances_are_in_the_way(monkeypatch):
    form = opened_vans()
    normal = normalise(form)
    implied = mostly_implied(normal, Deadline(None))
    calls = []

    def never_whole(x, asked):
        calls.append(asked.sum())
        return False

    monkeypatch.setattr(branching, "is_whole", never_whole)
    answer = branching.branch_part(
        normal, (), MipSettings(rel_gap=0.0), Deadline(None), implied=implied
    )
    assert calls == [3]
    assert answer.told == 6
    assert float(normal.cost @ answer.x) == pytest.approx(highs_optimum(form)[1])


def test_few_implied_columns_change_nothing(monkeypatch):
    monkeypatch.setattr(routing, "mostly_implied", lambda part, deadline: None)
    solution = solve(opened_vans(), rel_gap=0.0)
    assert (solution.report.declared, solution.report.needed) == (6, 6)
    assert "declarations" not in solution.report.why

"""Infeasible and unbounded models: what conflicts, none of it needlessly."""

import itertools

import numpy as np
import pyomo.environ as pyo
import pytest
from exact_milp import solve_exactly
from grouped_models import grouped_form
from hypothesis import given, settings
from hypothesis import strategies as st
from small_forms import triangle

import pyomo_latpath as latpath
from pyomo_latpath.explain.explain import explain
from pyomo_latpath.explain.remains import Remains
from pyomo_latpath.forms.linear_form import LinearForm


def is_infeasible(form, groups):
    kept = np.zeros(form.shape[0], np.bool_)
    kept[[i for group in groups for i in group.rows.tolist()]] = True
    return solve_exactly(Remains(form).without(kept))[0] == "infeasible"


def infeasible_form(seed):
    """A grouped form with one group more, which asks for more than there is."""
    rng = np.random.default_rng(seed)
    form = grouped_form(rng)
    wish = rng.integers(0, 2, form.shape[1])
    return LinearForm.from_arrays(
        np.vstack((form.matrix.toarray(), wish)),
        row_lower=[*form.row_lower, max(1, int(wish.sum()))],
        row_upper=[*form.row_upper, np.inf],
        col_lower=0,
        col_upper=1,
        cost=form.cost,
        row_names=[*form.row_names, "wish"],
    )


@settings(max_examples=40)
@given(st.integers(0, 2**32))
def test_the_groups_told_conflict_and_each_is_needed(seed):
    form = infeasible_form(seed)
    told = explain(form)
    if solve_exactly(form)[0] != "infeasible":
        assert told.no_optimum is None
        return
    assert told.no_optimum.kind == "infeasible" and told.no_optimum.groups_minimal
    by_name = {group.name: group for group in told.groups}
    conflicting = [by_name[name] for name in told.no_optimum.groups]
    assert is_infeasible(form, conflicting)
    for fewer in itertools.combinations(conflicting, len(conflicting) - 1):
        assert not is_infeasible(form, fewer)


def test_rows_and_groups_are_named_where_the_relaxation_is_infeasible():
    form = LinearForm.from_arrays(
        [[1, 1], [1, 0], [0, 1], [1, -1]],
        row_lower=[5, -9, -9, -9],
        row_upper=[9, 2, 2, 9],
        col_lower=0,
        col_upper=9,
        cost=1,
        row_names=["asked", "cave[1]", "cave[2]", "rest"],
    )
    told = explain(form).no_optimum
    assert set(told.names) == {"asked", "cave[1]", "cave[2]"} and told.minimal
    assert set(told.groups) == {"asked", "cave"} and told.groups_minimal


def test_whole_plans_alone_may_conflict():
    form = triangle(row_lower=1, cost=1, row_names=["pair[1]", "pair[2]", "end"])
    told = explain(form)
    assert told.no_optimum.kind == "infeasible"
    assert set(told.no_optimum.groups) == {"pair", "end"}
    assert told.gap.declared_bound == 1.5 and told.gap.plan_status == "infeasible"
    assert told.reasons[0].kind == "parity"
    assert told.remedies == ()


def test_a_row_that_rounding_empties_is_named():
    form = LinearForm.from_arrays(
        [[2, 2]], row_lower=3, row_upper=3, col_lower=0, col_upper=9, cost=1, row_names=["odd"]
    )
    told = explain(form).no_optimum
    assert (told.kind, told.names, told.groups) == ("infeasible", ("odd",), ("odd",))


def test_bounds_that_cross_need_no_group():
    form = LinearForm.from_arrays(
        [[1, 1]], row_lower=0, row_upper=3, col_lower=[0.2, 0], col_upper=[0.8, 1], cost=1
    )
    told = explain(form)
    assert told.no_optimum.kind == "infeasible" and told.no_optimum.names == ("bounds of x1",)
    assert told.no_optimum.groups == () and told.no_optimum.groups_minimal and told.complete


def test_unbounded_models_name_what_grows():
    form = LinearForm.from_arrays(
        [[1, -1, 0], [0, 0, 1]],
        row_lower=[0, 0],
        row_upper=[0, 1],
        col_lower=0,
        col_upper=np.inf,
        cost=[1, 1, 1],
        sense="max",
        col_names=["made", "sold", "kept"],
    )
    told = explain(form)
    assert told.no_optimum.kind == "unbounded"
    assert set(told.no_optimum.names) == {"made", "sold"}
    assert told.gap is None and told.remedies == ()


@pytest.mark.parametrize("in_row", [False, True])
@pytest.mark.parametrize("grows", [True, False])
def test_a_lone_column_without_a_bound_is_named(in_row, grows):
    model = pyo.ConcreteModel()
    model.vans = pyo.Var(range(3), domain=pyo.Binary)
    model.bonus = pyo.Var(domain=pyo.NonNegativeReals if grows else pyo.NonPositiveReals)
    model.fleet = pyo.Constraint(expr=pyo.quicksum(model.vans.values()) <= 2)
    sign = 1 if grows else -1
    if in_row:
        model.paid = pyo.Constraint(expr=sign * model.bonus - model.vans[0] >= 0)
    model.gain = pyo.Objective(
        expr=pyo.quicksum(model.vans.values()) + sign * model.bonus, sense=pyo.maximize
    )
    told = latpath.explain(model)
    side, moves = ("upper", "grows") if grows else ("lower", "falls")
    assert told.no_optimum.kind == "unbounded" and told.no_optimum.names == ("bonus",)
    assert told.no_optimum.sentence == (
        f"'bonus' has no {side} bound, and the objective gets better as it {moves}"
    )


@settings(max_examples=60)
@given(st.integers(0, 2**32))
def test_the_columns_told_make_a_ray(seed):
    rng = np.random.default_rng(seed)
    form = LinearForm.from_arrays(
        rng.integers(-1, 2, (3, 4)),
        row_lower=rng.choice([-np.inf, 0], 3),
        row_upper=rng.choice([0, 2, np.inf], 3),
        col_lower=0,
        col_upper=rng.choice([1, np.inf], 4),
        cost=rng.integers(-2, 3, 4),
    )
    told = explain(form).no_optimum
    if told is None:
        return
    assert told.kind == "unbounded" and told.names
    held = [j for j in range(4) if form.col_names[j] not in told.names]
    upper = form.col_upper.copy()
    upper[held] = 0
    assert explain(form.replace(col_upper=upper)).no_optimum is not None

"""Starts: read, spread around, repaired at the least change; the optimum nearest to one."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import random_form
from tu_models import KINDS, feasible, plans, tu_form

from pyomo_latpath import routing
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.starts import (
    StartError,
    nearest_optimum,
    nearest_plan,
    read_start,
    spread_around,
)

INF = np.inf


def pair(**more):
    data = {"row_lower": 1, "row_upper": 1, "col_lower": 0, "col_upper": 1, "cost": 0}
    return LinearForm.from_arrays([[1, 1]], **(data | {"col_names": ["cave", "town"]} | more))


# --- reading ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("start", "reason"),
    [
        ([1.0], "shape"),
        ([1.0, np.nan], "nan at column 'town'"),
        ([1.0, INF], "inf at column 'town'"),
        (["one", 0], "no numbers"),
        ([None, 0], "column 'cave'"),
        ({"cave": 1}, "no value for column 'town'"),
        ({"cave": 1, "town": 0, "alp": 1}, "'alp', which is no column"),
    ],
)
def test_what_is_no_start_is_named(start, reason):
    with pytest.raises(StartError, match=reason):
        read_start(pair(), start)


def test_names_may_come_in_any_order():
    assert read_start(pair(), {"town": 2, "cave": 5}).tolist() == [5, 2]


# --- pieces -------------------------------------------------------------------------------------


@given(st.integers(0, 10**6))
@settings(max_examples=100)
def test_pieces_measure_the_distance_of_every_whole_plan(seed):
    rng = np.random.default_rng(seed)
    lower = rng.integers(-3, 3, 4).astype(float)
    upper = lower + rng.integers(0, 5, 4)
    start = np.round(rng.uniform(-5, 8, 4) * 4) / 4
    form = LinearForm.from_arrays(
        np.ones((1, 4)), row_lower=-INF, row_upper=INF, col_lower=lower, col_upper=upper, cost=0
    )
    spread = spread_around(form, start)
    low, high = spread.form.col_lower, spread.form.col_upper
    assert (low < high).all()
    for column in range(4):
        mine = np.flatnonzero(spread.columns == column)
        order = mine[np.argsort(spread.slope[mine])]
        for value in np.arange(lower[column], upper[column] + 1):
            # Fill the pieces in the order of their slopes, as cheapest plans do.
            pieces = low.copy()
            left = value - spread.origin[column] - low[mine].sum()
            for piece in order:
                step = min(left, high[piece] - low[piece])
                pieces[piece] += step
                left -= step
            assert left == 0
            assert spread.plan(pieces)[column] == value
            here = spread.slope[mine] @ pieces[mine] + abs(spread.origin[column] - start[column])
            assert here == pytest.approx(abs(value - start[column]))


def test_columns_at_a_bound_keep_one_piece_and_fixed_ones_none():
    form = pair(row_lower=0, row_upper=9, col_upper=[1, 0])
    spread = spread_around(form, np.array([1.0, 0.0]))
    assert spread.columns.tolist() == [0]
    assert spread.slope.tolist() == [-1]


def test_pieces_keep_costs_and_rows():
    form = pair(row_lower=0, row_upper=9, col_upper=5, cost=[2, 3], offset=1, sense="max")
    spread = spread_around(form, np.array([2.0, 3.0]))
    assert spread.form.offset == 1 + 4 + 9
    assert spread.form.cost.tolist() == [2, 3, 2, 3]
    assert (spread.form.row_lower[0], spread.form.row_upper[0]) == (-5, 4)
    assert spread.form.sense == "max"


def test_semicontinuous_columns_have_no_pieces():
    form = pair(semicontinuous=[False, True])
    with pytest.raises(ValueError, match="'town' is semicontinuous"):
        spread_around(form, np.zeros(2))


# --- the nearest plan ---------------------------------------------------------------------------


@given(st.sampled_from([*KINDS, "general"]), st.integers(0, 10**6))
@settings(max_examples=60)
def test_the_nearest_plan_is_nearest(kind, seed):
    rng = np.random.default_rng(seed)
    form = random_form(rng, kind) if kind == "general" else tu_form(rng, kind, m=3, n=4)[0]
    start = np.round(rng.uniform(-2, 5, form.shape[1]) * 4) / 4
    everything = plans(form)
    status, x = nearest_plan(form, start)
    if not everything:
        assert (status, x) == ("infeasible", None)
        return
    assert status == "optimal"
    assert feasible(form, x)
    assert np.abs(x - start).sum() == min(np.abs(plan - start).sum() for plan in everything)


def test_continuous_columns_go_no_further_than_needed():
    form = pair(row_lower=2.75, row_upper=9, col_upper=9, integer=[True, False])
    status, x = nearest_plan(form, np.array([1.0, 0.5]))
    assert status == "optimal"
    assert np.abs(x - [1, 0.5]).sum() == 1.25
    assert feasible(form, x)


# --- the nearest optimum ------------------------------------------------------------------------


@given(st.sampled_from(KINDS), st.integers(0, 10**6), st.sampled_from([1, 9]))
@settings(max_examples=80)
def test_of_equal_plans_the_nearest_is_taken(kind, seed, largest):
    form, start = tu_form(np.random.default_rng(seed), kind, m=4, n=5, largest=largest)
    solution = routing.solve(form)
    near = nearest_optimum(form, solution, start)
    best = [plan for plan in plans(form) if form.cost @ plan == solution.objective]
    least = min(np.abs(plan - start).sum() for plan in best)
    x = solution.x if near is None else near
    assert feasible(form, x)
    assert form.cost @ x == solution.objective
    if all(block.verdict == "proven" for block in solution.report.finding.blocks):
        assert np.abs(x - start).sum() == least


def test_without_an_optimum_there_is_none_near():
    form = pair(cost=[1, 2])
    solution = routing.solve(form)
    assert nearest_optimum(form, solution, solution.x) is None
    infeasible = pair(row_lower=3, row_upper=3)
    assert nearest_optimum(infeasible, routing.solve(infeasible), np.zeros(2)) is None


def test_a_linear_program_keeps_its_fractions():
    form = LinearForm.from_arrays(
        [[1, 1, 0], [0, 0, 1]],
        row_lower=[1.5, 0],
        row_upper=[1.5, 5],
        col_lower=0,
        col_upper=1,
        cost=0,
        integer=[False, False, True],
    )
    start = np.array([0.7, 0.8, 1.0])
    solution = routing.solve(form)
    assert nearest_optimum(form, solution, start).tolist() == pytest.approx(start.tolist())

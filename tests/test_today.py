"""From today's plan: moves that go in any set and order, limits on them, repaired starts."""

import itertools
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import KINDS as GENERAL
from random_models import random_form
from small_forms import assignment
from tu_models import KINDS, feasible, tu_form

from pyomo_latpath import routing
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.plan import largest_violation
from pyomo_latpath.starts import StartError
from pyomo_latpath.today import changes_between, solve

INF = np.inf


def two_choices(**more):
    """Two keepers, two caves each; the second choice is the better one for both."""
    data = {"row_lower": 1, "row_upper": 1, "col_lower": 0, "col_upper": 1, "cost": [5, 3, 9, 1]}
    return LinearForm.from_arrays([[1, 1, 0, 0], [0, 0, 1, 1]], **(data | more))


TODAY = [1, 0, 1, 0]


def worth(form, x):
    """The objective, exact."""
    return sum(Fraction(c) * Fraction(v) for c, v in zip(form.cost, x, strict=True))


def sized(form, gain):
    return gain if form.sense == "max" else -gain


# --- sets and orders ----------------------------------------------------------------------------


@given(st.sampled_from(KINDS), st.integers(0, 10**6))
@settings(max_examples=100)
def test_every_set_of_moves_leads_to_a_feasible_whole_plan(kind, seed):
    rng = np.random.default_rng(seed)
    form, start = tu_form(rng, kind, m=int(rng.integers(2, 8)), n=int(rng.integers(2, 14)))
    solution = solve(form, start=start)
    moves = solution.report.moves
    assert solution.status == "optimal"
    assert solution.objective == routing.solve(form).objective
    assert len(moves) <= form.shape[1]
    assert [move.gain for move in moves] == sorted((m.gain for m in moves), reverse=True)
    # Zero gains would lead to an equally good plan that is further away.
    assert all(move.gain > 0 for move in moves)
    for chosen in itertools.product((0, 1), repeat=min(len(moves), 8)):
        x = start.copy()
        for taken, move in zip(chosen, moves, strict=False):
            x[move.columns] += taken * (move.after - move.before)
        assert feasible(form, x)
        gain = sum(move.gain for taken, move in zip(chosen, moves, strict=False) if taken)
        assert worth(form, x) - worth(form, start) == sized(form, Fraction(gain))
    x = start.copy()
    for move in moves:
        assert np.array_equal(x[move.columns], move.before)
        x[move.columns] = move.after
        assert move.objective_after == worth(form, x)
        assert move.names == tuple(f"x{j + 1}" for j in move.columns)
    assert np.array_equal(x, solution.x)


@given(st.sampled_from(GENERAL), st.integers(0, 10**6))
@settings(max_examples=150)
def test_so_it_is_where_nothing_is_certified(kind, seed):
    rng = np.random.default_rng(seed)
    form = random_form(rng, kind)
    other = routing.solve(form.replace(cost=rng.integers(-5, 6, form.shape[1])))
    if other.x is None:
        return
    start = other.x
    solution = solve(form, start=start, rel_gap=0.0)
    if solution.status == "unbounded":
        assert solution.report.moves == ()
        return
    assert solution.status == "optimal"
    assert solution.objective == pytest.approx(routing.solve(form, rel_gap=0.0).objective)
    moves = solution.report.moves
    for chosen in itertools.product((0, 1), repeat=len(moves)):
        x = start.copy()
        for taken, move in zip(chosen, moves, strict=True):
            x[move.columns] += taken * (move.after - move.before)
        assert largest_violation(form, x) <= 1e-9
    assert all(move.gain > 0 for move in moves)
    gains = sum(move.gain for move in moves)
    assert form.offset + form.cost @ start + sized(form, gains) == pytest.approx(solution.objective)


def test_a_block_with_fractions_moves_as_a_whole():
    # A continuous column in a certified block: its half cannot be had in whole steps.
    form = LinearForm.from_arrays(
        [[1, 1, 1, 1]],
        row_lower=3,
        row_upper=4,
        col_lower=0,
        col_upper=[2, 2, 4, 1],
        cost=[5, 4, 1, 0],
        integer=[True, True, False, False],
    )
    solution = solve(form, start=[1, 1, 0.5, 0.5])
    assert solution.x.tolist() == [0, 0, 2, 1]
    (move,) = solution.report.moves
    assert move.columns.tolist() == [0, 1, 2, 3]
    assert move.gain == 9.5 - 2


def test_columns_on_their_own_move_on_their_own():
    form = LinearForm.from_arrays(
        [[2, 0, 0], [0, 0, 1]],
        row_lower=[1, 0],
        row_upper=INF,
        col_lower=0,
        col_upper=[9, 9, 1.5],
        cost=[1, -1, -1],
        integer=[True, True, False],
    )
    moves = solve(form, start=[4, 0, 0.25]).report.moves
    assert [(move.names, move.after.tolist()) for move in moves] == [
        (("x2",), [9.0]),
        (("x1",), [1.0]),
        (("x3",), [1.5]),
    ]


def test_semicontinuous_columns_go_all_the_way():
    form = LinearForm.from_arrays(
        [[1, 1]],
        row_lower=-INF,
        row_upper=8,
        col_lower=[3, 0],
        col_upper=[9, 1],
        cost=[-2, -1],
        integer=[False, True],
        semicontinuous=[True, False],
    )
    solution = solve(form, start=[0, 0])
    (move,) = solution.report.moves
    assert move.after.tolist() == solution.x[move.columns].tolist()
    with pytest.raises(StartError, match=r"'r1' is at 10.*; semicontinuous columns"):
        solve(form, start=[9, 1], repair_start=True)


def test_scaled_columns_move_in_their_own_units():
    # 2.5 kg of milk a wheel: the certificate counts milk in portions.
    form = LinearForm.from_arrays(
        [[2.5, 2.5, -1, 0], [0, 0, 1, 1]],
        row_lower=[0, -INF],
        row_upper=[0, 50],
        col_lower=0,
        col_upper=[4, 4, INF, 5],
        cost=[-8, -9, 1, 0],
        integer=[True, True, False, False],
    )
    solution = solve(form, start=[2, 0, 5, 0])
    for move in solution.report.moves:
        x = np.array([2.0, 0, 5, 0])
        x[move.columns] += move.after - move.before
        assert largest_violation(form, x) == 0
    assert {move.names for move in solution.report.moves} == {("x1", "x3"), ("x2", "x3")}


# --- a limit on the moves -----------------------------------------------------------------------


@given(st.sampled_from(KINDS), st.integers(0, 10**6), st.integers(0, 4))
@settings(max_examples=60)
def test_a_limit_stops_at_a_feasible_plan_and_says_what_is_left(kind, seed, most):
    rng = np.random.default_rng(seed)
    form, start = tu_form(rng, kind, m=5, n=9)
    whole = solve(form, start=start)
    every = whole.report.moves
    solution = solve(form, start=start, max_moves=most)
    report = solution.report
    assert solution.status == ("limit" if most < len(every) else "optimal")
    made, further = report.moves, report.further_moves
    assert len(made) == min(most, len(every))
    assert [m.gain for m in (*made, *further)] == [m.gain for m in every]
    assert feasible(form, solution.x)
    assert solution.objective == worth(form, solution.x)
    assert solution.bound == whole.objective
    left = sum(Fraction(move.gain) for move in further)
    assert Fraction(solution.bound) - Fraction(solution.objective) == sized(form, left)


def test_none_at_all_asks_how_far_it_is():
    solution = solve(two_choices(), start=TODAY, max_moves=0)
    assert solution.status == "limit"
    assert (solution.x.tolist(), solution.objective, solution.bound) == (TODAY, 14, 4)
    assert solution.report.moves == ()
    assert [move.gain for move in solution.report.further_moves] == [8, 2]
    assert "stopped after 0 of 2 moves" in solution.report.why
    assert solution.report.proof == "exact"
    data = solution.report.to_dict()
    assert data["moves"] == []
    assert data["further_moves"][0] == {
        "columns": ["x3", "x4"],
        "before": [1, 0],
        "after": [0, 1],
        "gain": 8,
        "objective_after": 6,
    }


def test_the_best_plan_needs_no_moves():
    solution = solve(two_choices(), start=[0, 1, 0, 1], max_moves=3)
    assert (solution.status, solution.report.moves) == ("optimal", ())
    assert "stopped" not in solution.report.why


def test_equal_plans_are_no_reason_to_move():
    form = two_choices(cost=[5, 5, 9, 1])
    assert solve(form, start=TODAY).x.tolist() == [1, 0, 0, 1]
    assert solve(form, start=[0, 1, 1, 0]).x.tolist() == [0, 1, 0, 1]


def test_branch_and_bound_makes_no_idle_moves_either():
    triangle = [[1, 1, 0, 0], [0, 1, 1, 0], [1, 0, 1, 0], [0, 0, 0, 1]]
    form = LinearForm.from_arrays(
        triangle, row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=-1
    )
    for start in np.eye(4)[:3]:
        solution = solve(form, start=start, rel_gap=0.0)
        assert solution.objective == -2
        assert solution.x.tolist() == np.add(start, [0, 0, 0, 1]).tolist()
        assert [move.names for move in solution.report.moves] == [("x4",)]


# --- what a start may be ------------------------------------------------------------------------


def test_a_start_by_names():
    form = two_choices(col_names=["a1", "a2", "b1", "b2"])
    named = {"b2": 0, "b1": 1, "a1": 1, "a2": 0}
    assert [m.names for m in solve(form, start=named).report.moves] == [("b1", "b2"), ("a1", "a2")]


@pytest.mark.parametrize(
    ("start", "reason"),
    [
        ([1, 0, 1, 1], "row 'r2' is at 2"),
        ([0.5, 0.5, 1, 0], "column 'x1', which must be a whole number"),
        ([2, -1, 1, 0], "column 'x1' is at 2"),
        ([1, 0, 1], "shape"),
    ],
)
def test_what_is_no_plan_is_refused_by_name(start, reason):
    with pytest.raises(StartError, match=reason):
        solve(two_choices(), start=start)


@pytest.mark.parametrize(
    "options", [{"max_moves": 3}, {"repair_start": True}, {"start": TODAY, "max_moves": -1}]
)
def test_wrong_wishes_are_refused(options):
    with pytest.raises(ValueError, match="max_moves"):
        solve(two_choices(), **options)


@pytest.mark.parametrize("limit", [-1.0, float("nan")])
def test_a_wrong_time_limit_is_refused(limit):
    with pytest.raises(ValueError, match="time_limit"):
        solve(two_choices(), start=TODAY, time_limit=limit)


# --- repair -------------------------------------------------------------------------------------


def test_a_start_is_repaired_at_the_least_change():
    solution = solve(two_choices(), start=[1, 0, 1, 1], repair_start=True, max_moves=0)
    repair = solution.report.repair
    assert repair.names in (("x3",), ("x4",))
    assert repair.after.tolist() == [0]
    assert repair.objective_after == solution.objective
    assert solution.x.sum() == 2
    data = solution.report.to_dict()["repair"]
    assert data["columns"] == list(repair.names)


@given(st.sampled_from(GENERAL), st.integers(0, 10**6))
@settings(max_examples=60)
def test_repaired_starts_lead_to_the_optimum(kind, seed):
    rng = np.random.default_rng(seed)
    form = random_form(rng, kind)
    start = np.round(rng.uniform(-3, 4, form.shape[1]) * 4) / 4
    plain = routing.solve(form, rel_gap=0.0)
    solution = solve(form, start=start, repair_start=True, rel_gap=0.0)
    assert solution.status == plain.status
    if plain.x is None:
        assert solution.x is None
        return
    assert solution.objective == pytest.approx(plain.objective)
    x = start.copy()
    for move in (solution.report.repair,) if solution.report.repair else ():
        x[move.columns] = move.after
    assert largest_violation(form, x) <= 1e-6
    for move in solution.report.moves:
        x[move.columns] = move.after
    assert x == pytest.approx(solution.x)


def test_a_feasible_start_needs_no_repair():
    solution = solve(two_choices(), start=TODAY, repair_start=True)
    assert solution.report.repair is None
    assert len(solution.report.moves) == 2


def test_what_nobody_can_repair_is_infeasible():
    form = two_choices(row_lower=3, row_upper=3)
    solution = solve(form, start=TODAY, repair_start=True)
    assert (solution.status, solution.x) == ("infeasible", None)
    assert solution.report.blame


# --- endings ------------------------------------------------------------------------------------


def test_without_time_the_start_is_returned():
    rng = np.random.default_rng(3)
    weights = rng.integers(10, 99, (3, 40)).astype(float)
    form = LinearForm.from_arrays(
        weights,
        row_lower=0,
        row_upper=weights.sum(axis=1) // 3,
        col_lower=0,
        col_upper=1,
        cost=rng.integers(10, 99, 40),
        sense="max",
    )
    start = np.zeros(40)
    start[0] = 1
    solution = solve(form, start=start, time_limit=0.0)
    assert solution.status == "time_limit"
    assert feasible(form, solution.x)
    assert solution.objective >= form.cost[0]


def test_an_unbounded_model_has_no_best_plan_to_move_to():
    form = LinearForm.from_arrays(
        [[1, -1]], row_lower=0, row_upper=0, col_lower=0, col_upper=INF, cost=[-1, 0]
    )
    solution = solve(form, start=[2, 2])
    assert (solution.status, solution.report.moves) == ("unbounded", ())


def test_the_stages_seconds_hold_everything():
    report = solve(two_choices(), start=TODAY, compile_seconds=2.0).report
    assert report.seconds["compile"] == 2.0
    assert report.seconds["solve"] > 0


def test_plans_that_hardly_differ_do_not_differ():
    form = two_choices(integer=False)
    assert changes_between(form, np.full(4, 0.5), np.full(4, 0.5 + 1e-12)) == []


def test_large_assignments_move_along_their_cycles():
    n = 60
    form = assignment(np.random.default_rng(4).integers(1, 1000, (n, n)))
    start = np.eye(n).ravel()
    solution = solve(form, start=start)
    for move in solution.report.moves:
        x = start.copy()
        x[move.columns] = move.after
        assert feasible(form, x)
        assert move.gain > 0
        assert (move.after - move.before).sum() == 0

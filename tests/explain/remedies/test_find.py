"""Remedies lose no whole plan, never make a bound worse, and do what they say."""

import numpy as np
import pytest
from exact_milp import solve_exactly
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import random_form
from small_forms import triangle
from switched_models import packing_form, switched_form, whole_plans

import pyomo_latpath as latpath
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.declared import optimum_of
from pyomo_latpath.explain.remedies.find import find_remedies
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise

PURE = ["switched", "matching", "stable", "general", "decimals", "tight", "network"]
MIXED = ["switched mixed", "mixed", "general"]


def small_form(seed, kind):
    rng = np.random.default_rng(seed)
    if kind.startswith("switched"):
        return switched_form(rng, continuous=kind == "switched mixed")
    if kind in ("matching", "stable"):
        return packing_form(rng, transposed=kind == "stable")
    return random_form(rng, kind)


def remedies_of(form, seconds=20):
    return tuple(find_remedies(normalise(form), None, Deadline(seconds)))


@settings(max_examples=100)
@given(st.integers(0, 10**6), st.sampled_from(PURE))
def test_each_keeps_exactly_the_whole_plans(seed, kind):
    form = small_form(seed, kind)
    plans = whole_plans(form)
    for remedy in remedies_of(form):
        changed = remedy.apply_to(form)
        if remedy.kind == "drop":
            changed = changed.replace(integer=form.integer)
        assert np.array_equal(whole_plans(changed), plans)


@settings(max_examples=80)
@given(st.integers(0, 10**6), st.sampled_from(MIXED), st.integers(0, 3))
def test_the_best_value_stays_the_same_at_any_objective(seed, kind, draw):
    form = small_form(seed, kind)
    remedies = remedies_of(form)
    if draw:
        cost = np.random.default_rng(seed + draw).integers(-5, 6, form.shape[1])
        form = form.replace(cost=cost)
    best = solve_exactly(form)
    for remedy in remedies:
        status, value = solve_exactly(remedy.apply_to(form))
        assert status == best[0]
        assert value == best[1] or abs(float(value - best[1])) <= 1e-9


@settings(max_examples=60)
@given(st.integers(0, 10**6), st.sampled_from([*PURE, *MIXED, "free"]), st.randoms())
def test_all_together_in_any_order_the_solver_finds_the_same(seed, kind, shuffle):
    form = small_form(seed, kind)
    together, remedies = form, list(remedies_of(form))
    shuffle.shuffle(remedies)
    for remedy in remedies:
        together = remedy.apply_to(together)
    best, after = latpath.solve(form, rel_gap=0), latpath.solve(together, rel_gap=0)
    assert after.status == best.status
    if best.status == "optimal":
        assert after.objective == pytest.approx(best.objective, abs=1e-6)


@settings(max_examples=80)
@given(st.integers(0, 10**6), st.sampled_from([*PURE, *MIXED, "free"]))
def test_what_is_told_of_the_relaxation_is_so_and_never_worse(seed, kind):
    form = small_form(seed, kind)
    sign, together = (1 if form.sense == "min" else -1), form
    last = -np.inf
    for remedy in remedies_of(form):
        before = optimum_of(form, Deadline(None))
        alone = optimum_of(remedy.apply_to(form), Deadline(None))
        together = remedy.apply_to(together)
        reached = optimum_of(together, Deadline(None))
        for told, found in (
            (remedy.bound_before, before.bound),
            (remedy.bound_after, alone.bound),
            (remedy.bound_together, reached.bound),
        ):
            assert told == pytest.approx(found, abs=1e-6)
        assert sign * remedy.bound_after >= sign * remedy.bound_before - 1e-6
        assert sign * remedy.bound_together >= max(last, sign * remedy.bound_after) - 1e-6
        last = sign * remedy.bound_together
        assert remedy.fractional_before == before.fractional
        better = sign * (remedy.bound_together - remedy.bound_before) > 1e-9
        fewer = min(remedy.fractional_after, remedy.fractional_together) < before.fractional
        assert better or fewer or remedy.kind == "drop"


def caves(big=1000.0, lots=4):
    """Two caves, opened before lots ripen in them."""
    n = 2 * lots + 2
    rows = np.zeros((2 + lots, n))
    for c in range(2):
        rows[c, c * lots : (c + 1) * lots] = 1
        rows[c, 2 * lots + c] = -big
    for k in range(lots):
        rows[2 + k, [k, lots + k]] = 1
    rng = np.random.default_rng(1)
    return LinearForm.from_arrays(
        rows,
        row_lower=[-np.inf] * 2 + [1] * lots,
        row_upper=[0] * 2 + [1] * lots,
        col_lower=0,
        col_upper=1,
        cost=np.append(rng.integers(1, 9, 2 * lots), [7, 8]),
        row_names=["open[1]", "open[2]", *(f"lot[{k}]" for k in range(lots))],
        col_names=[f"ripens[{k % lots},{k // lots}]" for k in range(2 * lots)] + ["o[1]", "o[2]"],
    )


def test_a_big_m_is_shrunk_then_the_row_split_and_the_gap_is_gone():
    form = caves()
    shrunk, parts = remedies_of(form)[:2]
    assert (shrunk.kind, parts.kind) == ("tighten", "split")
    assert "coefficient of 'o[1]' can go from -1,000 to -4" in shrunk.sentence
    assert "ripens[0,0] - o[1] <= 0" in parts.sentence
    assert parts.dropped_row_names == ("open[1]", "open[2]")
    assert len(parts.inequalities) == 8
    assert parts.bound_together == pytest.approx(latpath.solve(form).objective)
    assert parts.fractional_together == 0


def test_split_rows_go_and_new_names_are_free():
    form = caves(4.0)
    parts = next(remedy for remedy in remedies_of(form) if remedy.kind == "split")
    changed = parts.apply_to(form)
    assert changed.shape == (14, 10)
    assert np.isinf(changed.row_upper[:2]).all() and np.isinf(changed.row_lower[:2]).all()
    assert list(changed.row_names)[6:8] == ["open_split[1]", "open_split[2]"]
    with pytest.raises(ValueError, match="has been made in this model already"):
        parts.apply_to(changed.replace(cost=1))
    assert parts.apply_to(form.replace(cost=1)).shape == (14, 10)
    names = [*form.row_names[:5], "open_split[1]"]
    other = LinearForm.from_arrays(
        form.matrix,
        row_lower=form.row_lower,
        row_upper=form.row_upper,
        col_lower=0,
        col_upper=1,
        cost=form.cost,
        row_names=names,
    )
    parts = next(remedy for remedy in remedies_of(other) if remedy.kind == "split")
    assert parts.name == "open_split_2"


def test_rounding_is_told_in_the_models_own_units():
    form = LinearForm.from_arrays(
        [[0.5, 0.5, 0.5]],
        row_lower=-np.inf,
        row_upper=1.25,
        col_lower=[0, 0, 0.5],
        col_upper=[1, 1, 2.5],
        cost=[3, 2, 1],
        sense="max",
    )
    side, bounds = remedies_of(form)[:2]
    assert {side.kind, bounds.kind} == {"round"}
    (change,), (column,) = (side.row_changes or bounds.row_changes), bounds.bound_changes
    assert (change.lower, change.upper) == (-np.inf, 1.0)
    assert (column.lower, column.upper) == (1.0, 2.0)


def test_what_rounding_alone_made_whole_stays_whole_without_declarations():
    form = LinearForm.from_arrays(
        [[1, 1]], row_lower=-np.inf, row_upper=1.5, col_lower=0, col_upper=1, cost=-1
    )
    dropped = remedies_of(form)[-1]
    assert dropped.kind == "drop" and dropped.dropped_declarations.tolist() == [0, 1]
    changed = dropped.apply_to(form)
    assert not changed.integer.any() and changed.row_upper.tolist() == [1.5, 1.0]
    assert optimum_of(changed, Deadline(None)).bound == -1


def test_another_form_is_refused_by_name():
    form = caves()
    shrunk = remedies_of(form)[0]
    other = LinearForm.from_arrays(
        form.matrix[::-1],
        row_lower=form.row_lower[::-1],
        row_upper=form.row_upper[::-1],
        col_lower=0,
        col_upper=1,
        cost=0,
        row_names=list(form.row_names)[::-1],
        col_names=form.col_names,
    )
    with pytest.raises(ValueError, match=r"row 'open\[1\]' .* is not row 1 of this form"):
        shrunk.apply_to(other)


@pytest.mark.parametrize("what", ["rounded away", "infeasible", "unbounded", "semicontinuous"])
def test_models_without_a_fractional_optimum_have_no_remedies(what):
    limits = {
        "rounded away": (0.2, 0.8, 1),
        "unbounded": (0, np.inf, -1),
        "semicontinuous": (0, 1.5, -1),
        "infeasible": (-5, -4, 1),
    }
    low, high, cost = limits[what]
    form = LinearForm.from_arrays(
        [[1, 1]],
        row_lower=low,
        row_upper=high,
        col_lower=0,
        col_upper=np.inf,
        cost=cost,
        semicontinuous=what == "semicontinuous",
    )
    assert [r for r in remedies_of(form) if r.kind != "drop"] == []


def test_equations_of_odd_parity_are_cut_to_nothing():
    """An odd cycle of equations x + y = 1 has no whole plan; one cut of it and none is left."""
    form = triangle(row_lower=1, cost=[1, 2, 3])
    for remedy in remedies_of(form):
        assert len(whole_plans(remedy.apply_to(form))) == 0


def test_no_time_no_remedies():
    assert remedies_of(caves(), seconds=0) == ()


def test_plain_data_holds_the_derivation():
    form = packing_form(np.random.default_rng(3), transposed=True)
    told = [r.to_dict() for r in remedies_of(form) if r.kind == "cut"]
    assert told
    first = told[0]["inequalities"][0]
    assert set(first["derivation"]["row_multipliers"]) == {"1/2"}
    assert first["column_names"] and "columns" not in first


def larger_form(kind, seed):
    """Caves and lots with a big M, as whole or as any amounts; a stable set among 30 caves."""
    rng = np.random.default_rng(seed)
    if kind == "stable":
        rows = np.zeros((60, 30))
        for row in rows:
            row[rng.choice(30, 2, replace=False)] = 1
        cost, low, high, integer = -rng.integers(1, 9, 30), -np.inf, 1, True
        upper = 1.0
    else:
        caves, lots = 6, 15
        rows = np.zeros((caves + lots, caves * lots + caves))
        for c in range(caves):
            rows[c, c * lots : (c + 1) * lots] = rng.integers(1, 4, lots)
            rows[c, caves * lots + c] = -50 if kind == "limited" else -1000
        for k in range(lots):
            rows[caves + k, k : caves * lots : lots] = 1
        low = np.append(np.full(caves, -np.inf), np.ones(lots))
        high = np.append(np.zeros(caves), np.full(lots, np.inf))
        cost = np.append(rng.integers(1, 30, caves * lots), rng.integers(20, 60, caves))
        upper = np.append(np.full(caves * lots, 2.5), np.ones(caves))
        integer = np.arange(cost.size) >= (caves * lots if kind == "amounts" else 0)
    return LinearForm.from_arrays(
        rows,
        row_lower=low,
        row_upper=high,
        col_lower=0,
        col_upper=upper,
        cost=cost,
        integer=integer,
    )


@pytest.mark.parametrize("kind", ["stable", "whole", "amounts", "limited"])
@pytest.mark.parametrize("seed", range(2))
def test_larger_models_keep_their_optimum_and_get_better_bounds(kind, seed):
    form = larger_form(kind, seed)
    remedies = remedies_of(form)
    best, together = latpath.solve(form, rel_gap=0), form
    for remedy in remedies:
        alone = latpath.solve(remedy.apply_to(form), rel_gap=0)
        assert alone.objective == pytest.approx(best.objective, abs=1e-6)
        together = remedy.apply_to(together)
    after = latpath.solve(together, rel_gap=0)
    assert after.objective == pytest.approx(best.objective, abs=1e-6)
    closed = remedies[-1].bound_together - remedies[0].bound_before
    assert closed > 0.3 * (best.objective - remedies[0].bound_before)

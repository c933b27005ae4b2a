"""{0, 1/2} cuts: derived from multipliers, found where they exist, never too strong."""

import itertools
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import random_form
from small_forms import triangle
from switched_models import packing_form, whole_plans

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.remedies.cut_rounds import _needed, cut_remedy, cut_rounds
from pyomo_latpath.explain.remedies.cuts import Cut, excess, follows, halved, system_of
from pyomo_latpath.explain.remedies.drafts import Namer
from pyomo_latpath.explain.remedies.half_cuts import half_cuts
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.exact_vertex import exact_vertex
from pyomo_latpath.integrality.sampling import program_of

KINDS = ["matching", "stable", "general", "tight", "decimals"]


def small_form(seed, kind):
    rng = np.random.default_rng(seed)
    if kind in ("matching", "stable"):
        return packing_form(rng, transposed=kind == "stable")
    return random_form(rng, kind)


def vertex_of(normal):
    program = program_of(normal)
    result = program.solve()
    return (result, program.basis()) if result.status == "optimal" else (None, None)


def exceeds_somewhere(cut, plans):
    return any(excess(cut, plan) > 1e-9 for plan in plans)


@settings(max_examples=150)
@given(st.integers(0, 10**6), st.sampled_from(KINDS))
def test_a_cut_holds_at_all_whole_plans_and_cuts_the_exact_vertex_off(seed, kind):
    form = small_form(seed, kind)
    normal = normalise(form)
    if normal.conflict is not None or not normal.columns.size:
        return
    result, basis = vertex_of(normal)
    if result is None:
        return
    system, point = system_of(normal), exact_vertex(normal, basis)
    plans = whole_plans(form)[:, normal.columns]
    for cut in half_cuts(system, result.x):
        assert follows(system, cut)
        assert not exceeds_somewhere(cut, plans)
        assert point is None or excess(cut, point) > 0


def best_half_cut(system, x):
    """Largest violation of a {0, 1/2} cut: all sets of row sides are tried."""
    sides = [(i, 1) for i in np.flatnonzero(np.isfinite(system.row_upper)).tolist()]
    sides += [(i, -1) for i in np.flatnonzero(np.isfinite(system.row_lower)).tolist()]
    best = 0.0
    for size in range(1, len(sides) + 1):
        for chosen in itertools.combinations(sides, size):
            cut = halved(system, chosen, x)
            if cut is not None and all(m.denominator == 2 for m in cut.row_multipliers):
                best = max(best, float(excess(cut, x)))
    return best


@settings(max_examples=60)
@given(st.integers(0, 10**6), st.sampled_from(["matching", "stable", "general"]))
def test_where_a_cut_has_no_slack_at_all_one_is_found(seed, kind):
    normal = normalise(small_form(seed, kind))
    if normal.conflict is not None or not normal.columns.size:
        return
    result, _ = vertex_of(normal)
    system = system_of(normal)
    if result is not None and best_half_cut(system, result.x) > 0.5 - 1e-6:
        assert half_cuts(system, result.x)


@settings(max_examples=60)
@given(st.integers(0, 10**6), st.sampled_from(KINDS))
def test_rounds_of_cuts_lose_no_plan_and_rest_on_cuts_before_them(seed, kind):
    form = small_form(seed, kind)
    normal = normalise(form)
    if normal.conflict is not None or not normal.columns.size:
        return
    cuts = cut_rounds(normal, Deadline(10))
    plans, system = whole_plans(form)[:, normal.columns], system_of(normal)
    for k, cut in enumerate(cuts):
        assert follows(system.with_cuts(cuts[:k]), cut)
        assert not exceeds_somewhere(cut, plans)
    if cuts:
        remedy = cut_remedy(normal, cuts, Namer(form))
        assert len(whole_plans(remedy.apply_to(form))) == len(whole_plans(form))


def test_of_many_cuts_those_stay_that_are_tight_or_that_these_rest_on():
    def cut(columns, side, rows):
        halves = (Fraction(1, 2),) * len(rows)
        return Cut(columns, (1,) * len(columns), side, rows, halves, (), ())

    loose, used = cut((0,), 2, (0, 1)), cut((1,), 2, (0, 2))
    tight = cut((0, 1), 2, (1, 4))  # three rows of the model, then `loose` as 3, `used` as 4
    kept = _needed([loose, used, tight], np.ones(2), 3)
    assert kept == [used, cut((0, 1), 2, (1, 3))]


def system_of_triangle():
    return system_of(normalise(triangle()))


def test_the_check_refuses_every_cut_that_is_changed():
    system = system_of_triangle()
    cut = halved(system, [(0, 1), (1, 1), (2, 1)], np.full(3, 0.5))
    assert follows(system, cut)
    half = Fraction(1, 2)
    for wrong in (
        replace(cut, side=0),
        replace(cut, coefficients=(1, 2, 1)),
        replace(cut, columns=(0, 1), coefficients=(1, 1)),
        replace(cut, row_multipliers=(half, half, Fraction(1, 3))),
        replace(cut, row_multipliers=(-half, half, half)),
        replace(cut, rows=(0, 1, 1)),
        replace(cut, bounds=(0,), bound_multipliers=(half,)),
    ):
        assert not follows(system, wrong)
    assert follows(system, replace(cut, side=2))


def test_the_check_needs_whole_columns_and_finite_sides():
    system = system_of_triangle()
    cut = halved(system, [(0, 1), (1, 1), (2, 1)], np.full(3, 0.5))
    assert not follows(replace(system, integer=np.array([True, True, False])), cut)
    assert not follows(replace(system, row_upper=np.array([1.0, 1.0, np.inf])), cut)


@pytest.mark.parametrize("lower, upper", [(-np.inf, 5), (5, np.inf), (5, 5)])
def test_columns_between_any_bounds_and_rows_of_any_kind(lower, upper):
    """2 x + 2 y + z on one side of 5, z at a bound of its own: parity of z decides."""
    form = LinearForm.from_arrays(
        [[2, 2, 1]],
        row_lower=lower,
        row_upper=upper,
        col_lower=[-3, 1, -2],
        col_upper=[4, 6, 2],
        cost=0,
    )
    system = system_of(normalise(form))
    x = np.array([0.5, 1.0, 2.0])
    (cut,) = half_cuts(system, x)
    assert follows(system, cut)
    assert excess(cut, x) > 0
    assert not exceeds_somewhere(cut, whole_plans(form))


def test_rows_with_continuous_columns_are_left_alone():
    form = triangle(integer=[True, True, False])
    assert half_cuts(system_of(normalise(form)), np.full(3, 0.5)) == []


def test_a_free_column_has_no_bound_to_be_rounded_with():
    form = LinearForm.from_arrays(
        [[2, 1]], row_lower=-np.inf, row_upper=1, col_lower=-np.inf, col_upper=np.inf, cost=0
    )
    system = system_of(normalise(form))
    assert halved(system, [(0, 1)], np.array([0.25, 0.5])) is None
    assert half_cuts(system, np.array([0.25, 0.5])) == []


def test_time_that_is_up_ends_the_search():
    system = system_of_triangle()
    assert half_cuts(system, np.full(3, 0.5), deadline=Deadline(0)) == []
    assert isinstance(half_cuts(system, np.full(3, 0.5), deadline=Deadline(5))[0], Cut)

"""The gap between relaxation and best whole plan, and where the optimum is fractional."""

import math
import re
from fractions import Fraction

import numpy as np
import pytest
from exact_milp import solve_exactly
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import random_form

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.explain import explain
from pyomo_latpath.explain.fractional import measure
from pyomo_latpath.explain.gap import Declared, Gap, declared_optimum
from pyomo_latpath.explain.relaxation import Relaxation
from pyomo_latpath.explain.stems import column_stems
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise


@settings(max_examples=60)
@given(st.integers(0, 2**32), st.sampled_from(["general", "tight", "decimals", "mixed"]))
def test_bounds_and_plans_agree_with_exact_arithmetic(seed, kind):
    form = random_form(np.random.default_rng(seed), kind)
    told = explain(form, time_limit=60)
    status, best = solve_exactly(form)
    if told.gap is None:
        assert told.no_optimum is not None
        assert told.no_optimum.kind == status
        return
    relaxed_status, relaxed = solve_exactly(form.replace(integer=False))
    assert relaxed_status == "optimal"
    assert told.gap.declared_bound == pytest.approx(float(relaxed), abs=1e-6)
    if status == "infeasible":
        assert told.gap.plan_status == "infeasible" and math.isnan(told.gap.plan)
        return
    assert told.gap.plan == pytest.approx(float(best), abs=1e-6)
    assert told.gap.exact
    between = sorted([float(relaxed), told.gap.rounded_bound, float(best)])
    ordered = between if form.sense == "min" else between[::-1]
    assert [float(relaxed), told.gap.rounded_bound, float(best)] == pytest.approx(ordered)
    assert told.gap.absolute == pytest.approx(abs(float(best - relaxed)), abs=1e-6)


def test_a_gap_is_relative_to_the_plan_but_not_to_less_than_one():
    gap = Gap("max", 12.0, 11.0, 10.0, 10.0, "optimal", 0.0)
    assert (gap.absolute, gap.relative) == (2.0, 0.2)
    assert Gap("min", -0.5, 0.0, 0.0, 0.0, "optimal", 0.0).relative == 0.5
    assert not Gap("min", 1.0, 1.0, 3.0, 2.0, "time_limit", 0.0).exact


def test_without_a_plan_the_gap_is_not_known():
    gap = Gap("min", 1.0, 1.0, math.nan, 2.0, "time_limit", 0.0)
    assert math.isnan(gap.absolute) and math.isnan(gap.relative)
    cycle = np.eye(5) + np.roll(np.eye(5), 1, axis=1)
    form = LinearForm.from_arrays(
        cycle, row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=-1
    )

    def interrupt(line):
        if line == "looking for the best whole plan":
            raise KeyboardInterrupt

    told = explain(form, progress=interrupt)
    data = told.to_dict()["gap"]
    assert data["declared_bound"] == pytest.approx(-2.5)
    assert data["plan"] is data["absolute"] is data["relative"] is None
    assert "apart" not in told.to_text() and not re.search(r"\bnan\b", told.to_html())


@pytest.mark.parametrize(
    ("changes", "bound", "fractional"),
    [
        ({"row_upper": 3.5}, 3.5, 1),
        ({"col_upper": [1.5, 2.0]}, 3.5, 1),
        ({"col_lower": [0.5, 0.5], "row_upper": 0.9}, math.nan, None),
        ({"col_lower": [0.5, 0.0], "col_upper": [1.5, 0.5]}, 2.0, 2),
        ({"row_upper": 3.0}, 3.0, 0),
    ],
)
def test_the_relaxation_as_declared_is_that_before_rounding(changes, bound, fractional):
    form = LinearForm.from_arrays(
        [[1, 1]], row_lower=0, row_upper=9, col_lower=0, col_upper=3, cost=1, sense="max"
    ).replace(**changes)
    normal = normalise(form)
    relaxation = Relaxation(normal)
    rounded = Declared(relaxation.objective(relaxation.optimum(Deadline(None))), 0)
    told = declared_optimum(normal, rounded, Deadline(None))
    assert told.bound == pytest.approx(bound, nan_ok=True)
    assert told.fractional == fractional


def test_where_rounding_makes_it_whole_both_relaxations_are_told():
    form = LinearForm.from_arrays(
        [[1, 1]], row_lower=0, row_upper=3.5, col_lower=0, col_upper=9, cost=1, sense="max"
    )
    told = explain(form)
    assert told.whole is not None
    assert (told.fractional.count, told.fractional.declared) == (0, 1)
    assert (told.gap.declared_bound, told.gap.rounded_bound, told.gap.plan) == (3.5, 3, 3)


def measured(form, **options):
    relaxation = Relaxation(normalise(form))
    optimum = relaxation.optimum(Deadline(None))
    settings = {"samples": 16, "seed": 0, "deadline": Deadline(None)} | options
    return relaxation, measure(relaxation, optimum, column_stems(form), **settings)


def clash_and_rest():
    """An odd cycle of clashes (vans), a free choice (salt), and a fixed column."""
    matrix = np.zeros((4, 6))
    matrix[:3, :3] = np.eye(3) + np.roll(np.eye(3), 1, axis=1)
    matrix[3, 3:5] = 1
    return LinearForm.from_arrays(
        matrix,
        row_lower=-np.inf,
        row_upper=[1, 1, 1, 3],
        col_lower=[0, 0, 0, 0, 0, 2],
        col_upper=2,
        cost=[-4, -4, -4, -1, -1, 1],
        col_names=["van[1]", "van[2]", "van[3]", "salt[1]", "salt[2]", "rent"],
    )


def test_fractional_columns_are_counted_by_component():
    _, told = measured(clash_and_rest())
    assert (told.count, told.integers, told.worst_value) == (3, 5, Fraction(1, 2))
    first, second = told.components
    assert (first.name, first.integers, first.fractional) == ("van", 3, 3)
    assert first.worst_name in ("van[1]", "van[2]", "van[3]")
    assert first.worst_value == Fraction(1, 2)
    assert (second.name, second.fractional, second.worst_name) == ("salt", 0, None)
    assert told.samples == 16
    assert first.sampled == told.samples_fractional >= 1 and second.sampled == 0


def test_samples_are_repeatable_and_leave_the_objective_as_it_was():
    form = clash_and_rest()
    relaxation, told = measured(form, seed=7)
    assert told == measured(form, seed=7)[1]
    value = relaxation.objective(relaxation.optimum(Deadline(None)))
    assert value == pytest.approx(-4 * 1.5 - 3 + 2)


def test_without_time_the_optimum_alone_is_looked_at():
    _, told = measured(clash_and_rest(), deadline=Deadline(0))
    assert (told.samples, told.samples_fractional, told.count) == (1, 1, 3)


def test_a_negated_column_is_told_in_the_units_of_the_model():
    form = LinearForm.from_arrays(
        [[3, 0]], row_lower=-np.inf, row_upper=4, col_lower=[-2, 0], col_upper=[1, 0], cost=-1
    )
    _, told = measured(form)
    assert told.count == 0  # 3 x <= 4 is x <= 1 after rounding
    form = LinearForm.from_arrays(
        [[-3, 2]], row_lower=-5, row_upper=np.inf, col_lower=0, col_upper=[9, 1], cost=[-1, 1]
    )
    _, told = measured(form)
    assert told.worst_value == Fraction(5, 3)

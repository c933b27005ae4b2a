"""The same answers as HiGHS at gap 0 on random models, by both of Pyomo's interfaces.

Where the two differ, an exact solver in fractions settles who is right.
"""

from __future__ import annotations

import itertools
import math
from fractions import Fraction

import highspy
import numpy as np
import pyomo.environ as pyo
import pytest
from exact_milp import solve_exactly
from plugin_models import QUIET
from pyomo.contrib.solver.common.results import TerminationCondition
from random_models import KINDS, pyomo_model, random_form
from small_forms import assignment, triangle
from with_highs import highs, program_of

from pyomo_latpath import routing
from pyomo_latpath.forms.from_pyomo import compile_model
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.plugin import Latpath, LegacyLatpath

PER_KIND = 125
STATUS = {
    TerminationCondition.convergenceCriteriaSatisfied: "optimal",
    TerminationCondition.provenInfeasible: "infeasible",
    TerminationCondition.unbounded: "unbounded",
}


def by_current(model):
    """Status, objective and values by column name, through the current interface."""
    results = Latpath().solve(model, rel_gap=0, abs_gap=0, **QUIET)
    if results.solution_loader.get_number_of_solutions():
        results.solution_loader.load_vars()
    status = STATUS[results.termination_condition]
    return status, results.incumbent_objective if status == "optimal" else None


def by_legacy(model):
    results = LegacyLatpath().solve(model, rel_gap=0, abs_gap=0, **QUIET)
    status = str(results.solver.termination_condition)
    if status != "optimal":
        return status, None
    model.solutions.load_from(results)
    # The better end of the interval between plan and bound is the plan.
    return status, float(results.problem.upper_bound)


def highs_at_gap_zero(form: LinearForm) -> tuple[str, float | None]:
    status, value = run_highs(form, form.cost)
    if status == "unsettled":
        status, _ = run_highs(form, np.zeros(form.shape[1]))
        return ("unbounded" if status == "optimal" else status), None
    return status, value if status == "optimal" else None


def run_highs(form: LinearForm, cost: np.ndarray) -> tuple[str, float]:
    solver = highs(program_of(form.replace(cost=cost)), mip_rel_gap=0.0, mip_abs_gap=0.0)
    solver.run()
    word = {
        highspy.HighsModelStatus.kOptimal: "optimal",
        highspy.HighsModelStatus.kInfeasible: "infeasible",
        highspy.HighsModelStatus.kUnbounded: "unsettled",
        highspy.HighsModelStatus.kUnboundedOrInfeasible: "unsettled",
    }
    return word[solver.getModelStatus()], solver.getInfo().objective_function_value


def agree(ours: tuple[str, float | None], other: tuple[str, float | Fraction | None]) -> bool:
    if ours[0] != other[0]:
        return False
    if ours[1] is None or other[1] is None:
        return ours[1] is None and other[1] is None
    return math.isclose(ours[1], float(other[1]), rel_tol=1e-7, abs_tol=1e-5)


def check_plan(form: LinearForm, x: np.ndarray) -> None:
    assert np.all(np.abs(x - np.rint(x))[form.integer] <= 1e-6)
    for value, low, high in (
        (x, form.col_lower, form.col_upper),
        (form.matrix @ x, form.row_lower, form.row_upper),
    ):
        assert np.all(value >= low - 1e-6)
        assert np.all(value <= high + 1e-6)


@pytest.mark.parametrize("solve", [by_current, by_legacy])
@pytest.mark.parametrize("kind", KINDS)
def test_same_status_and_objective_as_highs(solve, kind):
    rng = np.random.default_rng([KINDS.index(kind), solve is by_legacy])
    met = set()
    for _ in range(PER_KIND):
        form = random_form(rng, kind)
        model = pyomo_model(form)
        ours = solve(model)
        if not agree(ours, highs_at_gap_zero(form)):
            assert agree(ours, solve_exactly(form)), (ours, solve_exactly(form))
        met.add(ours[0])
        if ours[0] == "optimal":
            # A column that stands in no expression is no part of the Pyomo model.
            x = np.array([model.x[j].value or 0.0 for j in range(form.shape[1])])
            check_plan(form, np.clip(x, form.col_lower, form.col_upper))
    # A generator that gave one outcome only would show little.
    assert {"optimal", "infeasible"} <= met


@pytest.mark.parametrize("kind", KINDS)
def test_same_answer_as_fractions(kind):
    rng = np.random.default_rng([KINDS.index(kind), 2])
    for _ in range(12):
        form = random_form(rng, kind)
        assert agree(by_current(pyomo_model(form)), solve_exactly(form))


def test_the_exact_solver_itself_agrees_with_enumeration():
    rng = np.random.default_rng(5)
    for _ in range(40):
        form = random_form(rng, "general")
        ranges = [
            range(int(low), int(high) + 1)
            for low, high in zip(form.col_lower, form.col_upper, strict=True)
        ]
        matrix = form.matrix.toarray()
        values = [
            form.cost @ x + form.offset
            for x in itertools.product(*ranges)
            if np.all(matrix @ x >= form.row_lower) and np.all(matrix @ x <= form.row_upper)
        ]
        best = {"min": min, "max": max}[form.sense]
        expected = ("optimal", best(values)) if values else ("infeasible", None)
        assert solve_exactly(form) == expected


# --- prices ---------------------------------------------------------------------------------


def effective(form: LinearForm):
    """Sides and bounds as rounded inwards for whole plans: the prices are those of these."""
    normal = normalise(form)
    low, high = form.row_lower.copy(), form.row_upper.copy()
    scale, fixed = normal.row_den / normal.row_num, (form.matrix @ normal.fixed_value)[normal.rows]
    low[normal.rows] = normal.row_lower * scale + fixed
    high[normal.rows] = normal.row_upper * scale + fixed
    col_low = np.where(form.integer, np.ceil(form.col_lower), form.col_lower)
    col_high = np.where(form.integer, np.floor(form.col_upper), form.col_upper)
    return low, high, col_low, col_high


def check_prices(form: LinearForm, x, row_dual, reduced_cost) -> None:
    """Signs, complementary slackness, reduced costs and strong duality."""
    sign = 1 if form.sense == "min" else -1
    low, high, col_low, col_high = effective(form)
    assert np.allclose(reduced_cost, form.cost - form.matrix.T @ row_dual, atol=1e-7)
    total = form.offset
    for price, value, floor, ceiling in (
        (row_dual, form.matrix @ x, low, high),
        (reduced_cost, x, col_low, col_high),
    ):
        up, down = sign * price > 1e-7, sign * price < -1e-7
        assert np.allclose(value[up], floor[up], atol=1e-6)
        assert np.allclose(value[down], ceiling[down], atol=1e-6)
        total += price[up] @ floor[up] + price[down] @ ceiling[down]
    assert math.isclose(total, form.cost @ x + form.offset, rel_tol=1e-7, abs_tol=1e-6)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("api", [Latpath, LegacyLatpath])
def test_prices_are_optimal(kind, api):
    rng = np.random.default_rng([KINDS.index(kind), 3])
    checked = 0
    while checked < 15:
        form = random_form(rng, kind)
        model = pyomo_model(form)
        model.dual = pyo.Suffix(direction=pyo.Suffix.IMPORT)
        model.rc = pyo.Suffix(direction=pyo.Suffix.IMPORT)
        solution = routing.solve(compile_model(model))
        if solution.status != "optimal" or solution.report.prices != "true":
            continue
        api().solve(model)
        form = compile_model(model)
        variables, rows = form.col_names.components, form.row_names.components
        check_prices(
            form,
            np.array([variable.value for variable in variables]),
            np.array([model.dual[row] for row in rows]),
            np.array([model.rc[variable] for variable in variables]),
        )
        checked += 1


# --- small models that have been answered wrongly ------------------------------------------

INF, PI, ROOT = math.inf, math.pi, math.sqrt(2)
HARD = {
    # Read as fractions, entries such as pi become whole numbers of 12 digits, whose prices are
    # smaller than any tolerance.
    "irrational rows": LinearForm.from_arrays(
        [[-2 * PI, 3 * PI, 0], [0, -1, 0], [-ROOT, -3 * ROOT, -ROOT]],
        row_lower=[-INF, -INF, -3],
        row_upper=[4, 3, INF],
        col_lower=[0, -1, -1],
        col_upper=[1, 2, 0],
        cost=[-1.5812806894500164, 0.10162441188198697, -0.8996629966872232],
        sense="max",
    ),
    "irrational rows in branch and bound": LinearForm.from_arrays(
        [[-PI, -2 * PI, 3 * PI, -3 * PI, 0], [3 * ROOT, -ROOT, 0, 2 * ROOT, -ROOT]],
        row_lower=[-6, 0],
        row_upper=[-6, INF],
        col_lower=[0, 0, -2, -2, 0],
        col_upper=[1, 3, -1, -1, 2],
        cost=[0.07489506715109093, 0.78549477543, -0.91987390259, 1.80442862455, -0.01781389],
        offset=-1,
        integer=[True, True, True, False, True],
    ),
    "a price of one half": LinearForm.from_arrays(
        [[0, -3, -3, 0, 1]],
        row_lower=-4,
        row_upper=INF,
        col_lower=[0, 0, 1, 0, -1],
        col_upper=[2, 3, 1, 1, 2],
        cost=[2, -4, 0, 4, 0],
        offset=1,
    ),
    "a plan in fractions": LinearForm.from_arrays(
        [[-2, -2, 2, 0], [-3, 2, 0, 3], [2, -1, 0, 2]],
        row_lower=[-3, 4, -2],
        row_upper=[INF, 5, 1],
        col_lower=[-INF, 1, -2, -1],
        col_upper=[3, 4, INF, INF],
        cost=[1, -5, 0, -2],
        offset=-2,
        sense="max",
        integer=[True, True, False, True],
    ),
}


@pytest.mark.parametrize("name", HARD)
@pytest.mark.parametrize("solve", [by_current, by_legacy])
def test_hard_models(solve, name):
    form = HARD[name]
    assert agree(solve(pyomo_model(form)), solve_exactly(form))
    solution = routing.solve(form)
    if solution.report.prices == "true":
        check_prices(form, solution.x, solution.row_dual, solution.reduced_cost)


# --- close calls ----------------------------------------------------------------------------


def crew_plan(rng, size: int, grain: float) -> tuple[LinearForm, list[tuple[int, ...]]]:
    """Turners to caves, where all plans cost nearly the same.

    Adding a number to all costs of a turner or of a cave adds the same to every plan, so large
    numbers can hide differences of one `grain`.
    """
    base = np.add.outer(rng.integers(10**8, 10**9, size), rng.integers(10**8, 10**9, size))
    cost = base * grain + rng.integers(0, 4, (size, size)) * grain
    return assignment(cost), list(itertools.permutations(range(size)))


@pytest.mark.parametrize("grain", [1.0, 2.0**-30])
@pytest.mark.parametrize("api", [Latpath, LegacyLatpath])
def test_plans_that_differ_in_the_tenth_digit(grain, api):
    rng = np.random.default_rng(11)
    for _ in range(6):
        form, plans = crew_plan(rng, 4, grain)
        cost = form.cost.reshape(4, 4)
        totals = [sum(Fraction(cost[i, j]) for i, j in enumerate(plan)) for plan in plans]
        best = min(totals)
        second = min(total for total in totals if total > best)
        assert 0 < (second - best) / best < Fraction(1, 10**9)
        model = pyomo_model(form)
        api().solve(model)
        found = sum(Fraction(form.cost[j]) for j in range(16) if model.x[j].value == 1)
        assert found == best


@pytest.mark.parametrize("api", [Latpath, LegacyLatpath])
def test_close_calls_by_branch_and_bound(api):
    # A triangle of pairwise conflicts: the relaxation takes half of each.
    form = triangle(cost=[10**9, 10**9 + 1, 10**9 - 1], sense="max")
    model = pyomo_model(form)
    results = api().solve(model, rel_gap=0, abs_gap=0)
    assert [model.x[j].value for j in range(3)] == [0, 1, 0]
    if api is Latpath:
        assert results.extra_info.route == "highs"
        assert results.incumbent_objective == 10**9 + 1

"""One suite of models through both interfaces, beside Pyomo's own `highs`.

Each case says what must come out. `highs` is asked too: it must agree, or be less sure
(infeasible or unbounded; unknown for an empty model).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import pyomo.environ as pyo
import pytest
from plugin_models import QUIET, route, termination
from pyomo.contrib.solver.common.factory import SolverFactory as CurrentFactory
from pyomo.contrib.solver.common.results import SolutionStatus, TerminationCondition

import pyomo_latpath.plugin  # noqa: F401  (registers the solver)

OPTIMAL = TerminationCondition.convergenceCriteriaSatisfied
INFEASIBLE = TerminationCondition.provenInfeasible
UNBOUNDED = TerminationCondition.unbounded
UNSURE = (TerminationCondition.infeasibleOrUnbounded, TerminationCondition.unknown)

APIS = {"current": CurrentFactory, "legacy": pyo.SolverFactory}


@dataclass(frozen=True)
class Case:
    """A model, its outcome, and the route where it matters."""

    build: Callable[[pyo.ConcreteModel], None]
    outcome: TerminationCondition
    objective: float | None = None
    route: str | None = None


CASES: dict[str, Case] = {}


def case(outcome, objective=None, route=None):
    def enter(build):
        CASES[build.__name__] = Case(build, outcome, objective, route)
        return build

    return enter


@case(OPTIMAL, 1.5)
def continuous(m):
    m.milk = pyo.Var(bounds=(0, 2))
    m.cream = pyo.Var(bounds=(0, None))
    m.fat = pyo.Constraint(expr=m.milk + 2 * m.cream >= 3)
    m.cost = pyo.Objective(expr=0.5 * m.milk + m.cream)


@case(OPTIMAL, 27, "path")
def assignment(m):
    hours = [[9, 8, 7], [10, 9, 12], [11, 12, 12]]
    m.turns = pyo.Var(range(3), range(3), domain=pyo.Binary)
    m.once = pyo.Constraint(range(3), rule=lambda m, i: sum(m.turns[i, j] for j in range(3)) == 1)
    m.cave = pyo.Constraint(range(3), rule=lambda m, j: sum(m.turns[i, j] for i in range(3)) == 1)
    m.hours = pyo.Objective(
        expr=sum(hours[i][j] * m.turns[i, j] for i in range(3) for j in range(3))
    )


@case(OPTIMAL, 26, "path")
def constant_in_the_objective(m):
    assignment(m)
    m.hours.set_value(m.hours.expr - 1)


@case(OPTIMAL, 5, "path")
def intervals(m):
    shifts = [(0, 3, 4), (2, 5, 3), (4, 6, 1), (0, 6, 9), (3, 6, 1)]
    m.work = pyo.Var(range(len(shifts)), domain=pyo.NonNegativeIntegers)
    m.staffed = pyo.Constraint(
        range(6),
        rule=lambda m, hour: (
            sum(m.work[k] for k, (a, b, _) in enumerate(shifts) if a <= hour < b) >= 1
        ),
    )
    m.wages = pyo.Objective(expr=sum(c * m.work[k] for k, (_, _, c) in enumerate(shifts)))


@case(OPTIMAL, 14, "highs")
def knapsack(m):
    m.take = pyo.Var(range(3), domain=pyo.Binary)
    m.room = pyo.Constraint(expr=3 * m.take[0] + 4 * m.take[1] + 5 * m.take[2] <= 9)
    m.worth = pyo.Objective(expr=5 * m.take[0] + 6 * m.take[1] + 8 * m.take[2], sense=pyo.maximize)


@case(OPTIMAL, 14 - 27, "split")
def two_worlds(m):
    m.left, m.right = pyo.Block(), pyo.Block()
    assignment(m.left)
    knapsack(m.right)
    m.left.hours.deactivate()
    m.right.worth.deactivate()
    m.both = pyo.Objective(expr=m.right.worth.expr - m.left.hours.expr, sense=pyo.maximize)


@case(OPTIMAL, -3)
def ranges_and_free_columns(m):
    m.x = pyo.Var(domain=pyo.Integers)
    m.y = pyo.Var(domain=pyo.Integers)
    m.sum = pyo.Constraint(expr=(-4, m.x + m.y, 9))
    m.gap = pyo.Constraint(expr=(-2, m.x - m.y, 2))
    m.low = pyo.Objective(expr=m.x)


@case(OPTIMAL, 7)
def rounding_cuts(m):
    m.x = pyo.Var(range(2), domain=pyo.NonNegativeIntegers)
    m.even = pyo.Constraint(expr=2 * m.x[0] + 2 * m.x[1] <= 15)
    m.more = pyo.Objective(expr=m.x[0] + m.x[1], sense=pyo.maximize)


@case(OPTIMAL, 3.5)
def mixed(m):
    m.vans = pyo.Var(domain=pyo.Integers, bounds=(0, 9))
    m.litres = pyo.Var(bounds=(0, 4.5))
    m.full = pyo.Constraint(expr=m.litres <= m.vans)
    m.need = pyo.Constraint(expr=m.litres >= 2.5)
    m.cost = pyo.Objective(expr=m.vans + 0.2 * m.litres)


@case(OPTIMAL, 6)
def fixed_columns(m):
    m.x = pyo.Var(range(3), domain=pyo.Integers, bounds=(0, 9))
    m.product = pyo.Constraint(expr=m.x[0] * m.x[1] >= 5)
    m.rest = pyo.Constraint(expr=m.x[2] <= 3)
    m.cost = pyo.Objective(expr=m.x[0] + m.x[2] + m.x[1])
    m.x[1].fix(2)
    m.x[2].fix(1)


@case(OPTIMAL, -4)
def no_constraints(m):
    m.x = pyo.Var(range(3), domain=pyo.Integers, bounds=(-2, 2.9))
    m.low = pyo.Objective(expr=m.x[0] - m.x[1] + 0 * m.x[2])


@case(OPTIMAL, 7)
def constant_objective(m):
    m.x = pyo.Var(bounds=(0, 2))
    m.row = pyo.Constraint(expr=m.x >= 1)
    m.goal = pyo.Objective(expr=7)


@case(OPTIMAL)
def no_objective(m):
    m.x = pyo.Var(domain=pyo.Binary)
    m.row = pyo.Constraint(expr=m.x >= 1)


@case(OPTIMAL, 2)
def zero_coefficients(m):
    m.weight = pyo.Param(initialize=0, mutable=True)
    m.x = pyo.Var(range(2), bounds=(2, 5))
    m.row = pyo.Constraint(expr=m.x[0] + m.weight * m.x[1] >= 1)
    m.goal = pyo.Objective(expr=m.x[0] + m.weight * m.x[1])


@case(OPTIMAL, 3)
def no_columns(m):
    m.goal = pyo.Objective(expr=3)


@case(OPTIMAL, 30)
def decimals(m):
    m.x = pyo.Var(range(3), domain=pyo.NonNegativeIntegers, bounds=(None, 10))
    m.third = pyo.Constraint(expr=m.x[0] / 3 + m.x[1] / 3 == 20 / 3)
    m.tenth = pyo.Constraint(expr=0.1 * m.x[0] + 0.2 * m.x[2] == 0.1 * 10 + 0.2 * 10)
    m.goal = pyo.Objective(expr=pyo.quicksum(m.x.values()))


@case(INFEASIBLE)
def crossed_bounds(m):
    m.x = pyo.Var(bounds=(3, 2))
    m.goal = pyo.Objective(expr=m.x)


@case(INFEASIBLE)
def no_whole_number_between(m):
    m.x = pyo.Var(domain=pyo.Integers, bounds=(0.2, 0.8))
    m.goal = pyo.Objective(expr=m.x)


@case(INFEASIBLE)
def odd_sum(m):
    m.x = pyo.Var(range(2), domain=pyo.Integers)
    m.odd = pyo.Constraint(expr=2 * m.x[0] + 2 * m.x[1] == 3)
    m.goal = pyo.Objective(expr=m.x[0])


@case(INFEASIBLE)
def too_few_wheels(m):
    assignment(m)
    m.rest = pyo.Constraint(expr=sum(m.turns[0, j] + m.turns[1, j] for j in range(3)) <= 1)


@case(INFEASIBLE)
def triangle_of_pairs(m):
    m.x = pyo.Var(range(3), domain=pyo.Binary)
    m.pair = pyo.Constraint(range(3), rule=lambda m, i: m.x[i] + m.x[(i + 1) % 3] == 1)
    m.goal = pyo.Objective(expr=m.x[0])


@case(INFEASIBLE)
def violated_constant(m):
    m.stock = pyo.Param(initialize=2, mutable=True)
    m.x = pyo.Var(bounds=(0, 1))
    m.never = pyo.Constraint(expr=m.stock >= 3)
    m.goal = pyo.Objective(expr=m.x)


@case(INFEASIBLE)
def violated_when_fixed(m):
    m.x = pyo.Var(range(2), bounds=(0, 5))
    m.row = pyo.Constraint(expr=m.x[0] >= 3)
    m.goal = pyo.Objective(expr=m.x[1])
    m.x[0].fix(2)


@case(INFEASIBLE)
def infeasible_though_endless(m):
    m.x = pyo.Var(range(2), domain=pyo.NonNegativeIntegers)
    m.y = pyo.Var(domain=pyo.Integers, bounds=(0, 1))
    m.half = pyo.Constraint(expr=4 * m.y == 2)
    m.goal = pyo.Objective(expr=m.x[0] + m.x[1] + m.y, sense=pyo.maximize)


@case(UNBOUNDED)
def endless_line(m):
    m.x = pyo.Var(range(2))
    m.row = pyo.Constraint(expr=m.x[0] - m.x[1] <= 3)
    m.goal = pyo.Objective(expr=m.x[0] + m.x[1], sense=pyo.maximize)


@case(UNBOUNDED)
def endless_whole_numbers(m):
    m.x = pyo.Var(range(2), domain=pyo.NonNegativeIntegers)
    m.row = pyo.Constraint(expr=2 * m.x[0] - 3 * m.x[1] <= 3)
    m.goal = pyo.Objective(expr=-m.x[0])


@case(UNBOUNDED)
def endless_beside_a_knapsack(m):
    knapsack(m)
    m.x = pyo.Var(domain=pyo.NonNegativeIntegers)
    m.worth.set_value(m.worth.expr + m.x)


def build(name: str) -> pyo.ConcreteModel:
    model = pyo.ConcreteModel()
    CASES[name].build(model)
    return model


@pytest.mark.parametrize("api", APIS)
@pytest.mark.parametrize("name", CASES)
def test_outcome(name, api):
    expected, model = CASES[name], build(name)
    results = APIS[api]("latpath").solve(model, rel_gap=0, **QUIET)
    assert termination(results) is expected.outcome
    if api == "current" and expected.outcome is not OPTIMAL:
        assert results.solution_status is SolutionStatus.noSolution
        assert results.incumbent_objective is None
    assert all(v.value is None for v in model.component_data_objects(pyo.Var) if not v.fixed)


@pytest.mark.parametrize("api", APIS)
@pytest.mark.parametrize("name", [name for name in CASES if CASES[name].outcome is OPTIMAL])
def test_plan(name, api):
    expected, model = CASES[name], build(name)
    results = APIS[api]("latpath").solve(model, rel_gap=0)
    if expected.route is not None:
        assert route(results) == expected.route
    if expected.objective is not None:
        goal = next(model.component_data_objects(pyo.Objective, active=True))
        assert pyo.value(goal) == pytest.approx(expected.objective, abs=1e-9)
        if api == "current":
            assert results.incumbent_objective == pytest.approx(expected.objective, abs=1e-9)
            assert results.objective_bound == pytest.approx(expected.objective, abs=1e-6)
    for variable in model.component_data_objects(pyo.Var):
        assert variable.value in variable.domain
        assert (variable.lb or -1e9) - 1e-9 <= variable.value <= (variable.ub or 1e9) + 1e-9
    for constraint in model.component_data_objects(pyo.Constraint, active=True):
        body = pyo.value(constraint.body)
        assert constraint.lb is None or body >= constraint.lb - 1e-9
        assert constraint.ub is None or body <= constraint.ub + 1e-9


@pytest.mark.parametrize("name", CASES)
def test_highs_agrees_or_is_less_sure(name):
    expected, model = CASES[name], build(name)
    results = CurrentFactory("highs").solve(model, rel_gap=0, **QUIET)
    assert results.termination_condition in (expected.outcome, *UNSURE)
    if results.termination_condition is OPTIMAL:
        assert results.incumbent_objective == pytest.approx(expected.objective)


def test_every_outcome_has_cases():
    assert {case.outcome for case in CASES.values()} == {OPTIMAL, INFEASIBLE, UNBOUNDED}

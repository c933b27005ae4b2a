"""From the variables' current values, through both of Pyomo's solver interfaces."""

from __future__ import annotations

import pyomo.environ as pyo
import pytest
from pyomo.contrib.solver.common.results import SolutionStatus, TerminationCondition

import pyomo_latpath as latpath
from pyomo_latpath.plugin import LatpathConfig, LegacyLatpath

HOURS = {("anna", "alp"): 5, ("anna", "dorf"): 3, ("beat", "alp"): 9, ("beat", "dorf"): 1}


def keepers(**values):
    """Two keepers for two caves each; today both go up to the alp."""
    model = pyo.ConcreteModel()
    model.go = pyo.Var(HOURS, domain=pyo.Binary)
    model.one = pyo.Constraint(
        ["anna", "beat"],
        rule=lambda m, keeper: m.go[keeper, "alp"] + m.go[keeper, "dorf"] == 1,
    )
    model.hours = pyo.Objective(expr=pyo.quicksum(h * model.go[pair] for pair, h in HOURS.items()))
    for keeper, cave in HOURS:
        model.go[keeper, cave].value = 1 if cave == values.get(keeper, "alp") else 0
    return model


def test_moves_stand_in_the_report():
    model = keepers()
    results = latpath.plugin.Latpath().solve(model, warmstart=True)
    moves = results.extra_info.route_report["moves"]
    assert [move["columns"] for move in moves] == [
        ["go[beat,alp]", "go[beat,dorf]"],
        ["go[anna,alp]", "go[anna,dorf]"],
    ]
    assert [move["gain"] for move in moves] == [8, 2]
    assert pyo.value(model.hours) == 4
    results = latpath.plugin.Latpath().solve(model)
    assert results.extra_info.route_report["moves"] == []


def test_max_moves_loads_the_plan_reached():
    model = keepers()
    results = latpath.plugin.Latpath().solve(model, warmstart=True, max_moves=1)
    assert results.termination_condition == TerminationCondition.iterationLimit
    assert results.solution_status == SolutionStatus.feasible
    assert (results.incumbent_objective, results.objective_bound) == (6, 4)
    assert model.go["beat", "dorf"].value == 1
    assert pyo.value(model.hours) == 6
    assert "stopped after 1 of 2 moves" in results.extra_info.message
    assert len(results.extra_info.route_report["further_moves"]) == 1
    results = latpath.plugin.Latpath().solve(model, warmstart=True, max_moves=1)
    assert results.solution_status == SolutionStatus.optimal


def test_max_moves_in_the_legacy_interface():
    model = keepers()
    solver = LegacyLatpath()
    results = solver.solve(model, warmstart=True, max_moves=1)
    assert results.solver.termination_condition == pyo.TerminationCondition.maxIterations
    assert pyo.value(model.hours) == 6
    # An option of one call is none of the next.
    pyo.assert_optimal_termination(solver.solve(model))
    assert pyo.value(model.hours) == 4


def test_values_that_are_no_plan_are_repaired_or_refused():
    model = keepers(beat="nowhere")
    solver = latpath.plugin.Latpath()
    with pytest.raises(latpath.StartError, match=r"'one\[beat\]' is at 0"):
        solver.solve(model, warmstart=True, max_moves=1)
    results = solver.solve(model, warmstart=True, max_moves=0, repair_start=True)
    report = results.extra_info.route_report
    assert len(report["repair"]["columns"]) == 1
    assert sum(variable.value for variable in model.go.values()) == 2
    model.go["beat", "alp"].value = None
    with pytest.raises(latpath.StartError, match=r"'go\[beat,alp\]' has no value"):
        solver.solve(model, warmstart=True, max_moves=1)


@pytest.mark.parametrize("options", [{"max_moves": 1}, {"repair_start": True}])
def test_without_a_start_there_is_nothing_to_move_from(options):
    with pytest.raises(ValueError, match="warmstart=True"):
        latpath.plugin.Latpath().solve(keepers(), **options)


def test_options_are_checked():
    config = LatpathConfig()
    assert (config.max_moves, config.repair_start) == (None, False)
    with pytest.raises(ValueError, match="max_moves"):
        config.max_moves = -1


def test_a_model_is_solved_from_names():
    model = keepers()
    start = {variable.name: variable.value for variable in model.go.values()}
    solution = latpath.solve(model, start=start, max_moves=1)
    assert solution.report.moves[0].names == ("go[beat,alp]", "go[beat,dorf]")
    trade = latpath.stay_or_change(model, start)
    assert [point.objective for point in trade.points] == [4, 6, 14]

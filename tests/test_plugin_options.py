"""The Pyomo solver's options, those of HiGHS behind it, and the start it is given."""

from __future__ import annotations

import numpy as np
import pyomo.environ as pyo
import pytest
from plugin_models import (
    CHEAPEST,
    COST,
    FULLEST,
    PLUGINS,
    QUIET,
    both,
    deliveries,
    fake,
    overbooked,
    route,
    termination,
    vans,
)
from pyomo.contrib.solver.common.results import SolutionStatus, TerminationCondition
from pyomo.contrib.solver.common.util import NoFeasibleSolutionError

from pyomo_latpath.highs import OptionError
from pyomo_latpath.plugin import Latpath, LegacyLatpath

#: Today's deliveries, which could cost less.
TODAY = dict(zip(COST, (2, 1, 3, 2, 2, 2), strict=True))

ASKED = {
    "samples": 5,
    "rel_gap": 0.25,
    "abs_gap": 0.5,
    "threads": 2,
    "seed": 7,
    "fixed_plan_prices": True,
}


@both
def test_options_reach_the_router_once(monkeypatch, api):
    asked = fake(monkeypatch)
    solver = PLUGINS[api]()
    solver.solve(deliveries(), **ASKED, solver_options={"mip_max_nodes": 3})
    assert {name: asked[name] for name in ASKED} == ASKED
    assert asked["highs_options"] == {"mip_max_nodes": 3}
    assert asked["log"] is None
    assert asked["compile_seconds"] > 0
    solver.solve(deliveries())
    plain = dict(asked)
    PLUGINS[api]().solve(deliveries())
    same = set(plain) - {"compile_seconds"}
    assert {name: plain[name] for name in same} == {name: asked[name] for name in same}


@both
def test_options_can_be_set_for_good(monkeypatch, api):
    asked = fake(monkeypatch)
    solver = PLUGINS[api](seed=3, solver_options={"mip_max_nodes": 3})
    solver.config.rel_gap = 0.1
    solver.config.solver_options["mip_abs_gap"] = 2.0
    for _ in range(2):
        solver.solve(deliveries(), samples=4)
        assert (asked["seed"], asked["rel_gap"], asked["samples"]) == (3, 0.1, 4)
        assert asked["highs_options"] == {"mip_max_nodes": 3, "mip_abs_gap": 2.0}


@pytest.mark.parametrize("name", ["options", "solver_options"])
def test_legacy_options_of_a_call_are_forgotten(monkeypatch, name):
    asked = fake(monkeypatch)
    solver = pyo.SolverFactory("latpath", options={"mip_max_nodes": 3})
    solver.options["mip_abs_gap"] = 2.0
    solver.solve(deliveries(), **{name: {"mip_rel_gap": 0.5}}, timelimit=30)
    assert asked["highs_options"] == {"mip_max_nodes": 3, "mip_abs_gap": 2.0, "mip_rel_gap": 0.5}
    assert 25 < asked["time_limit"] < 30
    solver.solve(deliveries())
    assert asked["highs_options"] == {"mip_max_nodes": 3, "mip_abs_gap": 2.0}
    assert asked["time_limit"] is None


def test_a_call_that_raises_leaves_no_trace(monkeypatch):
    solver = LegacyLatpath()
    with pytest.raises(NoFeasibleSolutionError):
        solver.solve(overbooked(), timelimit=30, options={"mip_max_nodes": 3}, tee=False)
    asked = fake(monkeypatch)
    solver.solve(deliveries())
    assert asked["time_limit"] is None
    assert asked["highs_options"] == {}


@both
@pytest.mark.parametrize(
    ("ours", "highs", "expected"), [(30, None, 30), (None, 20, 20), (30, 20, 20), (0, 20, 0)]
)
def test_time_limits_of_all_kinds_are_one_budget(monkeypatch, api, ours, highs, expected):
    asked = fake(monkeypatch)
    options = {} if highs is None else {"time_limit": highs}
    PLUGINS[api]().solve(deliveries(), time_limit=ours, solver_options=options)
    # What compiling took is part of the budget.
    assert expected - 5 < asked["time_limit"] <= max(0, expected - asked["compile_seconds"])
    assert "time_limit" not in asked["highs_options"]


@both
def test_no_time_left(api):
    results = PLUGINS[api]().solve(vans(), time_limit=0, **QUIET)
    assert termination(results) is TerminationCondition.maxTimeLimit


@both
def test_a_limit_on_nodes_is_no_proof(api):
    rng = np.random.default_rng(1)
    model = pyo.ConcreteModel()
    model.take = pyo.Var(range(40), domain=pyo.Binary)
    weight, worth = rng.integers(10, 60, (5, 40)), rng.integers(10, 60, 40)
    model.room = pyo.Constraint(
        range(5),
        rule=lambda m, i: (
            sum(int(weight[i, j]) * m.take[j] for j in range(40)) <= int(weight[i].sum()) // 3
        ),
    )
    model.profit = pyo.Objective(
        expr=sum(int(worth[j]) * model.take[j] for j in range(40)), sense=pyo.maximize
    )
    results = PLUGINS[api]().solve(
        model, solver_options={"mip_max_nodes": 1}, raise_exception_on_nonoptimal_result=False
    )
    assert route(results) == "highs"
    assert termination(results) is TerminationCondition.iterationLimit
    if api == "current":
        assert results.solution_status is SolutionStatus.feasible
        assert results.objective_bound > results.incumbent_objective
        assert results.incumbent_objective == pyo.value(model.profit)


@both
def test_options_that_highs_does_not_take_are_named(api):
    model = deliveries()
    for options in ({"mip_max_wheels": 3}, {"mip_max_nodes": "many"}):
        with pytest.raises(OptionError, match=next(iter(options))):
            PLUGINS[api]().solve(model, solver_options=options)
    assert all(variable.value is None for variable in model.send.values())


def test_unknown_keywords_are_refused():
    with pytest.raises(ValueError, match="wheels"):
        Latpath().solve(deliveries(), wheels=3)
    with pytest.raises(TypeError, match="wheels"):
        LegacyLatpath().solve(deliveries(), wheels=3)


def test_legacy_keywords_behave_as_in_the_wrapper(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    solver = LegacyLatpath()
    with pytest.raises(ValueError, match="not both"):
        solver.solve(deliveries(), options={}, solver_options={"mip_max_nodes": 3})
    for keywords in ({"suffixes": ["dual"]}, {"logfile": "log"}, {"solver_io": "python"}):
        with pytest.raises(NotImplementedError):
            solver.solve(deliveries(), **keywords)
    results = solver.solve(
        deliveries(),
        False,
        True,
        solnfile="plan.sol",
        timelimit=30,
        report_timing=False,
        symbolic_solver_labels=True,
        threads=1,
        rel_gap=0.0,
        time_limit=30,
        warmstart=False,
    )
    pyo.assert_optimal_termination(results)
    assert list(tmp_path.iterdir()) == []


@both
def test_accepted_without_effect(api, tmp_path):
    solver = PLUGINS[api](symbolic_solver_labels=True, working_dir=str(tmp_path))
    assert termination(solver.solve(deliveries())) is TerminationCondition(0)
    assert list(tmp_path.iterdir()) == []


# --- a start --------------------------------------------------------------------------------


@both
def test_the_current_values_are_the_start(monkeypatch, api):
    asked = fake(monkeypatch)
    model = deliveries()
    for pair, variable in model.send.items():
        variable.value = TODAY[pair]
    PLUGINS[api]().solve(model, warmstart=True)
    # Columns are in the order of the objective, and so are the costs.
    assert asked["start"].tolist() == [TODAY[pair] for pair in COST]
    PLUGINS[api]().solve(model)
    assert asked["start"] is None


@both
@pytest.mark.parametrize(
    ("value", "reason"), [(None, "has no value"), (0.5, "whole number"), (0, "not feasible")]
)
def test_a_start_that_is_no_plan_is_passed_over(api, caplog, value, reason):
    model = deliveries()
    for variable in model.send.values():
        variable.set_value(value, skip_validation=True)
    results = PLUGINS[api]().solve(model, warmstart=True)
    assert termination(results) is TerminationCondition(0)
    assert "without a start" in caplog.text
    assert reason in caplog.text
    assert pyo.value(model.cost) == CHEAPEST


@both
def test_a_warm_start_finds_the_optimum(api):
    model = deliveries()
    for pair, variable in model.send.items():
        variable.value = TODAY[pair]
    results = PLUGINS[api]().solve(model, warmstart=True)
    assert termination(results) is TerminationCondition(0)
    assert pyo.value(model.cost) == CHEAPEST
    model = vans()
    for variable in model.take.values():
        variable.value = 0
    PLUGINS[api]().solve(model, warmstart=True)
    assert pyo.value(model.profit) == FULLEST

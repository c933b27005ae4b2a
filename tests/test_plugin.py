"""The Pyomo solver: registration, options, results, prices and refusals, in both interfaces."""

from __future__ import annotations

import configparser
import datetime
import io
import logging
import math
import pickle
from pathlib import Path

import numpy as np
import pyomo.environ as pyo
import pytest
from pyomo.common.timing import HierarchicalTimer
from pyomo.contrib.solver.common.base import Availability
from pyomo.contrib.solver.common.factory import SolverFactory as CurrentFactory
from pyomo.contrib.solver.common.results import (
    SolutionStatus,
    TerminationCondition,
    legacy_solver_status_map,
    legacy_termination_condition_map,
)
from pyomo.contrib.solver.common.util import (
    NoDualsError,
    NoFeasibleSolutionError,
    NoOptimalSolutionError,
    NoReducedCostsError,
    NoSolutionError,
)
from pyomo.opt import SolverStatus

from pyomo_latpath import plugin, routing
from pyomo_latpath.forms.from_pyomo import UnsupportedModelError
from pyomo_latpath.highs import OptionError
from pyomo_latpath.integrality.finding import Finding
from pyomo_latpath.plugin import Latpath, LegacyLatpath
from pyomo_latpath.solution import STATUSES, RouteReport, Solution

CAVES = ("north", "south")
TOWNS = ("alm", "bruck", "dorf")
COST = {
    ("north", "alm"): 4,
    ("north", "bruck"): 7,
    ("north", "dorf"): 3,
    ("south", "alm"): 2,
    ("south", "bruck"): 5,
    ("south", "dorf"): 8,
}
STOCK = {"north": 6, "south": 9}
ORDERS = {"alm": 4, "bruck": 3, "dorf": 5}
#: Cheapest: north sends 5 to dorf, south 4 to alm and 3 to bruck.
CHEAPEST = 5 * 3 + 4 * 2 + 3 * 5

#: The most that a van's load brings: the two heavier ones.
FULLEST = 14
#: Today's deliveries, which could cost less.
TODAY = dict(zip(COST, (2, 1, 3, 2, 2, 2), strict=True))

PLUGINS = {"current": Latpath, "legacy": LegacyLatpath}
both = pytest.mark.parametrize("api", PLUGINS)


def deliveries() -> pyo.ConcreteModel:
    """Wheels from ripening caves to market towns at the least cost: a transport problem."""
    model = pyo.ConcreteModel()
    model.send = pyo.Var(CAVES, TOWNS, domain=pyo.NonNegativeIntegers)
    model.stock = pyo.Constraint(
        CAVES, rule=lambda m, cave: sum(m.send[cave, town] for town in TOWNS) <= STOCK[cave]
    )
    model.order = pyo.Constraint(
        TOWNS, rule=lambda m, town: sum(m.send[cave, town] for cave in CAVES) >= ORDERS[town]
    )
    model.cost = pyo.Objective(expr=sum(COST[pair] * model.send[pair] for pair in COST))
    return model


def vans() -> pyo.ConcreteModel:
    """A van's best load: a knapsack, whose relaxation is fractional at the optimum."""
    model = pyo.ConcreteModel()
    model.take = pyo.Var(range(3), domain=pyo.Binary)
    model.room = pyo.Constraint(expr=3 * model.take[0] + 4 * model.take[1] + 5 * model.take[2] <= 9)
    model.profit = pyo.Objective(
        expr=5 * model.take[0] + 6 * model.take[1] + 8 * model.take[2], sense=pyo.maximize
    )
    return model


def overbooked() -> pyo.ConcreteModel:
    """More wheels ordered than the caves hold."""
    model = deliveries()
    model.feast = pyo.Constraint(expr=sum(model.send[cave, "alm"] for cave in CAVES) >= 9)
    return model


def endless() -> pyo.ConcreteModel:
    """Nothing limits the wheels sold."""
    model = pyo.ConcreteModel()
    model.sold = pyo.Var(range(2), domain=pyo.NonNegativeIntegers)
    model.pairs = pyo.Constraint(expr=model.sold[0] - model.sold[1] <= 3)
    model.profit = pyo.Objective(expr=pyo.quicksum(model.sold.values()), sense=pyo.maximize)
    return model


def priced(model: pyo.ConcreteModel) -> pyo.ConcreteModel:
    model.dual = pyo.Suffix(direction=pyo.Suffix.IMPORT)
    model.rc = pyo.Suffix(direction=pyo.Suffix.IMPORT)
    return model


def termination(results) -> TerminationCondition:
    """The current interface's word, from the results of either."""
    if hasattr(results, "termination_condition"):
        return results.termination_condition
    legacy = results.solver.termination_condition
    return next(word for word, old in legacy_termination_condition_map.items() if old == legacy)


def route(results) -> str:
    return results.extra_info.route if hasattr(results, "extra_info") else results.solver.route


def message(results) -> str:
    if hasattr(results, "extra_info"):
        return results.extra_info.message
    return results.solver.message


def check_prices(model: pyo.ConcreteModel) -> None:
    """Signs of minimisation, complementary slackness and strong duality, on a `deliveries`."""
    total = 0.0
    for constraint in model.component_data_objects(pyo.Constraint, active=True):
        price, body = model.dual[constraint], pyo.value(constraint.body)
        if constraint.ub is not None:
            assert price <= 1e-9
        if constraint.lb is not None:
            assert price >= -1e-9
        side = constraint.ub if constraint.ub is not None else constraint.lb
        assert price * (body - side) == pytest.approx(0, abs=1e-9)
        total += price * side
    for pair, variable in model.send.items():
        expected = COST[pair] - model.dual[model.stock[pair[0]]] - model.dual[model.order[pair[1]]]
        assert model.rc[variable] == pytest.approx(expected, abs=1e-9)
        assert model.rc[variable] >= -1e-9
        assert model.rc[variable] * variable.value == pytest.approx(0, abs=1e-9)
    assert total == pytest.approx(pyo.value(model.cost))


def fake(monkeypatch, **changes):
    """Let the router answer with a made-up solution; return what it was asked."""
    asked: dict[str, object] = {}

    def solve(form, **kwds):
        asked.clear()
        asked.update(kwds)
        m, n = form.shape
        report = RouteReport(
            changes.get("route", "highs"),
            changes.get("why", "as the test wants it"),
            Finding((), 0, 0),
            None,
            "tolerance",
            {"compile": 0.0, "assess": 0.0, "solve": 0.0, "proof": 0.0},
            prices=changes.get("prices", "none"),
            blame=changes.get("blame", ()),
        )
        x = np.zeros(n) if changes.get("x", True) else None
        return Solution(
            status=changes.get("status", "optimal"),
            x=x,
            objective=math.nan if x is None else 0.0,
            bound=changes.get("bound", math.nan),
            row_dual=changes.get("row_dual", np.full(m, math.nan)),
            reduced_cost=changes.get("reduced_cost", np.full(n, math.nan)),
            ray=None,
            farkas=None,
            report=report,
        )

    monkeypatch.setattr(routing, "solve", solve)
    return asked


# --- registration ---------------------------------------------------------------------------


def test_both_factories_know_the_solver():
    assert type(CurrentFactory("latpath")) is Latpath
    legacy = pyo.SolverFactory("latpath")
    assert type(legacy) is LegacyLatpath
    assert legacy.warm_start_capable()
    assert legacy.available()
    assert legacy.license_is_valid()


def test_availability_and_version():
    setup = configparser.ConfigParser()
    setup.read(Path(__file__).parents[1] / "setup.cfg")
    solver = Latpath()
    assert solver.available() is Availability.FullLicense
    assert ".".join(map(str, solver.version())) == setup["metadata"]["version"]
    assert not solver.is_persistent()


@both
def test_solvers_can_be_pickled_with_their_options(api):
    solver = PLUGINS[api](threads=1, solver_options={"mip_max_nodes": 5})
    solver.config.tee = True
    copy = pickle.loads(pickle.dumps(solver))
    assert type(copy) is PLUGINS[api]
    assert copy.config.threads == 1
    assert copy.config.solver_options.value() == {"mip_max_nodes": 5}
    assert termination(copy.solve(deliveries())) is TerminationCondition(0)


def test_legacy_results_can_be_pickled():
    results = pickle.loads(pickle.dumps(LegacyLatpath().solve(deliveries())))
    assert results.solver.route == "path"


@both
def test_as_a_context(api):
    with PLUGINS[api]() as solver:
        assert termination(solver.solve(deliveries())) is TerminationCondition(0)


# --- what a solve tells ---------------------------------------------------------------------


@both
def test_route_and_report(api):
    model = deliveries()
    results = PLUGINS[api]().solve(model)
    assert route(results) == "path"
    assert "path" in message(results)
    assert pyo.value(model.cost) == CHEAPEST
    branched = PLUGINS[api]().solve(vans())
    assert route(branched) == "highs"


def test_the_current_results_carry_everything():
    model = deliveries()
    before = datetime.datetime.now(datetime.timezone.utc)
    timer = HierarchicalTimer()
    results = Latpath().solve(model, timer=timer)
    assert results.solution_status is SolutionStatus.optimal
    assert results.incumbent_objective == results.objective_bound == CHEAPEST
    assert results.solver_name == "latpath"
    assert results.solver_version == Latpath().version()
    assert results.solver_config.timer is timer
    report = results.extra_info.route_report
    assert type(report) is dict
    assert report["verdict"] == "proven"
    assert report["route"] == results.extra_info.route
    assert before <= results.timing_info.start_timestamp
    stages = [results.timing_info.get(f"{stage}_time").value() for stage in report["seconds"]]
    assert 0 < sum(stages) <= results.timing_info.wall_time + 0.05
    assert timer.get_num_calls("compile") == timer.get_num_calls("solve") == 1


def test_the_legacy_results_carry_everything():
    results = LegacyLatpath().solve(deliveries())
    assert results.solver.status == SolverStatus.ok
    assert results.solver.name == "latpath"
    assert results.problem.lower_bound == results.problem.upper_bound == CHEAPEST
    assert results.problem.sense == pyo.minimize
    assert results.timing_info["wall_time"] > 0
    pyo.assert_optimal_termination(results)


@both
def test_the_route_is_logged_and_shown(api, caplog, capsys):
    with caplog.at_level(logging.INFO, logger="pyomo_latpath"):
        PLUGINS[api]().solve(deliveries())
    lines = [record.getMessage() for record in caplog.records if record.name == "pyomo_latpath"]
    assert len(lines) == 1
    assert "route path" in lines[0]
    assert capsys.readouterr().out == ""
    PLUGINS[api]().solve(deliveries(), tee=True)
    assert lines[0] in capsys.readouterr().out


@both
def test_tee_takes_streams_and_loggers(api, caplog):
    stream = io.StringIO()
    with caplog.at_level(logging.INFO, logger="dairy"):
        PLUGINS[api]().solve(vans(), tee=[stream, logging.getLogger("dairy")])
    assert "route highs" in stream.getvalue()
    assert any(record.name == "dairy" for record in caplog.records)
    assert stream.getvalue().count("\n") > 3, "HiGHS's own lines come too"


def test_the_log_is_kept():
    results = Latpath().solve(deliveries())
    assert "route path" in results.solver_log


def test_report_timing_prints_the_timer(capsys):
    LegacyLatpath().solve(deliveries(), report_timing=True)
    assert "compile" in capsys.readouterr().out


@both
def test_values_are_whole_floats(api):
    for build in (deliveries, vans):
        model = build()
        PLUGINS[api]().solve(model)
        for variable in model.component_data_objects(pyo.Var):
            assert type(variable.value) is float
            assert variable.value == round(variable.value)
            assert math.copysign(1, variable.value) == 1


@both
def test_stale_flags_and_fixed_variables(api):
    model = deliveries()
    model.idle = pyo.Var(initialize=3)
    model.send["north", "alm"].fix(1)
    PLUGINS[api]().solve(model)
    assert model.idle.stale
    assert model.idle.value == 3
    assert model.send["north", "alm"].value == 1
    free = [v for v in model.send.values() if not v.fixed]
    assert not any(variable.stale for variable in free)
    assert pyo.value(model.cost) == CHEAPEST - 2 + 4
    # As with other solvers: once a loaded value is changed by hand, the others are outdated.
    free[0].value = 2
    assert not free[0].stale
    assert all(variable.stale for variable in free[1:])


@both
def test_without_an_objective_there_is_no_objective_value(api):
    model = deliveries()
    model.del_component(model.cost)
    results = PLUGINS[api]().solve(model)
    assert termination(results) is TerminationCondition(0)
    assert all(pyo.value(constraint.body) is not None for constraint in model.order.values())
    if api == "current":
        assert results.incumbent_objective is None
        assert results.objective_bound is None


# --- outcomes -------------------------------------------------------------------------------


def test_every_status_has_its_place_in_every_map():
    assert set(plugin.TERMINATION) == set(STATUSES)
    for condition in plugin.TERMINATION.values():
        assert condition in legacy_termination_condition_map
        assert condition in legacy_solver_status_map


@pytest.mark.parametrize(
    ("status", "with_plan"),
    [(s, plan) for s in STATUSES for plan in (True, False) if plan or s != "optimal"],
)
def test_each_status_maps_to_results(monkeypatch, status, with_plan):
    fake(monkeypatch, status=status, x=with_plan, bound=-1.0)
    quiet = {"raise_exception_on_nonoptimal_result": False, "load_solutions": False}
    results = Latpath().solve(deliveries(), **quiet)
    assert results.termination_condition is plugin.TERMINATION[status]
    expected = SolutionStatus.noSolution
    if with_plan:
        expected = SolutionStatus.optimal if status == "optimal" else SolutionStatus.feasible
    assert results.solution_status is expected
    assert results.incumbent_objective == (0 if with_plan else None)
    assert results.objective_bound == -1
    assert results.solution_loader.get_number_of_solutions() == int(with_plan)
    legacy = LegacyLatpath().solve(deliveries(), load_solutions=False)
    assert (legacy.solver.status == SolverStatus.ok) == (status == "optimal")
    assert len(legacy.solution) == int(with_plan)


@pytest.mark.parametrize("status", [status for status in STATUSES if status != "optimal"])
def test_outcomes_that_raise(monkeypatch, status):
    fake(monkeypatch, status=status, x=False)
    with pytest.raises(NoOptimalSolutionError, match="as the test wants it"):
        Latpath().solve(deliveries())
    with pytest.raises(NoOptimalSolutionError, match="as the test wants it"):
        LegacyLatpath().solve(deliveries(), raise_exception_on_nonoptimal_result=True)
    with pytest.raises(NoFeasibleSolutionError, match="as the test wants it"):
        Latpath().solve(deliveries(), raise_exception_on_nonoptimal_result=False)
    with pytest.raises(NoFeasibleSolutionError, match="as the test wants it"):
        LegacyLatpath().solve(deliveries())


@both
def test_a_plan_found_in_time_is_loaded(monkeypatch, api):
    fake(monkeypatch, status="time_limit", x=True)
    model = deliveries()
    results = PLUGINS[api]().solve(model, raise_exception_on_nonoptimal_result=False)
    assert termination(results) is TerminationCondition.maxTimeLimit
    assert all(variable.value == 0 for variable in model.send.values())


@both
def test_infeasible_is_proven_and_the_rows_are_named(api):
    model = overbooked()
    with pytest.raises((NoOptimalSolutionError, NoFeasibleSolutionError)) as caught:
        PLUGINS[api]().solve(model)
    needed = {"stock[north]", "stock[south]", "order[bruck]", "order[dorf]", "feast"}
    assert all(name in str(caught.value) for name in needed)
    assert "order[alm]" not in str(caught.value)
    assert all(variable.value is None for variable in model.send.values())
    results = PLUGINS[api]().solve(
        model, load_solutions=False, raise_exception_on_nonoptimal_result=False
    )
    assert termination(results) is TerminationCondition.provenInfeasible
    assert "feast" in message(results)


@both
def test_unbounded_is_told_apart(api):
    quiet = {"raise_exception_on_nonoptimal_result": False, "load_solutions": False}
    results = PLUGINS[api]().solve(endless(), **quiet)
    assert termination(results) is TerminationCondition.unbounded
    broken = endless()
    broken.never = pyo.Constraint(expr=broken.sold[0] <= -1)
    results = PLUGINS[api]().solve(broken, **quiet)
    assert termination(results) is TerminationCondition.provenInfeasible


@both
def test_a_violated_constraint_without_variables_is_named(api):
    model = deliveries()
    model.cheese = pyo.Param(initialize=2, mutable=True)
    model.open = pyo.Constraint(expr=model.cheese >= 3)
    with pytest.raises((NoOptimalSolutionError, NoFeasibleSolutionError), match="open"):
        PLUGINS[api]().solve(model)


def test_long_conflicts_are_cut_short_in_messages_only(monkeypatch):
    fake(monkeypatch, status="infeasible", x=False, blame=tuple("abcdefghij"))
    with pytest.raises(NoOptimalSolutionError, match=r"h, i, j\)"):
        Latpath().solve(deliveries())
    names = tuple(f"row{i}" for i in range(25))
    fake(monkeypatch, status="infeasible", x=False, blame=names)
    with pytest.raises(NoOptimalSolutionError, match="row9 and 15 more") as caught:
        Latpath().solve(deliveries())
    assert "row10" not in str(caught.value)
    quiet = {"raise_exception_on_nonoptimal_result": False, "load_solutions": False}
    results = Latpath().solve(deliveries(), **quiet)
    assert results.extra_info.route_report["blame"] == list(names)


# --- options --------------------------------------------------------------------------------

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
    quiet = {"raise_exception_on_nonoptimal_result": False, "load_solutions": False}
    results = PLUGINS[api]().solve(vans(), time_limit=0, **quiet)
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


# --- loading --------------------------------------------------------------------------------


def test_the_loader_gives_all_or_what_is_wanted():
    model = deliveries()
    results = Latpath().solve(model, load_solutions=False)
    loader = results.solution_loader
    assert all(variable.value is None for variable in model.send.values())
    one, other = model.send["north", "dorf"], model.send["south", "alm"]
    assert loader.get_vars()[one] == 5
    assert list(loader.get_vars([other]).items()) == [(other, 4)]
    loader.load_vars([one])
    assert (one.value, other.value) == (5, None)
    loader.load_vars()
    assert other.value == 4
    assert set(loader.get_duals([model.order["alm"]])) == {model.order["alm"]}
    assert len(loader.get_duals()) == 5
    assert len(loader.get_reduced_costs()) == 6
    assert list(loader.get_reduced_costs([one])) == [one]
    stranger = deliveries()
    with pytest.raises(KeyError, match="no part"):
        loader.get_vars([stranger.send["north", "dorf"]])
    with pytest.raises(KeyError, match="no part"):
        loader.get_duals([stranger.order["alm"]])
    assert loader.get_solution_ids() == [None]


def test_a_loader_without_a_plan_refuses(monkeypatch):
    quiet = {"raise_exception_on_nonoptimal_result": False, "load_solutions": False}
    loader = Latpath().solve(overbooked(), **quiet).solution_loader
    assert loader.get_number_of_solutions() == 0
    for read in (loader.get_vars, loader.load_vars):
        with pytest.raises(NoSolutionError):
            read()
    with pytest.raises(NoDualsError):
        loader.get_duals()
    with pytest.raises(NoReducedCostsError):
        loader.get_reduced_costs()


@both
def test_suffixes_are_filled(api):
    model = priced(deliveries())
    PLUGINS[api]().solve(model)
    check_prices(model)


def test_suffixes_without_loading():
    model = priced(deliveries())
    results = Latpath().solve(model, load_solutions=False)
    assert not model.dual
    results.solution_loader.load_solution()
    check_prices(model)
    model = priced(deliveries())
    results = LegacyLatpath().solve(model, load_solutions=False)
    assert not model.dual
    assert all(variable.value is None for variable in model.send.values())
    model.solutions.load_from(results)
    check_prices(model)


@both
def test_maximisation_turns_the_signs(api):
    model = pyo.ConcreteModel()
    model.sold = pyo.Var(range(2), bounds=(0, 9), domain=pyo.Integers)
    model.milk = pyo.Constraint(expr=(1, model.sold[0] + model.sold[1], 7))
    model.least = pyo.Constraint(expr=model.sold[1] >= 2)
    model.profit = pyo.Objective(expr=3 * model.sold[0] + model.sold[1], sense=pyo.maximize)
    priced(model)
    PLUGINS[api]().solve(model)
    assert model.dual[model.milk] == 3
    assert model.dual[model.least] == -2
    assert model.rc[model.sold[0]] == model.rc[model.sold[1]] == 0
    model.profit.sense = pyo.minimize
    PLUGINS[api]().solve(model)
    assert model.dual[model.least] + model.rc[model.sold[1]] == 1


@both
def test_rows_without_variables_have_the_price_zero(api):
    model = priced(deliveries())
    model.fixed = pyo.Constraint(expr=model.send["north", "alm"] <= 5)
    model.send["north", "alm"].fix(0)
    PLUGINS[api]().solve(model)
    assert model.dual[model.fixed] == 0


@both
def test_suffixes_on_a_sub_block_and_others(api):
    model = pyo.ConcreteModel()
    model.valley = pyo.Block()
    model.valley.transfer_attributes_from(deliveries())
    model.valley.dual = pyo.Suffix(direction=pyo.Suffix.IMPORT)
    model.priority = pyo.Suffix(direction=pyo.Suffix.EXPORT)
    model.priority[model.valley.send["north", "alm"]] = 3
    PLUGINS[api]().solve(model)
    assert len(model.valley.dual) == 5
    assert list(model.priority.values()) == [3]


@both
def test_a_model_without_rows_has_no_prices_to_miss(api, caplog):
    model = pyo.ConcreteModel()
    model.wheels = pyo.Var(domain=pyo.Binary)
    model.cost = pyo.Objective(expr=2 * model.wheels)
    PLUGINS[api]().solve(priced(model))
    assert not model.dual
    assert model.rc[model.wheels] == 2
    assert "suffix" not in caplog.text


@both
@pytest.mark.parametrize("load", [True, False])
def test_a_dual_suffix_never_makes_a_solve_raise(api, load, caplog):
    model = priced(vans())
    model.dual[model.room] = 99.0
    results = PLUGINS[api]().solve(model, load_solutions=load)
    if not load:
        if api == "legacy":
            model.solutions.load_from(results)
        else:
            results.solution_loader.load_solution()
    assert pyo.value(model.profit) == FULLEST
    assert not model.dual
    assert not model.rc
    lines = [record.getMessage() for record in caplog.records if "suffix" in record.getMessage()]
    assert len(lines) == 2
    assert all("fixed_plan_prices" in line for line in lines)


@both
def test_prices_of_the_fixed_plan_on_request(api):
    model = priced(vans())
    model.hours = pyo.Var(bounds=(0, None))
    model.work = pyo.Constraint(expr=model.hours >= pyo.quicksum(model.take.values()) + 1)
    model.profit.set_value(model.profit.expr - model.hours)
    results = PLUGINS[api]().solve(model, fixed_plan_prices=True)
    # An hour more is an hour paid; what the van holds does not matter while its load is held.
    assert model.dual[model.work] == pytest.approx(-1 if model.work.lb is not None else 1)
    assert model.rc[model.hours] == 0
    if api == "current":
        assert results.extra_info.prices == "fixed plan"


@both
def test_blocks_without_prices_are_left_out(monkeypatch, api):
    model = priced(deliveries())
    prices = np.array([1.0, math.nan, 2.0, 3.0, math.nan])
    fake(monkeypatch, route="split", row_dual=prices)
    PLUGINS[api]().solve(model)
    rows = [*model.stock.values(), *model.order.values()]
    assert {row.name: price for row, price in model.dual.items()} == {
        row.name: price for row, price in zip(rows, prices, strict=True) if price == price
    }
    assert not model.rc
    if api == "current":
        loader = Latpath().solve(model, load_solutions=False).solution_loader
        with pytest.raises(NoDualsError):
            loader.get_duals([rows[1]])


# --- refusals -------------------------------------------------------------------------------


@both
def test_models_that_are_not_linear_are_left_alone(api):
    model = deliveries()
    model.send["north", "alm"].value = 2
    model.odd = pyo.Constraint(expr=model.send["north", "alm"] ** 2 <= 3)
    with pytest.raises(UnsupportedModelError, match="odd"):
        PLUGINS[api]().solve(model)
    assert model.send["north", "alm"].value == 2
    assert model.odd.active


@both
def test_a_model_without_variables(api):
    model = pyo.ConcreteModel()
    model.goal = pyo.Objective(expr=3)
    results = PLUGINS[api]().solve(model)
    assert termination(results) is TerminationCondition(0)
    if api == "current":
        assert results.incumbent_objective == 3

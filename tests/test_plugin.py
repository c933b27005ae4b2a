"""The Pyomo solver: registration, what a solve tells, outcomes and refusals, both interfaces."""

from __future__ import annotations

import configparser
import datetime
import io
import logging
import math
import pickle
from pathlib import Path

import pyomo.environ as pyo
import pytest
from plugin_models import (
    CHEAPEST,
    PLUGINS,
    QUIET,
    both,
    deliveries,
    endless,
    fake,
    message,
    overbooked,
    route,
    termination,
    vans,
)
from pyomo.common.timing import HierarchicalTimer
from pyomo.contrib.solver.common.base import Availability
from pyomo.contrib.solver.common.factory import SolverFactory as CurrentFactory
from pyomo.contrib.solver.common.results import (
    SolutionStatus,
    TerminationCondition,
    legacy_solver_status_map,
    legacy_termination_condition_map,
)
from pyomo.contrib.solver.common.util import NoFeasibleSolutionError, NoOptimalSolutionError
from pyomo.opt import SolverStatus

from pyomo_latpath import plugin
from pyomo_latpath.forms.from_pyomo import UnsupportedModelError
from pyomo_latpath.plugin import Latpath, LegacyLatpath
from pyomo_latpath.solution import STATUSES

# --- registration ---------------------------------------------------------------------------


def test_both_factories_know_the_solver():
    assert type(CurrentFactory("latpath")) is Latpath
    legacy = pyo.SolverFactory("latpath")
    assert type(legacy) is LegacyLatpath
    assert legacy.warm_start_capable()
    assert legacy.available()
    assert legacy.license_is_valid()


@both
@pytest.mark.parametrize("wrong", [5, None, "vans.mps"])
def test_what_is_no_model_is_refused(api, wrong):
    with pytest.raises(ValueError, match=f"type {type(wrong).__name__} is no model"):
        PLUGINS[api]().solve(wrong)


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
    results = Latpath().solve(deliveries(), **QUIET)
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
    results = PLUGINS[api]().solve(model, **QUIET)
    assert termination(results) is TerminationCondition.provenInfeasible
    assert "feast" in message(results)


@both
def test_unbounded_is_told_apart(api):
    results = PLUGINS[api]().solve(endless(), **QUIET)
    assert termination(results) is TerminationCondition.unbounded
    broken = endless()
    broken.never = pyo.Constraint(expr=broken.sold[0] <= -1)
    results = PLUGINS[api]().solve(broken, **QUIET)
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
    results = Latpath().solve(deliveries(), **QUIET)
    assert results.extra_info.route_report["blame"] == list(names)


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

"""The Pyomo solver `latpath`, in both of Pyomo's solver interfaces.

Importing this module registers it: `pyomo.environ.SolverFactory('latpath')` gives the legacy
interface, `pyomo.contrib.solver.common.factory.SolverFactory('latpath')` the current one.

Signs of prices (suffixes `dual` and `rc`) are those of Pyomo's `highs`: the change of the
objective, in the model's own sense, per unit that the side or bound is raised.

=====================================  ============  ============
prices                                 minimisation  maximisation
=====================================  ============  ============
row at its lower side (`>=`)           >= 0          <= 0
row at its upper side (`<=`)           <= 0          >= 0
equality row                           any           any
row between its sides                  0             0
column at its lower bound              >= 0          <= 0
column at its upper bound              <= 0          >= 0
column between its bounds              0             0
=====================================  ============  ============

A range has one price, that of the side it is at. Where the optimum has several sets of prices,
one of them is given.
"""

from __future__ import annotations

import contextlib
import datetime
import logging
import math
import time
from collections.abc import Iterator
from typing import Any, cast

from pyomo.common.config import Bool, ConfigValue, NonNegativeInt
from pyomo.common.timing import HierarchicalTimer
from pyomo.contrib.solver.common.base import Availability, LegacySolverWrapper, SolverBase
from pyomo.contrib.solver.common.config import BranchAndBoundConfig
from pyomo.contrib.solver.common.factory import SolverFactory
from pyomo.contrib.solver.common.results import Results, SolutionStatus, TerminationCondition
from pyomo.contrib.solver.common.util import NoFeasibleSolutionError, NoOptimalSolutionError
from pyomo.core.base import NumericLabeler, Objective, SymbolMap
from pyomo.core.staleflag import StaleFlagManager

from . import today
from .forms.from_pyomo import compile_model
from .forms.linear_form import ComponentNames, LinearForm
from .solution import Solution
from .solution_loader import LatpathSolutionLoader, store_legacy
from .starts import StartError

logger = logging.getLogger("pyomo_latpath")

VERSION = (0, 1, 0)

#: Pyomo's word for each of `solution.STATUSES`.
TERMINATION = {
    "optimal": TerminationCondition.convergenceCriteriaSatisfied,
    "infeasible": TerminationCondition.provenInfeasible,
    "unbounded": TerminationCondition.unbounded,
    "time_limit": TerminationCondition.maxTimeLimit,
    "limit": TerminationCondition.iterationLimit,
    "interrupted": TerminationCondition.interrupted,
    "error": TerminationCondition.error,
}

#: So many conflicting rows are named in a message; all of them stand in the route report.
NAMED = 10


class LatpathConfig(BranchAndBoundConfig):  # type: ignore[misc]
    """What a solve can be asked: Pyomo's common options, and those of `today.solve`.

    `solver_options` are HiGHS options, as with Pyomo's `highs`; they rule the branch and bound
    route. `time_limit` holds for all stages together. `symbolic_solver_labels` and `working_dir`
    are accepted and change nothing: names are always Pyomo's, and no files are written.
    """

    def __init__(
        self,
        description: str | None = None,
        doc: str | None = None,
        implicit: bool = False,
        implicit_domain: Any = None,
        visibility: int = 0,
    ) -> None:
        super().__init__(description, doc, implicit, implicit_domain, visibility)
        for name, domain, default, description in (
            ("samples", NonNegativeInt, None, "Vertices to look at where no certificate is found."),
            ("seed", NonNegativeInt, 0, "Seed of that sampling."),
            (
                "warmstart",
                Bool,
                False,
                "Start from the variables' current values, and tell the moves that lead from "
                "them to the best plan. Values that are no plan are passed over, with a warning.",
            ),
            (
                "max_moves",
                NonNegativeInt,
                None,
                "With warmstart: load the plan after so many of these moves, the ones with the "
                "largest gains. Where that is not the best plan, the termination condition is "
                "iterationLimit, which here is no reason to raise an exception; incumbent and "
                "bound tell what is left. Values that are no plan are an error then.",
            ),
            (
                "repair_start",
                Bool,
                False,
                "With warmstart: replace values that are no plan by the nearest plan.",
            ),
            (
                "fixed_plan_prices",
                Bool,
                False,
                "Where branch and bound was needed, give the prices of the linear program that "
                "is left when the integer variables are held at the plan found.",
            ),
        ):
            self.declare(name, ConfigValue(default, domain, description))


class Latpath(SolverBase):  # type: ignore[misc]
    """Solves linear and mixed-integer linear models; as a linear program where it can prove that.

    Examples
    --------
    >>> import pyomo.environ as pyo
    >>> model = pyo.ConcreteModel()
    >>> model.wheels = pyo.Var(["brie", "tomme"], domain=pyo.NonNegativeIntegers)
    >>> model.shelf = pyo.Constraint(expr=pyo.quicksum(model.wheels.values()) <= 7)
    >>> model.profit = pyo.Objective(expr=model.wheels["brie"], sense=pyo.maximize)
    >>> results = Latpath().solve(model)
    >>> model.wheels["brie"].value, results.extra_info.route
    (7.0, 'path')
    """

    name = "latpath"
    CONFIG = LatpathConfig()

    def __reduce__(self) -> Any:
        # Pyomo's configuration objects do not always pickle; streams and timers never do.
        options = self.config.value()
        plain = set(self.CONFIG) - {"tee", "timer"}
        return _restored, (type(self), {name: options[name] for name in plain})

    def available(self) -> Availability:
        """HiGHS comes with the installation, so the solver is always there."""
        return Availability.FullLicense

    def version(self) -> tuple[int, ...]:
        """The version of pyomo_latpath."""
        return VERSION

    def solve(self, model: Any, **kwds: Any) -> Results:
        """Solve a Pyomo model.

        Parameters
        ----------
        model : BlockData
        **kwds
            Any of the options in `LatpathConfig`, for this call only.

        Returns
        -------
        pyomo.contrib.solver.common.results.Results
            With the route in `extra_info.route`, the whole report in
            `extra_info.route_report` and one sentence in `extra_info.message`.

        Raises
        ------
        UnsupportedModelError, ValueError
            As `compile_model`.
        NoOptimalSolutionError, NoFeasibleSolutionError
            As Pyomo's `highs`, with the diagnosis in the message.
        """
        _refuse_what_is_no_model(model)
        started, tick = datetime.datetime.now(datetime.timezone.utc), time.perf_counter()
        config = self.config(value=kwds, preserve_implicit=True)
        if config.timer is None:
            config.timer = HierarchicalTimer()
        log = _Log(config.tee)
        StaleFlagManager.mark_all_as_stale()
        with _timed(config.timer, "compile"):
            form = compile_model(model)
        with _timed(config.timer, "solve"):
            solution = _route(form, config, log, time.perf_counter() - tick)
        log.tell(f"latpath took the route {_message(solution)}")
        results = _results(model, form, solution)
        results.solver_name, results.solver_version = self.name, self.version()
        results.solver_config = config
        results.solver_log = log.text()
        _refuse_unwanted(solution, config)
        if config.load_solutions:
            with _timed(config.timer, "load"):
                results.solution_loader.load_solution()
        results.timing_info.start_timestamp = started
        results.timing_info.wall_time = time.perf_counter() - tick
        results.timing_info.timer = config.timer
        return results


class LegacyLatpath(LegacySolverWrapper, Latpath):  # type: ignore[misc]
    """The same solver behind Pyomo's legacy interface."""

    #: Keywords of `solve` beyond those of the legacy interface itself.
    OWN_KEYWORDS = (
        "threads",
        "rel_gap",
        "abs_gap",
        "time_limit",
        "samples",
        "seed",
        "warmstart",
        "max_moves",
        "repair_start",
        "fixed_plan_prices",
    )

    def solve(self, model: Any, *args: Any, **kwds: Any) -> Any:
        """Solve a Pyomo model; takes what `LegacySolverWrapper.solve` takes, and OWN_KEYWORDS."""
        _refuse_what_is_no_model(model)
        own = {name: kwds.pop(name) for name in self.OWN_KEYWORDS if name in kwds}
        # The wrapper writes the options of a call into the configuration, where they would rule
        # the next call too, so each call gets a copy. Plain assignment would copy the values
        # only: the wrapper has redefined it.
        kept = self.config
        self.__dict__["config"] = kept(value=own, preserve_implicit=True)
        try:
            return super().solve(model, *args, **kwds)
        finally:
            self.__dict__["config"] = kept

    def warm_start_capable(self) -> bool:
        """Whether `warmstart=True` is understood."""
        return True

    def _map_results(self, model: Any, results: Results) -> Any:
        legacy, solution = super()._map_results(model, results)
        legacy.solver.name = results.solver_name
        legacy.solver.message = results.extra_info.message
        legacy.solver.route = results.extra_info.route
        return legacy, solution

    def _solution_handler(
        self, load_solutions: bool, model: Any, results: Results, legacy: Any, solution: Any
    ) -> Any:
        # The wrapper's own handler raises without duals and loses reduced costs.
        loader = results.solution_loader
        solution.symbol_map = symbol_map = SymbolMap()
        symbol_map.default_labeler = NumericLabeler("x")
        legacy._smap_id = None
        if not load_solutions and loader.get_number_of_solutions():
            store_legacy(loader, model, solution, symbol_map.getSymbol)
            legacy.solution.insert(solution)
            legacy._smap_id = id(symbol_map)
            legacy._smap = symbol_map
        legacy.timing_info = results.timing_info.value()
        return legacy


SolverFactory.register(
    "latpath", doc="Linear and mixed-integer models, as linear programs where that is proven"
)(Latpath, LegacyLatpath)


def _refuse_what_is_no_model(model: Any) -> None:
    if not hasattr(model, "component_data_objects"):
        kind = type(model).__name__
        raise ValueError(f"something of type {kind} is no model; give a Pyomo model")


def _restored(kind: type[Latpath], options: dict[str, Any]) -> Latpath:
    return kind(**options)


class _Log:
    """Collects the lines of a solve and repeats them on the streams that `tee` names."""

    def __init__(self, streams: list[Any]) -> None:
        self.streams = streams
        self.lines: list[str] = []

    def __call__(self, line: str) -> None:
        self.lines.append(line)
        for stream in self.streams:
            stream.write(line + "\n")

    def tell(self, line: str) -> None:
        logger.info("%s", line)
        self(line)

    def text(self) -> str:
        return "".join(line + "\n" for line in self.lines)


@contextlib.contextmanager
def _timed(timer: HierarchicalTimer, stage: str) -> Iterator[None]:
    timer.start(stage)
    try:
        yield
    finally:
        timer.stop(stage)


def _route(form: LinearForm, config: LatpathConfig, log: _Log, compile_seconds: float) -> Solution:
    """Call the router with what the configuration asks."""
    options = config.solver_options.value()
    # HiGHS's option of the same name is in wide use; the budget is one for all stages.
    limits = (config.time_limit, options.pop("time_limit", None))
    limit = min((seconds for seconds in limits if seconds is not None), default=None)
    asked: dict[str, Any] = {
        "samples": config.samples,
        "time_limit": None if limit is None else max(0.0, limit - compile_seconds),
        "rel_gap": config.rel_gap,
        "abs_gap": config.abs_gap,
        "threads": config.threads,
        "seed": config.seed,
        "highs_options": options,
        "fixed_plan_prices": config.fixed_plan_prices,
        "log": log if config.tee else None,
        "compile_seconds": compile_seconds,
    }
    if not config.warmstart:
        if config.max_moves is not None or config.repair_start:
            raise ValueError("max_moves and repair_start need warmstart=True")
        return today.solve(form, **asked)
    moves = {"max_moves": config.max_moves, "repair_start": config.repair_start}
    try:
        return today.solve(form, start=_values(form), **moves, **asked)
    except StartError as reason:
        if config.max_moves is not None:
            raise
        # Other Pyomo solvers pass over a start they cannot use, so a solve does not fail for it.
        logger.warning("solving without a start: %s", reason)
        return today.solve(form, **asked)


def _values(form: LinearForm) -> list[float]:
    """The variables' current values."""
    variables = cast(ComponentNames, form.col_names).components
    values = [variable.value for variable in variables]
    if None in values:
        raise StartError(f"variable {variables[values.index(None)].name!r} has no value")
    return values


def _message(solution: Solution) -> str:
    """Route, reason and, for a conflict, the rows in it."""
    report = solution.report
    message = f"{report.route}, {report.why}"
    if report.blame:
        more = len(report.blame) - NAMED
        message += "; these conflict"
        message += ", and none of them is needless: " if report.blame_is_minimal else ": "
        message += ", ".join(report.blame[:NAMED]) + (f" and {more} more" if more > 0 else "")
    return message


def _results(model: Any, form: LinearForm, solution: Solution) -> Results:
    """Write a solution as Pyomo's `Results`."""
    results = Results()
    results.solution_loader = LatpathSolutionLoader(model, form, solution)
    results.termination_condition = TERMINATION[solution.status]
    if solution.status == "optimal":
        results.solution_status = SolutionStatus.optimal
    elif solution.x is not None:
        results.solution_status = SolutionStatus.feasible
    objectives = model.component_data_objects(Objective, active=True, descend_into=True)
    has_objective = next(objectives, None) is not None
    if has_objective and solution.x is not None:
        results.incumbent_objective = solution.objective
    if has_objective and not math.isnan(solution.bound):
        results.objective_bound = solution.bound
    report = solution.report
    results.extra_info.route = report.route
    results.extra_info.message = _message(solution)
    results.extra_info.prices = report.prices
    results.extra_info.route_report = report.to_dict()
    for stage, seconds in report.seconds.items():
        setattr(results.timing_info, f"{stage}_time", seconds)
    return results


def _refuse_unwanted(solution: Solution, config: LatpathConfig) -> None:
    """Raise what Pyomo's `highs` raises for this outcome, and say why it came to it."""
    ended = {
        "infeasible": "The model is infeasible",
        "unbounded": "The model is unbounded",
        "time_limit": "The time limit ended the solve",
        "limit": "A limit set among HiGHS's options ended the solve",
        "interrupted": "The solve was interrupted",
    }.get(solution.status, f"The solve ended with status {solution.status!r}")
    if solution.report.further_moves and solution.status == "limit":
        return  # stopped where max_moves asked for it
    diagnosis = f"{ended} (route {_message(solution)}). "
    if solution.status != "optimal" and config.raise_exception_on_nonoptimal_result:
        raise NoOptimalSolutionError(diagnosis + NoOptimalSolutionError.default_message)
    if config.load_solutions and solution.x is None:
        raise NoFeasibleSolutionError(diagnosis + NoFeasibleSolutionError.default_message)

"""Small Pyomo models for the solver's tests, and what its results say in both interfaces."""

from __future__ import annotations

import math

import numpy as np
import pyomo.environ as pyo
import pytest
from pyomo.contrib.solver.common.results import (
    TerminationCondition,
    legacy_termination_condition_map,
)

from pyomo_latpath import routing
from pyomo_latpath.integrality.finding import Finding
from pyomo_latpath.plugin import Latpath, LegacyLatpath
from pyomo_latpath.solution import RouteReport, Solution

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

PLUGINS = {"current": Latpath, "legacy": LegacyLatpath}
both = pytest.mark.parametrize("api", PLUGINS)

#: What lets a solve without a plan end without an exception.
QUIET = {"load_solutions": False, "raise_exception_on_nonoptimal_result": False}


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

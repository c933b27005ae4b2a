"""Loading what a solve found: values, prices and suffixes, in both interfaces."""

from __future__ import annotations

import math

import numpy as np
import pyomo.environ as pyo
import pytest
from plugin_models import (
    COST,
    FULLEST,
    PLUGINS,
    QUIET,
    both,
    deliveries,
    fake,
    overbooked,
    priced,
    vans,
)
from pyomo.contrib.solver.common.util import NoDualsError, NoReducedCostsError, NoSolutionError

from pyomo_latpath.plugin import Latpath, LegacyLatpath


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
    loader = Latpath().solve(overbooked(), **QUIET).solution_loader
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

"""Pyomo models that are no linear form: each is refused by the name of what is in the way."""

from __future__ import annotations

import math

import pyomo.environ as pyo
import pyomo.gdp as gdp
import pyomo.mpec as mpec
import pytest
from dairy import SIZES, column, dairy, disjunction, snapshot
from pyomo.contrib.solver.common.util import IncompatibleModelError
from pyomo.network import Arc, Port

from pyomo_latpath.forms.from_pyomo import UnsupportedModelError, compile_model

INF = math.inf


def indicated(model):
    model.early = gdp.Disjunct()
    model.early.rule = pyo.Constraint(expr=model.vans <= 1)
    return "early"


def sos(model):
    model.one = pyo.SOSConstraint(var=model.wheels, sos=1)
    return "one"


def piecewise(model):
    model.cost = pyo.Var()
    model.curve = pyo.Piecewise(
        model.cost,
        model.vans,
        pw_pts=[-1, 2, 4],
        f_rule=[0, 1, 7],
        pw_constr_type="EQ",
        pw_repn="SOS2",
    )
    return r"curve\.SOS2"


def logical(model):
    model.open = pyo.BooleanVar()
    model.rule = pyo.LogicalConstraint(expr=model.open)
    return "rule"


def complementary(model):
    model.pair = mpec.Complementarity(
        expr=mpec.complements(model.vans >= 0, model.wheels["small"] >= 0)
    )
    return "pair"


def unexpanded(model):
    model.out = pyo.Block()
    model.out.port = Port(initialize={"wheels": model.wheels["small"]})
    model.arrive = Port(initialize={"wheels": model.wheels["large"]})
    model.road = Arc(source=model.out.port, destination=model.arrive)
    return "road"


def quadratic(model):
    model.rule = pyo.Constraint(expr=model.vans * model.wheels["small"] <= 3)
    return "rule"


def nonlinear(model):
    model.rule = pyo.Constraint(SIZES, rule=lambda m, size: pyo.log(m.wheels[size] + 1) <= 3)
    return r"rule\[small\]"


def quadratic_objective(model):
    model.profit.set_value(model.vans**2)
    return "profit"


def two_objectives(model):
    model.second = pyo.Objective(expr=model.vans)
    return "'profit', 'second'"


@pytest.mark.parametrize(
    "spoil",
    [
        disjunction,
        indicated,
        sos,
        piecewise,
        logical,
        complementary,
        unexpanded,
        quadratic,
        nonlinear,
        quadratic_objective,
        two_objectives,
    ],
)
def test_what_is_not_linear_is_refused_by_name(spoil):
    model = dairy()
    name = spoil(model)
    before = snapshot(model)
    with pytest.raises(UnsupportedModelError, match=name):
        compile_model(model)
    assert snapshot(model) == before
    assert issubclass(UnsupportedModelError, IncompatibleModelError)


def test_an_abstract_model_is_refused():
    with pytest.raises(UnsupportedModelError, match="not constructed"):
        compile_model(pyo.AbstractModel())


@pytest.mark.parametrize(
    "domain",
    [
        {1, 3, 5},
        {1, 2, 4},
        {1.5, 2.5},
        {"brie"},
        {"brie", 1},
        pyo.RangeSet(0, 10, 2),
        pyo.Any,
        pyo.RangeSet(2, 5, 0) | {0},
    ],
)
def test_other_domains_are_refused_with_the_variable(domain):
    model = pyo.ConcreteModel()
    model.wheels = pyo.Var(["brie"], domain=domain)
    model.goal = pyo.Objective(expr=model.wheels["brie"])
    with pytest.raises(UnsupportedModelError, match=r"wheels\[brie\]"):
        compile_model(model)


@pytest.mark.parametrize("name", ["vans", "wheels[small]"])
def test_a_variable_fixed_at_none_is_named(name):
    model = dairy()
    model.space = pyo.Constraint(expr=model.vans + model.wheels["small"] <= 3)
    model.find_component(name).fixed = True
    with pytest.raises(ValueError, match=r"fixed without a value") as caught:
        compile_model(model)
    assert name in str(caught.value)


@pytest.mark.parametrize("number", [math.nan, INF, -INF])
@pytest.mark.parametrize("place", ["coefficient", "cost", "offset", "side", "bound"])
def test_numbers_that_are_not_finite_are_named(number, place):
    model = dairy()
    model.number = pyo.Param(initialize=number, mutable=True, domain=pyo.Any)
    model.space = pyo.Constraint(
        expr=model.vans + model.wheels["small"] * (model.number if place == "coefficient" else 1)
        <= (model.number if place == "side" else 3)
    )
    if place == "cost":
        model.profit.set_value(model.number * model.vans)
    elif place == "offset":
        model.profit.set_value(model.number + model.vans)
    elif place == "bound":
        model.vans.setub(model.number)
    if number == INF and place in ("side", "bound"):
        form = compile_model(model)
        assert INF in (form.row_upper[0], form.col_upper[column(form, "vans")])
        return
    named = {"coefficient": "space", "cost": "vans", "offset": "constant", "side": "space"}
    with pytest.raises(ValueError, match=named.get(place, "vans")):
        compile_model(model)


def test_a_param_without_a_value_is_named():
    model = dairy()
    model.lost = pyo.Param(mutable=True)
    model.space = pyo.Constraint(expr=model.lost * model.vans <= 3)
    with pytest.raises(ValueError, match="lost") as caught:
        compile_model(model)
    assert "space" in str(caught.value)

"""Compiling Pyomo models: every kind of row, column and domain."""

from __future__ import annotations

import math
import pickle

import numpy as np
import pyomo.environ as pyo
import pytest
from dairy import SIZES, column, dairy, disjunction, snapshot
from hypothesis import given, settings
from hypothesis import strategies as st
from pyomo.common.errors import InfeasibleConstraintException
from pyomo.repn.plugins.standard_form import LinearStandardFormCompiler

from pyomo_latpath.forms.from_pyomo import compile_model
from pyomo_latpath.forms.linear_form import ComponentNames
from pyomo_latpath.routing import solve

INF = math.inf


def entries(form):
    """The matrix as {(row name, column name): coefficient}."""
    coo = form.matrix.tocoo()
    return {
        (form.row_names[i], form.col_names[j]): v
        for i, j, v in zip(coo.row, coo.col, coo.data, strict=True)
    }


def sides(form):
    return {name: (form.row_lower[i], form.row_upper[i]) for i, name in enumerate(form.row_names)}


def test_costs_bounds_and_kinds_are_those_of_the_model():
    model = dairy()
    model.milk = pyo.Var(bounds=(0.5, None))
    model.vat = pyo.Constraint(expr=model.milk >= model.wheels["small"] + 4 * model.wheels["large"])
    form = compile_model(model)
    assert form.sense == "max"
    by_name = {
        name: (form.cost[j], form.col_lower[j], form.col_upper[j], bool(form.integer[j]))
        for j, name in enumerate(form.col_names)
    }
    assert by_name == {
        "wheels[small]": (2, 0, 9, True),
        "wheels[large]": (5, 0, 9, True),
        "vans": (-1, -1, 4, True),
        "milk": (0, 0.5, INF, False),
    }
    low, high = sides(form)["vat"]
    scale = entries(form)["vat", "milk"]
    assert entries(form) == {
        ("vat", "milk"): scale,
        ("vat", "wheels[small]"): -scale,
        ("vat", "wheels[large]"): -4 * scale,
    }
    assert (low, high) == ((0, INF) if scale > 0 else (-INF, 0))


def test_a_range_is_one_row():
    model = dairy()
    model.space = pyo.Constraint(expr=(1, model.vans + model.wheels["small"] + 2, 7))
    form = compile_model(model)
    assert sides(form) == {"space": (-1, 5)}
    assert form.shape == (1, 3)


@pytest.mark.parametrize(
    ("relation", "expected"),
    [
        (lambda body: body <= 3, (-INF, 3)),
        (lambda body: body >= 3, (3, INF)),
        (lambda body: body == 3, (3, 3)),
        (lambda body: body <= INF, (-INF, INF)),
        (lambda body: (-INF, body, 3), (-INF, 3)),
        (lambda body: (-INF, body, INF), (-INF, INF)),
    ],
)
def test_sides(relation, expected):
    model = dairy()
    model.space = pyo.Constraint(expr=relation(model.vans + model.wheels["small"]))
    assert sides(compile_model(model)) == {"space": expected}


def test_constants_move_to_the_sides():
    model = dairy()
    model.space = pyo.Constraint(expr=model.vans + 2 <= model.wheels["small"] + 7)
    form = compile_model(model)
    scale = entries(form)["space", "vans"]
    assert entries(form) == {("space", "vans"): scale, ("space", "wheels[small]"): -scale}
    assert sides(form)["space"] == ((-INF, 5) if scale > 0 else (-5, INF))


def test_mutable_params_are_read_at_every_call():
    model = dairy()
    model.limit = pyo.Param(initialize=3, mutable=True)
    model.space = pyo.Constraint(expr=model.vans <= model.limit)
    model.vans.setub(model.limit + 10)
    first = compile_model(model)
    model.limit, model.price["small"] = 8, 11
    second = compile_model(model)
    assert (sides(first)["space"], sides(second)["space"]) == ((-INF, 3), (-INF, 8))
    small, vans = column(first, "wheels[small]"), column(first, "vans")
    assert (first.cost[small], second.cost[small]) == (2, 11)
    assert (first.col_upper[vans], second.col_upper[vans]) == (13, 18)


def test_fixed_variables_are_numbers():
    model = dairy()
    model.space = pyo.Constraint(expr=3 * model.wheels["small"] + model.wheels["large"] <= 20)
    model.trip = pyo.Constraint(expr=model.vans * model.wheels["large"] >= 4)
    model.share = pyo.Constraint(expr=model.wheels["large"] / model.wheels["small"] <= 2)
    model.wheels["small"].fix(4)
    model.vans.fix(2)
    form = compile_model(model)
    assert list(form.col_names) == ["wheels[large]"]
    assert form.offset == 2 * 4 - 2
    assert entries(form) == {
        ("space", "wheels[large]"): 1,
        ("trip", "wheels[large]"): 2,
        ("share", "wheels[large]"): 0.25,
    }
    assert sides(form) == {"space": (-INF, 8), "trip": (4, INF), "share": (-INF, 2)}


@pytest.mark.parametrize("limit", [1, 3])
def test_a_constraint_without_variables_stays_a_row(limit):
    model = dairy()
    model.stock = pyo.Param(initialize=2, mutable=True)
    model.enough = pyo.Constraint(expr=model.stock >= limit)
    model.trip = pyo.Constraint(expr=model.wheels["small"] >= limit)
    model.wheels["small"].fix(2)
    form = compile_model(model)
    for name in ("enough", "trip"):
        low, high = sides(form)[name]
        assert (low <= 0 <= high) == (limit <= 2)
    assert form.matrix.nnz == 0


def test_deactivated_parts_are_left_out():
    model = dairy()
    model.space = pyo.Constraint(SIZES, rule=lambda m, size: m.wheels[size] <= 5)
    model.gone = pyo.Constraint(expr=model.vans <= 3)
    model.cellar = pyo.Block()
    model.cellar.turns = pyo.Var()
    model.cellar.work = pyo.Constraint(expr=model.cellar.turns >= 1)
    model.cellar.cost = pyo.Objective(expr=model.cellar.turns)
    model.space["large"].deactivate()
    model.gone.deactivate()
    model.cellar.deactivate()
    form = compile_model(model)
    assert list(form.row_names) == ["space[small]"]
    assert "cellar.turns" not in list(form.col_names)


def test_sub_blocks_are_part_of_the_model_and_can_be_compiled_alone():
    model = dairy()

    @model.Block(["north", "south"])
    def cellar(block, place):
        block.turns = pyo.Var(domain=pyo.Binary)
        block.work = pyo.Constraint(expr=block.turns + model.vans <= 2)

    whole = compile_model(model)
    assert {"cellar[north].work", "cellar[south].work"} == set(whole.row_names)
    alone = compile_model(model.cellar["north"])
    assert list(alone.row_names) == ["cellar[north].work"]
    assert set(alone.col_names) == {"cellar[north].turns", "vans"}


def test_variables_of_another_model_and_references():
    home, guest = dairy(), pyo.ConcreteModel()
    guest.seen = pyo.Reference(home.wheels)
    guest.space = pyo.Constraint(expr=guest.seen["small"] + home.vans <= 4)
    form = compile_model(guest)
    assert set(form.col_names) == {"wheels[small]", "vans"}


def test_no_objective_and_a_constant_one():
    model = dairy()
    model.space = pyo.Constraint(expr=model.vans <= 3)
    model.profit.set_value(7)
    constant = compile_model(model)
    assert (constant.offset, constant.cost.tolist(), constant.sense) == (7, [0], "max")
    model.del_component(model.profit)
    none = compile_model(model)
    assert (none.offset, none.cost.tolist(), none.sense) == (0, [0], "min")


def test_variables_that_only_the_objective_mentions():
    form = compile_model(dairy())
    assert form.shape == (0, 3)
    assert form.cost.tolist() == [2, 5, -1]


def test_variables_mentioned_at_zero_are_columns_and_unmentioned_ones_are_not():
    model = dairy()
    model.idle = pyo.Var(["caves", "carts"])
    model.weight = pyo.Param(initialize=0, mutable=True)
    model.space = pyo.Constraint(
        expr=model.vans + model.weight * model.idle["caves"] + model.wheels["small"]
        <= 3 + model.wheels["small"]
    )
    names = list(compile_model(model).col_names)
    assert "idle[caves]" in names
    assert "wheels[small]" in names
    assert "idle[carts]" not in names


def test_an_empty_model_has_no_rows_and_no_columns():
    form = compile_model(pyo.ConcreteModel())
    assert form.shape == (0, 0)


@pytest.mark.parametrize(
    ("domain", "expected"),
    [
        (pyo.Binary, (0, 1, True)),
        (pyo.Integers, (-INF, INF, True)),
        (pyo.NegativeIntegers, (-INF, -1, True)),
        (pyo.PercentFraction, (0, 1, False)),
        (pyo.RangeSet(2, 6), (2, 6, True)),
        ({3, 1, 2}, (1, 3, True)),
        ({2.5}, (2.5, 2.5, False)),
        (pyo.Reals, (-INF, INF, False)),
    ],
)
def test_domains_that_are_intervals(domain, expected):
    model = pyo.ConcreteModel()
    model.wheels = pyo.Var(domain=domain)
    model.goal = pyo.Objective(expr=model.wheels)
    form = compile_model(model)
    assert (form.col_lower[0], form.col_upper[0], bool(form.integer[0])) == expected


@pytest.mark.parametrize("transformation", ["gdp.bigm", "gdp.hull"])
def test_transformed_disjunctions_compile(transformation):
    model = dairy()
    disjunction(model)
    pyo.TransformationFactory(transformation).apply_to(model)
    form = compile_model(model)
    assert {"early.binary_indicator_var", "late.binary_indicator_var"} <= set(form.col_names)


def test_names_lead_back_to_the_components_and_travel_without_them():
    model = dairy()
    model.space = pyo.Constraint(expr=model.vans + model.wheels["small"] <= 3)
    form = compile_model(model)
    assert isinstance(form.row_names, ComponentNames)
    assert form.row_names.components == [model.space]
    assert form.col_names.components[column(form, "vans")] is model.vans
    copy = pickle.loads(pickle.dumps(form))
    assert list(copy.col_names) == list(form.col_names)
    assert not isinstance(copy.col_names, ComponentNames)


def test_compiling_changes_nothing():
    model = dairy()
    model.space = pyo.Constraint(expr=model.vans + model.wheels["small"] <= 3)
    model.vans.value = 2
    model.wheels["large"].fix(1)
    before = snapshot(model)
    compile_model(model)
    assert snapshot(model) == before


RELATIONS = (
    lambda body, low, high: body <= high,
    lambda body, low, high: body >= low,
    lambda body, low, high: body == low,
    lambda body, low, high: (low, body, high),
)


@st.composite
def random_models(draw):
    """A model with ranges, several kinds of variables, and constants on both sides."""
    model = pyo.ConcreteModel()
    number = st.integers(-3, 3)
    count = draw(st.integers(1, 5))
    model.x = pyo.Var(range(count), domain=pyo.Integers, bounds=(-4, 4))
    model.y = pyo.Var()
    unknowns = [*model.x.values(), model.y]
    model.rows = pyo.ConstraintList()
    for _ in range(draw(st.integers(0, 4))):
        body = sum(draw(number) * v for v in unknowns) + unknowns[0] + draw(number)
        side, width = draw(number), draw(st.integers(0, 2))
        model.rows.add(draw(st.sampled_from(RELATIONS))(body, side, side + width))
    model.goal = pyo.Objective(
        expr=sum(draw(number) * v for v in unknowns) + draw(number),
        sense=draw(st.sampled_from([pyo.minimize, pyo.maximize])),
    )
    return model


@settings(max_examples=60, deadline=None)
@given(random_models(), st.lists(st.integers(-2, 2), min_size=6, max_size=6))
def test_rows_and_costs_agree_with_the_expressions_and_with_pyomos_compiler(model, point):
    form = compile_model(model)
    for variable, value in zip(form.col_names.components, point, strict=False):
        variable.value = value
    for variable in model.component_data_objects(pyo.Var):
        variable.set_value(0 if variable.value is None else variable.value)
    x = np.array([variable.value for variable in form.col_names.components], dtype=float)
    assert form.cost @ x + form.offset == pyo.value(model.goal)
    activity = form.matrix @ x
    for i, constraint in enumerate(form.row_names.components):
        # A side less the row's activity is what the constraint has left, however written.
        low = -INF if constraint.lb is None else constraint.lb
        high = INF if constraint.ub is None else constraint.ub
        assert form.row_lower[i] - activity[i] == low - pyo.value(constraint.body)
        assert form.row_upper[i] - activity[i] == high - pyo.value(constraint.body)
    try:
        info = LinearStandardFormCompiler().write(model, mixed_form=True, set_sense=None)
    except InfeasibleConstraintException:
        return  # a violated constant row, which stays a row here
    by_constraint = {id(c): i for i, c in enumerate(form.row_names.components)}
    by_variable = {id(v): j for j, v in enumerate(form.col_names.components)}
    columns = [by_variable[id(v)] for v in info.columns]
    for k, entry in enumerate(info.rows):
        row = np.zeros(form.shape[1])
        row[columns] = info.A.toarray()[k]
        i = by_constraint[id(entry.constraint)]
        assert row.tolist() == form.matrix.toarray()[i].tolist()
        if entry.bound_type >= 0:
            assert form.row_upper[i] == info.rhs[k]
        if entry.bound_type <= 0:
            assert form.row_lower[i] == info.rhs[k]


def test_a_whole_variable_fixed_at_a_fraction_leaves_no_plan():
    model = pyo.ConcreteModel()
    model.x = pyo.Var(range(2), domain=pyo.Binary)
    model.row = pyo.Constraint(expr=model.x[0] + model.x[1] <= 1)
    model.goal = pyo.Objective(expr=model.x[1], sense=pyo.maximize)
    model.x[0].fix(0.5)
    form = compile_model(model)
    assert list(form.col_names) == ["x[1]", "x[0]"]
    assert (form.col_lower[1], form.col_upper[1]) == (0.5, 0.5)
    solution = solve(form)
    assert solution.status == "infeasible"
    assert "column 'x[0]'" in solution.report.why
    model.x[0].fix(1 - 1e-9)
    assert compile_model(model).shape == (1, 1)
    model.x[0].fix(0.5)
    model.x[0].domain = pyo.Reals
    assert solve(compile_model(model)).status == "optimal"

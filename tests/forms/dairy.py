"""A small Pyomo model that the tests add to, and what of it compiling could have changed."""

from __future__ import annotations

import pyomo.environ as pyo
import pyomo.gdp as gdp

SIZES = ("small", "large")


def dairy() -> pyo.ConcreteModel:
    """Wheels of two sizes on the shelves of a cave, and the vans that fetch them."""
    model = pyo.ConcreteModel(name="dairy")
    model.wheels = pyo.Var(SIZES, domain=pyo.NonNegativeIntegers, bounds=(None, 9))
    model.vans = pyo.Var(domain=pyo.Integers, bounds=(-1, 4))
    model.price = pyo.Param(SIZES, initialize={"small": 2, "large": 5}, mutable=True)
    model.profit = pyo.Objective(
        expr=sum(model.price[size] * model.wheels[size] for size in SIZES) - model.vans,
        sense=pyo.maximize,
    )
    return model


def disjunction(model):
    """Add a choice between two rows; return the names that a refusal may give."""
    model.early = gdp.Disjunct()
    model.late = gdp.Disjunct()
    model.early.rule = pyo.Constraint(expr=model.vans <= 1)
    model.late.rule = pyo.Constraint(expr=model.vans >= 2)
    model.either = gdp.Disjunction(expr=[model.early, model.late])
    return "early|late|either"


def snapshot(model):
    """Everything of a model that compiling could have changed."""
    return (
        [component.name for component in model.component_objects()],
        [
            (var.name, var.value, var.stale, var.fixed, var.bounds)
            for var in model.component_data_objects(pyo.Var)
        ],
        [(con.name, con.active) for con in model.component_data_objects(pyo.Constraint)],
    )


def column(form, name):
    """Index of the column of that name."""
    return list(form.col_names).index(name)

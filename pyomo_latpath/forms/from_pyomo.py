"""A Pyomo model as a `LinearForm`.

Every active constraint becomes one row, ranges included, and every free variable that an
active constraint or the objective mentions becomes one column. Fixed variables count as
numbers. The model is only read.

Rows and columns are numbered here, with `generate_standard_repn` for the linear terms of one
expression, rather than by Pyomo's `LinearStandardFormCompiler`: it takes the same time,
keeps a range in one row, takes products with fixed variables as linear, and lets a constraint
without variables stay a row, so that a violated one is found, and named, like any other.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from itertools import count
from typing import Any

import numpy as np
import scipy.sparse as sp
from pyomo.common.gc_manager import PauseGC
from pyomo.contrib.solver.common.util import IncompatibleModelError
from pyomo.core.base import (
    Block,
    Constraint,
    LogicalConstraint,
    Objective,
    SOSConstraint,
    Suffix,
    Var,
    minimize,
)
from pyomo.core.base.component import ActiveComponent
from pyomo.core.expr.visitor import identify_variables
from pyomo.gdp import Disjunct, Disjunction
from pyomo.mpec import Complementarity
from pyomo.network import Arc, Port
from pyomo.repn import generate_standard_repn

from .linear_form import ComponentNames, Flags, Floats, LinearForm

#: Active components that a linear form can hold, or that it may overlook.
UNDERSTOOD = frozenset({Block, Constraint, Objective, Suffix, Port})

#: What to do about those that it cannot hold.
ADVICE = {
    SOSConstraint: "write it with binary variables (for Piecewise, choose a pw_repn without SOS)",
    Disjunction: "apply TransformationFactory('gdp.bigm') or 'gdp.hull' first",
    Disjunct: "apply TransformationFactory('gdp.bigm') or 'gdp.hull' first",
    LogicalConstraint: "apply TransformationFactory('core.logical_to_linear') first",
    Complementarity: "apply TransformationFactory('mpec.simple_disjunction') and 'gdp.bigm' first",
    Arc: "apply TransformationFactory('network.expand_arcs') first",
}


class UnsupportedModelError(IncompatibleModelError, ValueError):  # type: ignore[misc]
    """The model holds something that rows, bounds and a linear cost cannot say."""


def compile_model(model: Any) -> LinearForm:
    """Compile a Pyomo model, or a block of one.

    Parameters
    ----------
    model : pyomo.environ.ConcreteModel or BlockData
        It is not changed.

    Returns
    -------
    LinearForm
        One row for each active constraint (also for those without variables or without
        sides), one column for each free variable that they or the objective mention, also
        with the coefficient 0. `row_names` and `col_names` are `ComponentNames`.

    Raises
    ------
    UnsupportedModelError
        For nonlinear expressions, several objectives, disjunctions, SOS, logical and
        complementarity constraints, and domains that are neither an interval of numbers nor
        of whole numbers. The component is named.
    ValueError
        For numbers that are missing (a variable fixed at None) or not finite, also named.

    Examples
    --------
    >>> import pyomo.environ as pyo
    >>> model = pyo.ConcreteModel()
    >>> model.wheels = pyo.Var(["brie", "tomme"], domain=pyo.NonNegativeIntegers)
    >>> model.shelf = pyo.Constraint(expr=(2, pyo.quicksum(model.wheels.values()), 9))
    >>> model.profit = pyo.Objective(expr=3 * model.wheels["tomme"], sense=pyo.maximize)
    >>> form = compile_model(model)
    >>> form.sense, form.cost.tolist(), list(form.col_names)
    ('max', [3.0, 0.0], ['wheels[tomme]', 'wheels[brie]'])
    >>> form.row_lower.tolist(), form.row_upper.tolist(), list(form.row_names)
    ([2.0], [9.0], ['shelf'])
    """
    # Half a million small objects are made and kept: looking for garbage in them takes longer
    # than making them.
    with PauseGC():
        _refuse_other_components(model)
        columns = _Columns()
        objective = _objective_of(model)
        target = None if objective is None else _linear_terms(objective, objective.expr)
        targeted = [] if target is None else columns.numbers_of(target.linear_vars)
        rows, lower, upper, triplet = _rows_of(model, columns)
        columns.numbers_of(_mentioned_at_zero(model, objective, rows, columns))
        n = len(columns.variables)
        cost = np.zeros(n)
        if target is not None:
            cost[targeted] = target.linear_coefs
        col_lower, col_upper, integer = _domains_of(columns.variables)
        return LinearForm.from_arrays(
            sp.csr_array(triplet, shape=(len(rows), n)).tocsc(),
            row_lower=lower,
            row_upper=upper,
            col_lower=col_lower,
            col_upper=col_upper,
            cost=cost,
            offset=0.0 if target is None else target.constant,
            sense="min" if objective is None or objective.sense == minimize else "max",
            integer=integer,
            row_names=ComponentNames(rows),
            col_names=ComponentNames(columns.variables),
        )


class _Columns:
    """Numbers variables in the order in which they are met."""

    def __init__(self) -> None:
        self.position: dict[int, int] = {}
        self.variables: list[Any] = []

    def numbers_of(self, variables: Sequence[Any]) -> list[int]:
        numbers = map(self.position.__getitem__, map(id, variables))
        try:
            return list(numbers)
        except KeyError:
            new = [variable for variable in variables if id(variable) not in self.position]
        self.position.update(zip(map(id, new), count(len(self.variables)), strict=False))
        self.variables.extend(new)
        return [self.position[id(variable)] for variable in variables]


def _refuse_other_components(model: Any) -> None:
    """Name the first active component that is no row, bound or linear cost."""
    if not model.is_constructed():
        raise UnsupportedModelError(
            f"model {model.name!r} is not constructed; create an instance of it first"
        )
    for kind in model.collect_ctypes(active=True, descend_into=True):
        if kind in UNDERSTOOD or not issubclass(kind, ActiveComponent):
            continue
        for component in model.component_data_objects(kind, active=True, descend_into=True):
            advice = ADVICE.get(kind, "write it as linear constraints")
            raise UnsupportedModelError(
                f"{kind.__name__} {component.name!r} has no place in a linear model; {advice}"
            )


def _objective_of(model: Any) -> Any:
    """Return the one active objective, or None."""
    active = list(model.component_data_objects(Objective, active=True, descend_into=True))
    if len(active) > 1:
        raise UnsupportedModelError(
            f"the model has {len(active)} active objectives ({active[0].name!r}, "
            f"{active[1].name!r}, ...); deactivate all but one"
        )
    return active[0] if active else None


def _linear_terms(component: Any, expression: Any) -> Any:
    """Return the linear terms and the constant of an expression, as a `StandardRepn`."""
    try:
        repn = generate_standard_repn(expression, compute_values=True, quadratic=False)
    except (TypeError, ValueError, ArithmeticError) as error:
        raise _missing_number(component, expression, error) from error
    if repn.nonlinear_expr is not None:
        raise UnsupportedModelError(
            f"{component.ctype.__name__} {component.name!r} is not linear in the free "
            f"variables; latpath solves linear models only"
        )
    return repn


def _missing_number(component: Any, expression: Any, error: Exception) -> ValueError:
    """Say which number could not be had."""
    where = f"{component.ctype.__name__} {component.name!r}"
    for variable in identify_variables(expression, include_fixed=True):
        if variable.fixed and variable.value is None:
            return ValueError(
                f"{where} holds variable {variable.name!r}, which is fixed without a value; "
                "give it one or unfix it"
            )
    return ValueError(f"{where} cannot be evaluated: {error}")


def _rows_of(model: Any, columns: _Columns) -> tuple[list[Any], list[float], list[float], Any]:
    """Gather the active constraints, their sides, and (data, columns, row starts)."""
    rows: list[Any] = []
    lower: list[float] = []
    upper: list[float] = []
    data: list[float] = []
    numbers: list[int] = []
    starts = [0]
    for constraint in model.component_data_objects(Constraint, active=True, descend_into=True):
        low, body, high = constraint.to_bounded_expression(evaluate_bounds=True)
        repn = _linear_terms(constraint, body)
        rows.append(constraint)
        lower.append(-np.inf if low is None else low - repn.constant)
        upper.append(np.inf if high is None else high - repn.constant)
        data.extend(repn.linear_coefs)
        numbers.extend(columns.numbers_of(repn.linear_vars))
        starts.append(len(data))
    return (
        rows,
        lower,
        upper,
        (np.array(data, dtype=float), np.array(numbers, dtype=np.int32), np.array(starts)),
    )


def _mentioned_at_zero(
    model: Any, objective: Any, rows: Iterable[Any], columns: _Columns
) -> list[Any]:
    """Return free variables that are mentioned only with the coefficient 0.

    A mutable Param may be 0 today. The variable is still the model's, and gets a value.
    """
    own = list(model.component_objects(Var, active=True, descend_into=True))
    if sum(map(len, own)) == len(columns.variables):  # the rule, and quickly seen
        return []
    absent: set[int] = set()
    for component in own:
        absent.update(set(map(id, component.values())).difference(columns.position))
    found: dict[int, Any] = {}
    expressions = [row.body for row in rows]
    if objective is not None:
        expressions.append(objective.expr)
    for expression in expressions:
        for variable in identify_variables(expression, include_fixed=False):
            if id(variable) in absent:
                found[id(variable)] = variable
    return list(found.values())


def _domains_of(variables: Sequence[Any]) -> tuple[Floats, Floats, Flags]:
    """Return lower bounds, upper bounds and which variables are whole."""
    domains = [variable.domain for variable in variables]
    examples = dict(zip(map(id, domains), variables, strict=True))
    whole = {key: _declares_whole(variable) for key, variable in examples.items()}
    integer = np.fromiter(map(whole.__getitem__, map(id, domains)), bool, len(variables))
    # A missing bound is None, which becomes NaN here; a bound that is NaN has raised before.
    bounds = np.array([variable.bounds for variable in variables], dtype=float).reshape(-1, 2)
    lower = np.where(np.isnan(bounds[:, 0]), -np.inf, bounds[:, 0])
    upper = np.where(np.isnan(bounds[:, 1]), np.inf, bounds[:, 1])
    return lower, upper, integer


def _declares_whole(variable: Any) -> bool:
    """Say whether the domain is an interval of whole numbers, as against one of real numbers."""
    domain = variable.domain
    try:
        start, end, step = domain.get_interval()
    except TypeError:
        # Pyomo compares the members of a set to find its ends; words and numbers do not compare.
        start = end = step = None
    if step == 0:
        return False
    if step == 1 and all(limit is None or limit == round(limit) for limit in (start, end)):
        return True
    raise UnsupportedModelError(
        f"variable {variable.name!r} has the domain {domain}, which is neither an interval of "
        "numbers nor of whole numbers; write it with binary variables"
    )

"""A Pyomo model as a `LinearForm`.

Every active constraint becomes one row, ranges included, and every free variable that an
active constraint or the objective mentions becomes one column. Fixed variables count as
numbers. The model is only read.

Pyomo's `LinearStandardFormCompiler` does the work where it can. What it refuses (products with
fixed variables, violated constraints without variables, numbers that are missing) is read again
expression by expression: either it is linear after all, or the component can be named.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import count
from typing import Any

import numpy as np
import scipy.sparse as sp
from pyomo.common.errors import PyomoException
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
from pyomo.repn.plugins.standard_form import LinearStandardFormCompiler

from .linear_form import ComponentNames, Flags, Floats, LinearForm
from .plan import TOLERANCE

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
        with the coefficient 0, and for each whole variable that is fixed at a fraction.
        `row_names` and `col_names` are `ComponentNames`.

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
    ('max', [0.0, 3.0], ['wheels[brie]', 'wheels[tomme]'])
    >>> form.row_lower.tolist(), form.row_upper.tolist(), list(form.row_names)
    ([2.0], [9.0], ['shelf'])
    """
    # Half a million small objects are made and kept: looking for garbage in them takes longer
    # than making them.
    with PauseGC():
        _refuse_other_components(model)
        objective = _objective_of(model)
        rows = list(model.component_data_objects(Constraint, active=True, descend_into=True))
        system = _compiled(model, rows) or _read_one_by_one(objective, rows)
        variables = list(system.variables)
        variables += _mentioned_besides(model, objective, rows, variables)
        extra = len(variables) - len(system.variables)
        col_lower, col_upper, integer = _domains_of(variables)
        return LinearForm.from_arrays(
            sp.csc_array(
                (
                    system.matrix.data,
                    system.matrix.indices,
                    np.pad(system.matrix.indptr, (0, extra), mode="edge"),
                ),
                shape=(len(rows), len(variables)),
            ),
            row_lower=system.lower,
            row_upper=system.upper,
            col_lower=col_lower,
            col_upper=col_upper,
            cost=np.pad(system.cost, (0, extra)),
            offset=system.offset,
            sense="min" if objective is None or objective.sense == minimize else "max",
            integer=integer,
            row_names=ComponentNames(rows, model.model()),
            col_names=ComponentNames(variables, model.model()),
        )


@dataclass(frozen=True, eq=False)
class _System:
    """Rows and objective over the variables that they mention."""

    matrix: sp.csc_array
    lower: Floats
    upper: Floats
    cost: Floats
    offset: float
    variables: list[Any]


def _compiled(model: Any, rows: list[Any]) -> _System | None:
    """Let Pyomo compile the model; None where it cannot.

    In its mixed form a range is two rows of one constraint, and constraints that always hold
    are left out; here each constraint is one row again.
    """
    exported = model.component_objects(Suffix, active=True, descend_into=True)
    if any(suffix.export_enabled() for suffix in exported):
        return None  # the compiler would warn of them, call after call
    try:
        info = LinearStandardFormCompiler().write(model, mixed_form=True, set_sense=None)
        sides = np.asarray(info.rhs, dtype=float)
        offset = float(info.c_offset.sum())
    except (PyomoException, ValueError, TypeError, ArithmeticError):
        return None  # read one by one, it is either understood or named
    if np.isnan(sides).any():
        return None
    place = {id(row): i for i, row in enumerate(rows)}
    at = np.array([place[id(entry.constraint)] for entry in info.rows], dtype=np.int64)
    side = np.array([entry.bound_type for entry in info.rows], dtype=np.int64)
    lower, upper = np.full(len(rows), -np.inf), np.full(len(rows), np.inf)
    lower[at[side <= 0]] = sides[side <= 0]
    upper[at[side >= 0]] = sides[side >= 0]
    missing = np.setdiff1d(np.arange(len(rows)), at)
    if missing.size:  # they hold whatever is decided, and their sides say so
        lower[missing], upper[missing], _ = _rows_of([rows[i] for i in missing], _Columns())
    matrix = info.A
    if at.size != len(rows) or (np.diff(at) != 1).any():
        first = np.zeros(at.size, dtype=bool)
        first[np.unique(at, return_index=True)[1]] = True
        triplets = matrix.tocoo()
        once = first[triplets.row]
        entries = triplets.data[once], (at[triplets.row[once]], triplets.col[once])
        matrix = sp.csc_array(entries, shape=(len(rows), len(info.columns)))
    cost = info.c.sum(axis=0) if info.c.shape[0] else np.zeros(len(info.columns))
    return _System(matrix, lower, upper, np.asarray(cost).ravel(), offset, list(info.columns))


def _read_one_by_one(objective: Any, rows: list[Any]) -> _System:
    """Gather the rows and the objective, expression by expression."""
    columns = _Columns()
    target = None if objective is None else _linear_terms(objective, objective.expr)
    targeted = [] if target is None else columns.numbers_of(target.linear_vars)
    lower, upper, triplet = _rows_of(rows, columns)
    cost = np.zeros(len(columns.variables))
    if target is not None:
        cost[targeted] = target.linear_coefs
    matrix = sp.csr_array(triplet, shape=(len(rows), cost.size)).tocsc()
    offset = 0.0 if target is None else target.constant
    return _System(matrix, lower, upper, cost, offset, columns.variables)


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


def _rows_of(rows: list[Any], columns: _Columns) -> tuple[Floats, Floats, Any]:
    """Read the sides of constraints, and their terms as (data, columns, row starts)."""
    lower: list[float] = []
    upper: list[float] = []
    data: list[float] = []
    numbers: list[int] = []
    starts = [0]
    for constraint in rows:
        low, body, high = constraint.to_bounded_expression(evaluate_bounds=True)
        repn = _linear_terms(constraint, body)
        lower.append(-np.inf if low is None else low - repn.constant)
        upper.append(np.inf if high is None else high - repn.constant)
        data.extend(repn.linear_coefs)
        numbers.extend(columns.numbers_of(repn.linear_vars))
        starts.append(len(data))
    terms = np.array(data, dtype=float), np.array(numbers, dtype=np.int32), np.array(starts)
    return np.array(lower), np.array(upper), terms


def _mentioned_besides(
    model: Any, objective: Any, rows: list[Any], variables: list[Any]
) -> list[Any]:
    """Return variables without an entry that are mentioned and matter all the same.

    Free ones with the coefficient 0: a mutable Param may be 0 today, and the variable gets a
    value. And whole ones fixed at a fraction: no plan can have them.
    """
    own = list(model.component_objects(Var, active=True, descend_into=True))
    if sum(map(len, own)) == len(variables):  # the rule, and quickly seen
        return []
    known = set(map(id, variables))
    absent = {
        id(variable)
        for component in own
        for variable in component.values()
        if id(variable) not in known and (not variable.fixed or _at_a_fraction(variable))
    }
    if not absent:
        return []
    found: dict[int, Any] = {}
    expressions = [row.body for row in rows]
    if objective is not None:
        expressions.append(objective.expr)
    for expression in expressions:
        for variable in identify_variables(expression, include_fixed=True):
            if id(variable) in absent:
                found[id(variable)] = variable
    return list(found.values())


def _at_a_fraction(variable: Any) -> bool:
    """Whether a whole variable is fixed between two whole numbers, beyond a solver's noise."""
    value = variable.value
    if value is None or variable.is_continuous():
        return False
    return bool(np.isfinite(value) and abs(value - round(value)) > TOLERANCE)


def _domains_of(variables: Sequence[Any]) -> tuple[Floats, Floats, Flags]:
    """Return lower bounds, upper bounds and which variables are whole."""
    domains = [variable.domain for variable in variables]
    examples = dict(zip(map(id, domains), variables, strict=True))
    whole = {key: _declares_whole(variable) for key, variable in examples.items()}
    integer = np.fromiter(map(whole.__getitem__, map(id, domains)), bool, len(variables))
    # A missing bound is None, which becomes NaN here; a bound that is NaN has raised before.
    limits = [(v.value, v.value) if v.fixed else v.bounds for v in variables]
    bounds = np.array(limits, dtype=float).reshape(-1, 2)
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

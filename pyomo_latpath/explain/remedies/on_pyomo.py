"""A remedy made in a Pyomo model: the only module of this room that knows Pyomo's components."""

from __future__ import annotations

import math
from collections.abc import Iterable
from itertools import count
from typing import Any

import pyomo.environ as pyo
from pyomo.core.expr import LinearExpression

from ...forms.from_pyomo import compile_model
from .remedy import Inequality, Remedy, RowChange
from .unchanged import refuse_changed


def apply_to_model(remedy: Remedy, model: Any) -> Any:
    """Make a remedy's change in a Pyomo model, in place.

    New and changed rows come as one indexed constraint; rows that were changed, or that the new
    ones replace, are deactivated and stay in the model. Columns whose declaration goes get the
    domain of real numbers and keep their bounds.

    Parameters
    ----------
    remedy : Remedy
    model : Pyomo model or block
        The one that was explained, or one with the same names, rows and bounds, before or after
        other remedies of the same explanation. Variables that were fixed then must be fixed at
        the same values now: they are part of the sides.

    Returns
    -------
    Pyomo Constraint or None
        The new rows; None where the remedy brings none.

    Raises
    ------
    TypeError
        For anything but a Pyomo model or block.
    ValueError
        If the model lacks a row or a variable of the remedy, if a row or a bound has changed
        since it was explained, or if the remedy was made already; it is not changed then.

    Examples
    --------
    >>> import numpy as np
    >>> model = pyo.ConcreteModel()
    >>> model.x = pyo.Var([1, 2], domain=pyo.Binary)
    >>> row = Inequality("cuts[1]", np.array([0, 1]), ("x[1]", "x[2]"), np.ones(2), -np.inf, 1.0)
    >>> remedy = Remedy("cut", "cuts", "Add a row", "", (), "", inequalities=(row,))
    >>> print(remedy.apply(model)[1].expr)
    x[1] + x[2]  <=  1.0
    """
    if not hasattr(model, "component_data_objects"):
        raise TypeError(
            f"apply() takes a Pyomo model, not {type(model).__name__}; a LinearForm is changed by "
            "apply_to()"
        )
    lines: list[RowChange | Inequality] = [*remedy.row_changes, *remedy.inequalities]
    replaced = [change.name for change in remedy.row_changes] + [*remedy.dropped_row_names]
    bounded = [change.name for change in remedy.bound_changes]
    used = [name for line in lines for name in line.column_names]
    used += [*bounded, *remedy.dropped_declaration_names]
    rows = _found(model, pyo.Constraint, replaced, remedy)
    columns = _found(model, pyo.Var, used, remedy)
    if remedy.explained is not None:
        refuse_changed(remedy, compile_model(model), by_name=True)
    for name in remedy.dropped_declaration_names:
        lower, upper = columns[name].bounds
        columns[name].domain = pyo.Reals
        columns[name].bounds = lower, upper
    for bound in remedy.bound_changes:
        columns[bound.name].bounds = _limit(bound.lower), _limit(bound.upper)
    for name in replaced:
        rows[name].deactivate()
    if not lines:
        return None
    component = pyo.Constraint(range(1, len(lines) + 1))
    model.add_component(_free_name(model, remedy.name), component)
    for k, line in enumerate(lines, start=1):
        component.add(k, _expression(line, columns))
    return component


def _found(model: Any, kind: Any, names: Iterable[str], remedy: Remedy) -> dict[str, Any]:
    """The model's components with these names, active or not."""
    missing = dict.fromkeys(names)
    found = {}
    if missing:
        for component in model.component_data_objects(kind, descend_into=True):
            name = component.name
            if name in missing:
                found[name] = component
                del missing[name]
    if missing:
        what = "constraint" if kind is pyo.Constraint else "variable"
        raise ValueError(
            f"model {model.name!r} has no {what} {next(iter(missing))!r}, which the remedy "
            f"{remedy.title!r} touches; apply it to the model that was explained"
        )
    return found


def _free_name(model: Any, name: str) -> str:
    """The name, or else the first of name_2, name_3, ... that the model does not use."""
    numbered = (f"{name}_{k}" for k in count(2))
    return name if not hasattr(model, name) else next(n for n in numbered if not hasattr(model, n))


def _expression(line: RowChange | Inequality, columns: dict[str, Any]) -> Any:
    body = LinearExpression(
        constant=0.0,
        linear_coefs=line.coefficients.tolist(),
        linear_vars=[columns[name] for name in line.column_names],
    )
    if line.lower == line.upper:
        return body == line.lower
    return pyo.inequality(_limit(line.lower), body, _limit(line.upper))


def _limit(value: float) -> float | None:
    return value if math.isfinite(value) else None

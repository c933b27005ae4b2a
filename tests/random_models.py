"""Small random models of every kind, and the same models in Pyomo."""

from __future__ import annotations

import math

import numpy as np
import pyomo.environ as pyo

from pyomo_latpath.forms.linear_form import LinearForm

KINDS = ("network", "intervals", "general", "mixed", "free", "decimals", "floats", "tight")
RELATIONS = ("<=", ">=", "==", "range")


def random_form(rng: np.random.Generator, kind: str) -> LinearForm:
    """Draw a form with at most 4 rows and 5 columns.

    'network' and 'intervals' have totally unimodular matrices, 'general' small whole numbers,
    'mixed' continuous columns as well, 'free' columns without bounds (and so unbounded models),
    'decimals' numbers such as 0.3, 'floats' numbers of 16 digits, 'tight' rows whose
    sides leave no room around one plan.
    """
    m, n = int(rng.integers(1, 5)), int(rng.integers(1, 6))
    matrix = _matrix(rng, kind, m, n)
    lower = rng.integers(-2, 2, n).astype(float)
    upper = lower + rng.integers(0, 4, n)
    if kind == "free":
        lower[rng.random(n) < 0.4] = -math.inf
        upper[rng.random(n) < 0.4] = math.inf
    # Sides near what one plan does, so that about half of all models have a plan.
    plan = rng.integers(lower.clip(-2), lower.clip(-2) + 2).clip(lower, upper)
    low, high = _sides(rng, matrix @ plan, 0 if kind == "tight" else 2)
    integer = np.full(n, True)
    if kind in ("mixed", "free"):
        integer = rng.random(n) < 0.6
    cost = rng.integers(-5, 6, n).astype(float)
    offset = float(rng.integers(-3, 4))
    if kind == "decimals":
        matrix, low, high, cost = matrix / 10, low / 10, high / 10, cost / 10
    elif kind == "floats":
        cost = rng.normal(size=n)
        matrix = matrix * rng.choice([1.0, math.pi, math.sqrt(2)], size=(m, 1))
        integer = rng.random(n) < 0.7
    return LinearForm.from_arrays(
        matrix,
        row_lower=low,
        row_upper=high,
        col_lower=lower,
        col_upper=upper,
        cost=cost,
        offset=offset,
        sense="min" if rng.random() < 0.5 else "max",
        integer=integer,
    )


def _matrix(rng: np.random.Generator, kind: str, m: int, n: int) -> np.ndarray:
    matrix = np.zeros((m, n))
    for j in range(n):
        if kind == "network":
            ends = rng.integers(0, m, 2)
            matrix[ends[0], j] += 1
            matrix[ends[1], j] -= 1
        elif kind == "intervals":
            first = int(rng.integers(0, m))
            matrix[first : int(rng.integers(first + 1, m + 1)), j] = 1
        else:
            span = 2 if kind == "tight" else 4
            matrix[:, j] = rng.integers(-span + 1, span, m) * (rng.random(m) < 0.7)
    return matrix


def _sides(
    rng: np.random.Generator, activity: np.ndarray, span: int
) -> tuple[np.ndarray, np.ndarray]:
    low = activity + rng.integers(-span, span + 1, activity.size)
    low[rng.random(activity.size) < 0.1] += 3
    high = low.copy()
    for i in range(activity.size):
        relation = RELATIONS[int(rng.choice(4, p=[0.3, 0.3, 0.1, 0.3]))]
        if relation == "<=":
            low[i] = -math.inf
        elif relation == ">=":
            high[i] = math.inf
        elif relation == "range":
            high[i] += rng.integers(1, 4)
    return low, high


def pyomo_model(form: LinearForm) -> pyo.ConcreteModel:
    """Write a form as a Pyomo model: columns `x[j]`, rows `row[i]`, objective `goal`."""
    m, n = form.shape
    matrix = form.matrix.toarray()
    model = pyo.ConcreteModel()
    model.x = pyo.Var(range(n))
    for j in range(n):
        model.x[j].domain = pyo.Integers if form.integer[j] else pyo.Reals
        model.x[j].bounds = (form.col_lower[j], form.col_upper[j])

    @model.Constraint(range(m))
    def row(model, i):
        body = pyo.quicksum(float(matrix[i, j]) * model.x[j] for j in range(n) if matrix[i, j])
        if not matrix[i].any():
            # Pyomo drops zeros, and refuses a constraint that says nothing about any variable.
            body = model.x[0] - model.x[0]
        if form.row_lower[i] == form.row_upper[i]:
            return body == form.row_lower[i]
        return (form.row_lower[i], body, form.row_upper[i])

    model.goal = pyo.Objective(
        expr=form.offset + pyo.quicksum(float(form.cost[j]) * model.x[j] for j in range(n)),
        sense=pyo.minimize if form.sense == "min" else pyo.maximize,
    )
    return model

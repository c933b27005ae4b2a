"""Small models with totally unimodular matrices of every kind, and plans of theirs."""

from __future__ import annotations

import itertools

import numpy as np
from brute_force import network_matrix
from known_matrices import R10

from pyomo_latpath.forms.linear_form import LinearForm

KINDS = ("incidence", "intervals", "network", "transposed", "R10")


def tu_matrix(rng: np.random.Generator, kind: str, m: int, n: int) -> np.ndarray:
    """A random matrix of the kind; R10 has its own size."""
    if kind == "R10":
        return R10[0]
    if kind == "transposed":
        return tu_matrix(rng, "network", n, m).T
    if kind == "incidence":
        tree = [(i + 1, 0) for i in range(m)]
    elif kind == "intervals":
        tree = [(i, i + 1) for i in range(m)]
    else:
        tree = [(i + 1, int(rng.integers(0, i + 1))) for i in range(m)]
        tree = [pair if rng.random() < 0.5 else pair[::-1] for pair in tree]
    arcs = [tuple(rng.choice(m + 1, 2, replace=False).tolist()) for _ in range(n)]
    return network_matrix(tree, arcs)


def tu_form(
    rng: np.random.Generator, kind: str, *, m: int = 4, n: int = 6, largest: int = 9
) -> tuple[LinearForm, np.ndarray]:
    """A form with a whole feasible plan of it; equality rows, ranges, one-sided rows."""
    matrix = tu_matrix(rng, kind, m, n)
    m, n = matrix.shape
    upper = rng.integers(1, 4, n)
    plan = rng.integers(0, upper + 1)
    activity = matrix @ plan
    room = rng.integers(0, 3, (2, m)) * (rng.random((2, m)) < 0.6)
    low = np.where(rng.random(m) < 0.15, -np.inf, activity - room[0])
    high = np.where(rng.random(m) < 0.15, np.inf, activity + room[1])
    form = LinearForm.from_arrays(
        matrix,
        row_lower=low,
        row_upper=high,
        col_lower=0,
        col_upper=upper,
        cost=rng.integers(-largest, largest + 1, n),
        sense="min" if rng.random() < 0.5 else "max",
    )
    return form, plan.astype(float)


def plans(form: LinearForm) -> list[np.ndarray]:
    """All whole plans of a small bounded form."""
    ranges = [
        np.arange(low, high + 1) for low, high in zip(form.col_lower, form.col_upper, strict=True)
    ]
    every = np.array(list(itertools.product(*ranges)), dtype=float).T
    activity = form.matrix @ every
    inside = (activity >= form.row_lower[:, None]) & (activity <= form.row_upper[:, None])
    return list(every[:, inside.all(axis=0)].T)


def feasible(form: LinearForm, x: np.ndarray) -> bool:
    """Whether a plan is whole and satisfies every row and bound, exactly."""
    activity = form.matrix @ x
    return bool(
        (np.rint(x) == x)[form.integer].all()
        and ((x >= form.col_lower) & (x <= form.col_upper)).all()
        and ((activity >= form.row_lower) & (activity <= form.row_upper)).all()
    )

"""Model files: `SolverFactory('latpath')` against `SolverFactory('highs')`, by route.

Each file is read once and made a Pyomo model; whole `solve` calls on that are timed. Files are
not part of the project; public collections serve.

Run: python tests/bench/files.py [--repeats N] FILE...
"""

from __future__ import annotations

import argparse
import math
from pathlib import Path

import numpy as np
import pyomo.environ as pyo
from timing import medians

import pyomo_latpath as latpath

LIMIT = 60.0


def as_pyomo(form: latpath.LinearForm) -> pyo.ConcreteModel:
    """A Pyomo model with the rows and columns of a form."""
    model = pyo.ConcreteModel()
    n = form.shape[1]
    low, high = form.col_lower.tolist(), form.col_upper.tolist()
    model.x = pyo.Var(
        range(n),
        domain=lambda _, j: pyo.Integers if form.integer[j] else pyo.Reals,
        bounds=lambda _, j: (
            None if low[j] == -np.inf else low[j],
            None if high[j] == np.inf else high[j],
        ),
    )
    by_row = form.matrix.tocsr()
    x = list(model.x.values())

    def row(_: object, i: int) -> object:
        here = slice(by_row.indptr[i], by_row.indptr[i + 1])
        terms = zip(by_row.data[here].tolist(), by_row.indices[here].tolist(), strict=True)
        body = pyo.quicksum(a * x[j] for a, j in terms)
        lower, upper = float(form.row_lower[i]), float(form.row_upper[i])
        if lower == upper:
            return body == lower
        return (None if lower == -np.inf else lower, body, None if upper == np.inf else upper)

    sided = np.isfinite(form.row_lower) | np.isfinite(form.row_upper)
    full = np.flatnonzero((np.diff(by_row.indptr) > 0) & sided)
    model.rows = pyo.Constraint(full.tolist(), rule=row)
    priced = np.flatnonzero(form.cost)
    model.cost = pyo.Objective(
        expr=form.offset + pyo.quicksum(float(form.cost[j]) * x[j] for j in priced.tolist()),
        sense=pyo.minimize if form.sense == "min" else pyo.maximize,
    )
    return model


def solved(solver: str, model: pyo.ConcreteModel) -> object:
    """Solve; infeasible and unbounded models are results too."""
    return pyo.SolverFactory(solver).solve(model, load_solutions=False, timelimit=LIMIT)


def geometric_mean(values: list[float]) -> float:
    """Geometric mean; NaN of nothing."""
    return math.exp(sum(map(math.log, values)) / len(values)) if values else math.nan


def main() -> None:
    """Print a row for each file, and the geometric means by route."""
    parser = argparse.ArgumentParser()
    parser.add_argument("--repeats", type=int, default=3)
    parser.add_argument("files", nargs="+")
    chosen = parser.parse_args()
    ratios: dict[str, list[float]] = {}
    for name in chosen.files:
        form = latpath.read(name)
        model = as_pyomo(form)
        report = latpath.solve(form, time_limit=LIMIT).report
        seconds = medians(
            {
                "latpath": lambda m=model: solved("latpath", m),
                "highs": lambda m=model: solved("highs", m),
            },
            chosen.repeats,
        )
        ratio = seconds["latpath"] / seconds["highs"]
        verdict = report.finding.verdict.value
        kind = report.route
        if kind == "path":
            kind += ", certified" if verdict == "proven" else ", whole optimum"
        ratios.setdefault(kind, []).append(ratio)
        over = seconds["latpath"] - 1.5 * seconds["highs"]
        print(
            f"{Path(name).name:24}{verdict:10}{kind:22}{seconds['latpath']:>9.3f} s"
            f"{seconds['highs']:>9.3f} s{ratio:>8.2f}{'  over' if over > 0.05 else ''}",
            flush=True,
        )
    for kind, values in ratios.items():
        print(f"{kind}: geometric mean of latpath / highs {geometric_mean(values):.3f}")


if __name__ == "__main__":
    main()

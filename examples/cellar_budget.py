"""Lots to caves under a cellar budget: the one side constraint that breaks wholeness.

Without the budget this is a transport. The budget adds a row whose entries are prices, and the
relaxation's optimum turns fractional: half a lot here, half a lot there, to the last cent.
"""

import numpy as np
import pyomo.environ as pyo

import pyomo_latpath as latpath


def build(lots: int = 60, caves: int = 12, seed: int = 5) -> pyo.ConcreteModel:
    """Return the selection model; 720 variables as it stands."""
    rng = np.random.default_rng(seed)
    value = rng.integers(20, 200, (lots, caves)).tolist()
    rent = np.round(rng.random((lots, caves)) * 40 + 5, 2).tolist()

    model = pyo.ConcreteModel(name="cellar budget")
    model.lots, model.caves = pyo.RangeSet(0, lots - 1), pyo.RangeSet(0, caves - 1)
    model.ripens = pyo.Var(model.lots, model.caves, domain=pyo.Binary)
    model.one_cave = pyo.Constraint(
        model.lots, rule=lambda m, lot: pyo.quicksum(m.ripens[lot, c] for c in m.caves) <= 1
    )
    model.shelves = pyo.Constraint(
        model.caves, rule=lambda m, c: pyo.quicksum(m.ripens[lot, c] for lot in m.lots) <= 5
    )
    model.budget = pyo.Constraint(
        expr=pyo.quicksum(rent[lot][c] * v for (lot, c), v in model.ripens.items()) <= 600
    )
    model.value = pyo.Objective(
        expr=pyo.quicksum(value[lot][c] * v for (lot, c), v in model.ripens.items()),
        sense=pyo.maximize,
    )
    return model


def main() -> None:
    """Ask why it is fractional, and solve it with and without the budget."""
    model = build()
    explanation = latpath.explain(model)
    for culprit in explanation.culprits:
        print(f"to blame: {', '.join(culprit.groups)}, at a price of {culprit.price:,.0f}")
    solver = pyo.SolverFactory("latpath")
    for said in ("with the budget", "without it"):
        results = solver.solve(model)
        print(f"{said}: {pyo.value(model.value):,.0f}")
        print(f"  {results.solver.route}: {results.solver.message}")
        model.budget.deactivate()


if __name__ == "__main__":
    main()

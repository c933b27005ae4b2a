"""Keepers to caves, one each: an assignment."""

import numpy as np
import pyomo.environ as pyo

import pyomo_latpath  # noqa: F401  (makes the solver known to Pyomo)


def build(caves: int = 200, seed: int = 4) -> pyo.ConcreteModel:
    """Return the assignment model; 40,000 variables as it stands."""
    rng = np.random.default_rng(seed)
    skill = np.rint(rng.normal(50, 20, (caves, caves)).clip(1, 99)).tolist()

    model = pyo.ConcreteModel(name="keepers to caves")
    model.keepers, model.caves = pyo.RangeSet(0, caves - 1), pyo.RangeSet(0, caves - 1)
    model.tends = pyo.Var(model.keepers, model.caves, domain=pyo.Binary)
    model.one_cave = pyo.Constraint(
        model.keepers, rule=lambda m, k: pyo.quicksum(m.tends[k, c] for c in m.caves) == 1
    )
    model.one_keeper = pyo.Constraint(
        model.caves, rule=lambda m, c: pyo.quicksum(m.tends[k, c] for k in m.keepers) == 1
    )
    model.quality = pyo.Objective(
        expr=pyo.quicksum(skill[k][c] * v for (k, c), v in model.tends.items()),
        sense=pyo.maximize,
    )
    return model


def main() -> None:
    """Solve it."""
    model = build()
    results = pyo.SolverFactory("latpath").solve(model)
    print(f"{results.solver.route}: {results.solver.message}")
    print(f"quality: {pyo.value(model.quality):,.0f}")


if __name__ == "__main__":
    main()

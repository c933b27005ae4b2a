"""Cheese wheels from ripening caves to market towns: a transport.

Each cave has so many ripe wheels, each town has ordered so many; a wheel costs what the road
costs. Wheels are whole, and the declaration costs nothing: a transport has whole vertices only.
"""

import numpy as np
import pyomo.environ as pyo

import pyomo_latpath  # noqa: F401  (makes the solver known to Pyomo)


def build(caves: int = 40, towns: int = 300, seed: int = 1) -> pyo.ConcreteModel:
    """Return the transport model; 12,000 variables as it stands."""
    rng = np.random.default_rng(seed)
    cave_at, town_at = rng.random((caves, 2)) * 60, rng.random((towns, 2)) * 60
    road = np.linalg.norm(cave_at[:, None] - town_at[None, :], axis=2)
    cost = np.round(1.5 + 0.12 * road, 2).tolist()
    orders = rng.integers(5, 60, towns)
    ripe = rng.multinomial(int(orders.sum() * 1.1), np.full(caves, 1 / caves))

    model = pyo.ConcreteModel(name="wheels to towns")
    model.caves, model.towns = pyo.RangeSet(0, caves - 1), pyo.RangeSet(0, towns - 1)
    model.wheels = pyo.Var(model.caves, model.towns, domain=pyo.NonNegativeIntegers)
    model.ripe = pyo.Constraint(
        model.caves,
        rule=lambda m, c: pyo.quicksum(m.wheels[c, t] for t in m.towns) <= int(ripe[c]),
    )
    model.orders = pyo.Constraint(
        model.towns,
        rule=lambda m, t: pyo.quicksum(m.wheels[c, t] for c in m.caves) == int(orders[t]),
    )
    model.road = pyo.Objective(
        expr=pyo.quicksum(cost[c][t] * m for (c, t), m in model.wheels.items())
    )
    return model


def main() -> None:
    """Solve it, and show what one more wheel would cost in the dearest towns."""
    model = build()
    model.dual = pyo.Suffix(direction=pyo.Suffix.IMPORT)
    results = pyo.SolverFactory("latpath").solve(model)
    print(f"{results.solver.route}: {results.solver.message}")
    print(f"road costs: {pyo.value(model.road):,.2f}")
    dearest = sorted(model.towns, key=lambda t: -model.dual[model.orders[t]])[:3]
    for town in dearest:
        print(f"one more wheel for town {town}: {model.dual[model.orders[town]]:.2f}")


if __name__ == "__main__":
    main()

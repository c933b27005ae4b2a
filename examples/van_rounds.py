"""Van rounds through a day: a flow through towns and hours.

A node is a town at an hour; a van waits there or drives on. Orders must be carried on their
leg, and vans end the day where they began it.
"""

import numpy as np
import pyomo.environ as pyo

import pyomo_latpath  # noqa: F401  (makes the solver known to Pyomo)


def build(towns: int = 40, hours: int = 24, seed: int = 2) -> pyo.ConcreteModel:
    """Return the flow model; about 11,000 variables as it stands."""
    rng = np.random.default_rng(seed)
    at = rng.random((towns, 2)) * 4
    drive = np.maximum(1, np.rint(np.linalg.norm(at[:, None] - at[None, :], axis=2))).astype(int)
    legs = [
        (a, h, b, h + int(drive[a, b]))
        for a in range(towns)
        for b in rng.choice(towns, 12, replace=False).tolist()
        for h in range(hours - int(drive[a, b]))
        if a != b
    ]
    legs = sorted(set(legs))
    waits = [(a, h, a, h + 1) for a in range(towns) for h in range(hours - 1)]
    nights = [(a, hours - 1, a, 0) for a in range(towns)]
    ordered = {legs[k]: int(rng.integers(1, 3)) for k in rng.choice(len(legs), len(legs) // 40)}

    model = pyo.ConcreteModel(name="van rounds")
    model.legs = pyo.Set(initialize=legs + waits + nights, dimen=4)
    model.vans = pyo.Var(
        model.legs,
        domain=pyo.NonNegativeIntegers,
        bounds=lambda m, *leg: (ordered.get(leg, 0), 6 if leg[0] != leg[2] else 30),
    )
    into: dict[tuple[int, int], list] = {}
    out_of: dict[tuple[int, int], list] = {}
    for leg in model.legs:
        out_of.setdefault(leg[:2], []).append(leg)
        into.setdefault(leg[2:], []).append(leg)
    model.balance = pyo.Constraint(
        sorted(out_of),
        rule=lambda m, a, h: (
            pyo.quicksum(m.vans[leg] for leg in into[a, h])
            == pyo.quicksum(m.vans[leg] for leg in out_of[a, h])
        ),
    )
    price = {leg: 7 * (leg[3] - leg[1]) if leg[0] != leg[2] else 1 for leg in legs + waits}
    price |= dict.fromkeys(nights, 90)
    model.cost = pyo.Objective(
        expr=pyo.quicksum(price[leg] * model.vans[leg] for leg in model.legs)
    )
    return model


def main() -> None:
    """Solve it, and count the vans."""
    model = build()
    results = pyo.SolverFactory("latpath").solve(model)
    print(f"{results.solver.route}: {results.solver.message}")
    nights = sum(model.vans[leg].value for leg in model.legs if leg[3] < leg[1])
    print(f"vans needed: {nights:.0f}, cost of the day: {pyo.value(model.cost):,.0f}")


if __name__ == "__main__":
    main()

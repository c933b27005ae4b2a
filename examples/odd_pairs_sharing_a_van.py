"""Pairs of caves that share a van: an odd ring of caves leaves one over, the relaxation none.

A van fetches cheese from two neighbouring caves a day, and each cave is fetched from once. In a
ring of five caves the relaxation sends half a van along each of the five roads. The explanation
names the ring, and the inequality that forbids this: of five caves in a ring at most two pairs.
"""

import pyomo.environ as pyo

import pyomo_latpath as latpath

#: Valleys with their caves in a ring, and the pass roads between them.
VALLEYS = {"upper": 5, "middle": 7, "lower": 3}
PASSES = [(("upper", 2), ("middle", 1)), (("middle", 4), ("lower", 1))]


def build() -> pyo.ConcreteModel:
    """Return the model: one binary variable for each road."""
    caves = [(valley, k) for valley, size in VALLEYS.items() for k in range(1, size + 1)]
    roads = [((valley, k), (valley, k % VALLEYS[valley] + 1)) for valley, k in caves] + PASSES

    model = pyo.ConcreteModel(name="pairs sharing a van")
    model.caves = pyo.Set(initialize=caves, dimen=2)
    model.roads = pyo.Set(initialize=[a + b for a, b in roads], dimen=4)
    model.van = pyo.Var(model.roads, domain=pyo.Binary)
    model.fetched_once = pyo.Constraint(
        model.caves,
        rule=lambda m, *cave: (
            pyo.quicksum(m.van[road] for road in m.roads if cave in (road[:2], road[2:])) <= 1
        ),
    )
    model.wheels = pyo.Objective(
        expr=pyo.quicksum((10 + (3 * k) % 4) * v for k, v in enumerate(model.van.values())),
        sense=pyo.maximize,
    )
    return model


def main() -> None:
    """Explain it, add the inequalities to the model, and solve what is now whole."""
    model = build()
    explanation = latpath.explain(model)
    print(f"relaxation {explanation.gap.declared_bound:g}, best plan {explanation.gap.plan:g}")
    for remedy in explanation.remedies:
        if remedy.kind == "cut":
            rows = remedy.apply(model)
            for row in rows.values():
                print(f"  {row.name}: {row.expr}")
            print(f"  {remedy.sentence}")
            print(f"relaxation with them {remedy.bound_after:g}")
    results = pyo.SolverFactory("latpath").solve(model)
    print(f"{results.solver.route}: {results.solver.message}")
    print(f"wheels fetched: {pyo.value(model.wheels):g}")


if __name__ == "__main__":
    main()

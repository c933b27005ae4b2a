"""Which caves to open: a big M in the model, and what it costs.

A lot ripens in an open cave only, written as "all lots of a cave together are at most 1,000 times
opened": right for whole plans, but the relaxation opens 1/1,000 of a cave for each lot. The
explanation finds the smallest number that will do in place of 1,000, and then one row for each lot.
"""

import pyomo.environ as pyo

import pyomo_latpath as latpath


def build(lots: int = 40, caves: int = 8) -> pyo.ConcreteModel:
    """Return the model: what it costs to open caves and to bring the lots there."""
    model = pyo.ConcreteModel(name="opening caves")
    model.lots, model.caves = pyo.RangeSet(lots), pyo.RangeSet(caves)
    model.ripens = pyo.Var(model.lots, model.caves, domain=pyo.Binary)
    model.opened = pyo.Var(model.caves, domain=pyo.Binary)
    model.one_cave = pyo.Constraint(
        model.lots, rule=lambda m, lot: pyo.quicksum(m.ripens[lot, c] for c in m.caves) == 1
    )
    model.only_if_open = pyo.Constraint(
        model.caves,
        rule=lambda m, c: pyo.quicksum(m.ripens[lot, c] for lot in m.lots) <= 1000 * m.opened[c],
    )
    model.cost = pyo.Objective(
        expr=pyo.quicksum((40 + 5 * c) * model.opened[c] for c in model.caves)
        + pyo.quicksum(
            (5 + abs(lot * 7 % 50 - c * 6)) * model.ripens[lot, c]
            for lot in model.lots
            for c in model.caves
        )
    )
    return model


def main() -> None:
    """Explain it, apply the remedies one after the other, and solve."""
    model = build()
    explanation = latpath.explain(model)
    print(
        f"relaxation {explanation.gap.declared_bound:,.2f}, best plan {explanation.gap.plan:,.2f}"
    )
    for remedy in explanation.remedies:
        print(f"{remedy.title}: relaxation {remedy.bound_together:,.2f}")
        print(f"  {remedy.sentence}")
        remedy.apply(model)
    results = pyo.SolverFactory("latpath").solve(model)
    print(f"{results.solver.route}: {results.solver.message}")
    opened = [c for c in model.caves if pyo.value(model.opened[c]) > 0.5]
    print(f"caves opened: {opened}, cost {pyo.value(model.cost):,.2f}")


if __name__ == "__main__":
    main()

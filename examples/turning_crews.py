"""Crews that turn the wheels: shifts over consecutive periods.

Every half hour of a fortnight asks for so many hands in the cellar. A shift covers a run of
consecutive periods, so the matrix has consecutive ones and its vertices are whole.

Plans for people's shifts come after labour rules and local agreements, not before them.
"""

import numpy as np
import pyomo.environ as pyo

import pyomo_latpath  # noqa: F401  (makes the solver known to Pyomo)


def build(periods: int = 400, shifts: int = 10_000, seed: int = 3) -> pyo.ConcreteModel:
    """Return the shift model; 10,000 variables as it stands."""
    rng = np.random.default_rng(seed)
    length = rng.integers(4, 24, shifts)
    begin = rng.integers(0, periods - length)
    wage = np.round(18 + 9.5 * length + rng.random(shifts) * 30, 2).tolist()
    of_day = np.arange(periods) % 48
    hands = (4 + 6 * np.exp(-(((of_day - 14) / 7) ** 2)) + rng.integers(0, 3, periods)).astype(int)
    on_duty: list[list[int]] = [[] for _ in range(periods)]
    for k, (start, run) in enumerate(zip(begin.tolist(), length.tolist(), strict=True)):
        for period in range(start, start + run):
            on_duty[period].append(k)

    model = pyo.ConcreteModel(name="turning crews")
    model.periods, model.shifts = pyo.RangeSet(0, periods - 1), pyo.RangeSet(0, shifts - 1)
    model.crews = pyo.Var(model.shifts, domain=pyo.NonNegativeIntegers, bounds=(0, 8))
    model.cover = pyo.Constraint(
        [p for p in model.periods if on_duty[p]],
        rule=lambda m, p: (
            pyo.quicksum(m.crews[k] for k in on_duty[p]) >= min(int(hands[p]), 8 * len(on_duty[p]))
        ),
    )
    model.wages = pyo.Objective(expr=pyo.quicksum(wage[k] * model.crews[k] for k in model.shifts))
    return model


def main() -> None:
    """Solve it."""
    model = build()
    results = pyo.SolverFactory("latpath").solve(model)
    print(f"{results.solver.route}: {results.solver.message}")
    manned = sum(model.crews[k].value > 0 for k in model.shifts)
    print(f"shifts manned: {manned}, wages: {pyo.value(model.wages):,.2f}")
    print("Labour rules and local agreements come first: check the plan against them.")


if __name__ == "__main__":
    main()

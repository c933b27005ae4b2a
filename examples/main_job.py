"""The main job in one table: five models, the routes they take, and the time against `highs`."""

import time

import cellar_budget
import keepers_to_caves
import pyomo.environ as pyo
import turning_crews
import van_rounds
import wheels_to_towns

MODELS = (wheels_to_towns, van_rounds, turning_crews, keepers_to_caves, cellar_budget)


def timed(solver: str, model: pyo.ConcreteModel) -> tuple[float, object]:
    """Solve a model and return the seconds of the whole call, and the results."""
    begun = time.perf_counter()
    results = pyo.SolverFactory(solver).solve(model)
    return time.perf_counter() - begun, results


def main() -> None:
    """Solve every model by both solvers and print a row for each."""
    print(
        f"{'model':18}{'variables':>10}{'route':>7}{'objective':>14}"
        f"{'latpath s':>11}{'highs s':>9}{'ratio':>7}"
    )
    notes = []
    for module in MODELS:
        model = module.build()
        objective = next(model.component_data_objects(pyo.Objective))
        seconds, results = timed("latpath", model)
        found = pyo.value(objective)
        of_highs, _ = timed("highs", model)
        size = sum(1 for _ in model.component_data_objects(pyo.Var))
        print(
            f"{model.name:18}{size:>10,}{results.solver.route:>7}{found:>14,.2f}"
            f"{seconds:>11.2f}{of_highs:>9.2f}{of_highs / seconds:>6.1f}x"
        )
        notes.append(f"{model.name}: {results.solver.message}")
    print()
    print("\n".join(notes))


if __name__ == "__main__":
    main()

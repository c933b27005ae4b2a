"""The swap: `SolverFactory('latpath')` against `SolverFactory('highs')` on the same model.

Whole `solve` calls, the model already built. Run: python tests/bench/swap.py [repeats]
"""

from __future__ import annotations

import sys

import models
import pyomo.environ as pyo
from timing import anew, medians, print_row

import pyomo_latpath as latpath

WORK = {
    "assignment 200x200": lambda: models.assignment(200),
    "shifts 500x8,000": models.shifts,
    "flow 5,000 nodes, 45,000 arcs": models.flow,
    "assignment 400x400": lambda: models.assignment(400),
}


def main() -> None:
    """Print a row for each piece of work."""
    repeats = int(sys.argv[1]) if len(sys.argv) > 1 else 3
    for what, build in WORK.items():
        model = build()
        loose = models.relaxed(build())
        form = latpath.compile_model(model)
        ways = {
            "latpath": lambda m=model: pyo.SolverFactory("latpath").solve(m),
            "from arrays": lambda f=form: latpath.solve(anew(f)),
            "highs": lambda m=model: pyo.SolverFactory("highs").solve(m),
            "highs, relaxed by hand": lambda m=loose: pyo.SolverFactory("highs").solve(m),
        }
        ways["latpath"]()
        found = pyo.value(model.cost)
        seconds = medians(ways, repeats)
        assert abs(found - pyo.value(model.cost)) <= 1e-4 * abs(found)
        print_row(what, seconds)
        arrays = seconds["highs"] / seconds["from arrays"]
        print(f"{'':34} from arrays {arrays:.1f}x faster than highs", flush=True)


if __name__ == "__main__":
    main()

"""Families: one form, many costs, against HiGHS on each member.

Each way solves the same members in turns; what is printed are medians over members, and ratios.
Run: python tests/bench/family.py [size] [members]
"""

from __future__ import annotations

import statistics
import sys
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path

import highspy
import models
import numpy as np
import pyomo.environ as pyo

sys.path.insert(0, str(Path(__file__).parents[1]))
from with_highs import highs, program

import pyomo_latpath as latpath
from pyomo_latpath.forms.linear_form import LinearForm


def main() -> None:
    """Print a block for each kind of change."""
    size = int(sys.argv[1]) if len(sys.argv) > 1 else 100
    members = int(sys.argv[2]) if len(sys.argv) > 2 else 1000
    form = latpath.compile_model(models.assignment(size))
    base, rng = form.cost, np.random.default_rng(1)
    kinds: dict[str, Callable[[], np.ndarray]] = {
        "costs changed by up to 10%": lambda: np.rint(base * rng.uniform(0.9, 1.1, base.size)),
        "a tenth of the costs drawn anew": lambda: np.where(
            rng.random(base.size) < 0.1, rng.integers(1, 1000, base.size), base
        ),
        "all costs drawn anew": lambda: rng.integers(1, 1000, base.size).astype(float),
    }
    for kind, draw in kinds.items():
        print(f"assignment {size}x{size}, {members} members, {kind}")
        compare(form, [draw() for _ in range(members)], size)
    memory(form, kinds["all costs drawn anew"], members)


def compare(form: LinearForm, costs: list[np.ndarray], size: int) -> None:
    """Solve all members by ourselves and by linear programs, some of them through Pyomo."""
    warm = held(form, costs[0])
    warm.run()
    few = set(range(0, len(costs), max(1, len(costs) // 5)))
    seconds: dict[str, list[float]] = {}

    def clocked(way: str, solve: Callable[[], float]) -> float:
        begun = time.perf_counter()
        value = solve()
        seconds.setdefault(way, []).append(time.perf_counter() - begun)
        return value

    def anew(cost: np.ndarray, presolve: str) -> float:
        solver = held(form, cost)
        solver.setOptionValue("presolve", presolve)
        solver.run()
        return solver.getObjectiveValue()

    def again(cost: np.ndarray) -> float:
        warm.changeColsCost(cost.size, np.arange(cost.size, dtype=np.int32), cost)
        warm.run()
        return warm.getObjectiveValue()

    def through_pyomo(cost: np.ndarray) -> float:
        model = models.assignment(size, cost=cost)
        pyo.SolverFactory("highs").solve(model)
        return pyo.value(model.cost)

    for k, cost in enumerate(costs):
        ours = clocked("latpath", lambda c=cost: latpath.solve(form.replace(cost=c)).objective)
        assert ours == clocked("LP anew, presolve", lambda c=cost: anew(c, "choose"))
        assert ours == clocked("LP anew, no presolve", lambda c=cost: anew(c, "off"))
        assert ours == clocked("LP from the last basis", lambda c=cost: again(c))
        if k in few:
            assert ours == clocked("rebuilt in Pyomo, highs", lambda c=cost: through_pyomo(c))
    our_time = statistics.median(seconds["latpath"])
    total = sum(seconds["latpath"])
    print(f"  {'latpath':26} {1e3 * our_time:8.2f} ms   all together {total:.2f} s")
    for way, times in seconds.items():
        median = statistics.median(times)
        if way != "latpath":
            print(f"  {way:26} {1e3 * median:8.2f} ms {median / our_time:8.1f}x")


def held(form: LinearForm, cost: np.ndarray) -> highspy.Highs:
    """The relaxation, passed to HiGHS as arrays."""
    limits = form.row_lower, form.row_upper, form.col_lower, form.col_upper
    return highs(program(form.matrix, cost, *limits))


def memory(form: LinearForm, draw: Callable[[], np.ndarray], members: int) -> None:
    """Memory held after some members, and after many more."""
    tracemalloc.start()
    held = []
    for count in (members // 10, members):
        for _ in range(count):
            latpath.solve(form.replace(cost=draw()))
        held.append(tracemalloc.get_traced_memory()[0] / 2**20)
    tracemalloc.stop()
    print(f"memory held after {members // 10} members {held[0]:.2f} MB, more {held[1]:.2f} MB")


if __name__ == "__main__":
    main()

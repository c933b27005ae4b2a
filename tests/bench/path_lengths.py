"""How long are the paths? Steps of three walks under three pricing rules, beside their bounds.

Every walk starts at the same vertex, the one farthest in cost (the optimum of the negated
costs), and steps are counted exactly on the whole tableau. Run:

    python tests/bench/path_lengths.py [PICTURE.png]
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import NormalForm, normalise
from pyomo_latpath.paths.box import box_of
from pyomo_latpath.paths.cost_scaling import phase_bound, scaling_walk
from pyomo_latpath.paths.face_fixing import face_fixing_walk, rounding_size, step_bound
from pyomo_latpath.paths.path_solver import vertex_at_least_as_good
from pyomo_latpath.paths.vertex_oracle import HighsBasis, Tableau, Vertex
from pyomo_latpath.proof import WholeCosts, prove_optimal, whole_costs

FOREVER = Deadline(None)
SEEDS = range(5)


class FirstImproving(Tableau):
    """Takes the first column that improves."""

    def _entering(self, reduced: np.ndarray, bland: bool) -> tuple[int, bool]:
        return super()._entering(reduced, True)


class SteepestEdge(Tableau):
    """Takes the column that gains most per length of the edge."""

    def _entering(self, reduced: np.ndarray, bland: bool) -> tuple[int, bool]:
        if bland:
            return super()._entering(reduced, bland)
        length = np.sqrt(1.0 + (self.table**2).sum(axis=0))
        return super()._entering(reduced / length, bland)


RULES = {"largest coefficient": Tableau, "first improving": FirstImproving}
RULES["steepest edge"] = SteepestEdge


def network(
    arcs: list[tuple[int, int]], supply: np.ndarray, cost: np.ndarray, most: int
) -> LinearForm:
    """A flow with capacities, one arc to and from an outside node for what cannot be carried."""
    nodes = supply.size
    A = np.zeros((nodes, len(arcs) + 2 * nodes))
    for j, (tail, head) in enumerate(arcs):
        A[tail, j], A[head, j] = 1, -1
    A[:, len(arcs) :] = np.hstack([np.eye(nodes), -np.eye(nodes)])
    dear = np.full(2 * nodes, 20 * int(cost.max()))
    return LinearForm.from_arrays(
        A,
        row_lower=supply,
        row_upper=supply,
        col_lower=0,
        col_upper=np.r_[np.full(len(arcs), most), np.full(2 * nodes, np.abs(supply).sum())],
        cost=np.r_[cost, dear],
    )


def balanced(rng: np.random.Generator, nodes: int, size: int) -> np.ndarray:
    """Supplies that sum to zero."""
    supply = rng.integers(-size, size + 1, nodes)
    supply[-1] -= supply.sum()
    return supply


def grid(rng: np.random.Generator) -> LinearForm:
    """A 5 x 6 grid, both ways."""
    at = np.arange(30).reshape(5, 6)
    pairs = [*zip(at[:, :-1].ravel(), at[:, 1:].ravel(), strict=True)]
    pairs += [*zip(at[:-1].ravel(), at[1:].ravel(), strict=True)]
    arcs = pairs + [(b, a) for a, b in pairs]
    return network(arcs, balanced(rng, 30, 3), rng.integers(1, 100, len(arcs)), 5)


def layers(rng: np.random.Generator) -> LinearForm:
    """Six layers of five nodes, each joined to the next."""
    arcs = [(5 * k + i, 5 * k + 5 + j) for k in range(5) for i in range(5) for j in range(5)]
    supply = np.zeros(30, int)
    supply[:5], supply[25:] = 3, -3
    return network(arcs, supply, rng.integers(1, 100, len(arcs)), 3)


def transport(rng: np.random.Generator) -> LinearForm:
    """Eight caves to twelve towns."""
    A = np.vstack([np.kron(np.eye(8), np.ones(12)), np.kron(np.ones(8), np.eye(12))])
    demand = rng.integers(1, 9, 12)
    ripe = rng.multinomial(int(1.2 * demand.sum()), np.full(8, 1 / 8))
    return LinearForm.from_arrays(
        A,
        row_lower=np.r_[np.full(8, -np.inf), demand],
        row_upper=np.r_[ripe, demand],
        col_lower=0,
        col_upper=20,
        cost=rng.integers(1, 100, 96),
    )


def assignment(rng: np.random.Generator) -> LinearForm:
    """Fourteen keepers to fourteen caves."""
    A = np.vstack([np.kron(np.eye(14), np.ones(14)), np.kron(np.ones(14), np.eye(14))])
    return LinearForm.from_arrays(
        A, row_lower=1, row_upper=1, col_lower=0, col_upper=1, cost=rng.integers(1, 100, 196)
    )


def counting(rng: np.random.Generator, stages: int = 8) -> LinearForm:
    """A network that makes Dantzig's rule count to 2**stages, one unit of flow a step.

    Stage i sends half its flow through stage i - 1 and the other half round it, which undoes the
    first half; a dear arc carries all of it at first. Zadeh (1973), A bad network problem for the
    simplex method and other minimum cost flow algorithms; in the form of Disser and Skutella
    (2019), The simplex algorithm is NP-mighty, section 3 (reconstructed from memory; that the
    walk takes 2**stages steps confirms it). There is only one of each size.
    """
    del rng
    arcs, most, cost = [(0, 1)], [1], [0]
    for i in range(1, stages + 1):
        s, t, half = 2 * i, 2 * i + 1, 2 ** (i - 1)
        arcs += [(s, s - 2), (t - 2, t), (s, t - 2), (s - 2, t)]
        most += [half] * 4
        cost += [0, 0, half, half - 1]
    source, sink = 2 * stages, 2 * stages + 1
    arcs.append((source, sink))
    most.append(2**stages)
    cost.append(2 ** (stages + 1))
    A = np.zeros((2 * stages + 2, len(arcs)))
    for j, (tail, head) in enumerate(arcs):
        A[tail, j], A[head, j] = 1, -1
    supply = np.zeros(2 * stages + 2)
    supply[source], supply[sink] = 2**stages, -(2**stages)
    return LinearForm.from_arrays(
        A, row_lower=supply, row_upper=supply, col_lower=0, col_upper=most, cost=cost
    )


FAMILIES: dict[str, Callable[[np.random.Generator], LinearForm]] = {
    "grid 5x6": grid,
    "layers 6x5": layers,
    "transport 8x12": transport,
    "assignment 14": assignment,
    "counting, 8 stages": counting,
}


@dataclass(frozen=True)
class Length:
    """Steps, pivots and the proven bound of one walk."""

    steps: int
    pivots: int
    bound: int


def farthest(normal: NormalForm) -> tuple[object, np.ndarray]:
    """The vertex with the largest cost."""
    x = HighsBasis(normal).optimise(-whole_costs(normal).numerators, FOREVER).x
    found = vertex_at_least_as_good(normal, x, FOREVER)
    assert found is not None
    return found


def measure(normal: NormalForm, rule: type[Tableau]) -> dict[str, Length]:
    """Walk three ways from the same vertex under one pricing rule."""
    basis, x = farthest(normal)
    costs, box = whole_costs(normal).numerators, box_of(normal)
    largest = int(np.abs(costs).max())
    lengths, ends = {}, set()
    basic = rule(normal, basis, x)
    ends.add(int(costs @ basic.optimise(costs, FOREVER).x))
    lengths["basic"] = Length(basic.steps, basic.pivots, box.total * largest)
    scaling = rule(normal, basis, x)
    ends.add(int(costs @ scaling_walk(scaling, costs, FOREVER)[0].x))
    lengths["scaling"] = Length(scaling.steps, scaling.pivots, phase_bound(box.total, largest))
    fixing = rule(normal, basis, x)

    def optimal(vertex: Vertex) -> bool:
        true = WholeCosts(costs, 1)
        return prove_optimal(normal, true, vertex.x, vertex.row_dual, fixing.basis_prices).exact

    size = min(rounding_size(normal, box), largest - 1)
    walk = face_fixing_walk(
        normal, costs, box, fixing, optimal, largest=size, stride=False, deadline=FOREVER
    )
    ends.add(int(costs @ walk.vertex.x))
    bound = step_bound(normal, costs, box, size)
    lengths["face fixing"] = Length(fixing.steps, fixing.pivots, bound)
    assert len(ends) == 1, "the walks disagree about the optimum"
    assert all(length.steps <= length.bound for length in lengths.values())
    return lengths


def main() -> None:
    """Print the table, and draw it where a picture is asked for."""
    print(f"{'family':20}{'walk':13}" + "".join(f"{rule:>24}" for rule in RULES) + f"{'bound':>12}")
    print(" " * 33 + f"{'steps (pivots)':>24}" * len(RULES))
    table: dict[tuple[str, str], list[float]] = {}
    for family, build in FAMILIES.items():
        blocks = [normalise(build(np.random.default_rng(seed))) for seed in SEEDS]
        by_rule = {r: [measure(block, kind) for block in blocks] for r, kind in RULES.items()}
        for walk in ("basic", "scaling", "face fixing"):
            cells, bounds = [], []
            for rule in RULES:
                lengths = [found[walk] for found in by_rule[rule]]
                steps = float(np.median([length.steps for length in lengths]))
                pivots = float(np.median([length.pivots for length in lengths]))
                bounds += [length.bound for length in lengths]
                cells.append(f"{f'{steps:.0f} ({pivots:.0f})':>24}")
                table.setdefault((family, walk), []).append(steps)
            print(f"{family:20}{walk:13}" + "".join(cells) + f"{np.median(bounds):>12,.0f}")
    if len(sys.argv) > 1:
        draw(table, sys.argv[1])


def draw(table: dict[tuple[str, str], list[float]], file: str) -> None:
    """Bars of steps by family and walk, one panel for each pricing rule."""
    import matplotlib.pyplot as plt

    figure, panels = plt.subplots(1, len(RULES), figsize=(13, 4), sharey=True, layout="tight")
    for k, (rule, panel) in enumerate(zip(RULES, panels, strict=True)):
        for place, walk in enumerate(("basic", "scaling", "face fixing")):
            heights = [table[family, walk][k] for family in FAMILIES]
            panel.bar(np.arange(len(FAMILIES)) + 0.27 * (place - 1), heights, 0.25, label=walk)
        panel.set_xticks(range(len(FAMILIES)), FAMILIES, rotation=30, ha="right")
        panel.set_title(rule)
    panels[0].set_ylabel("steps (median of 5)")
    panels[0].legend()
    figure.savefig(file, dpi=110)


if __name__ == "__main__":
    main()

"""Blocks whose transpose is a network matrix: the dual flow beside HiGHS's dual simplex, cold.

Both start from the certified block and end with a vertex and prices, in turns; ratios are
HiGHS's seconds over ours: above 1 we are faster. Our optima are proven exactly beside it.

Run: python tests/bench/conetwork.py [--quick]
"""

from __future__ import annotations

import statistics
import sys

import numpy as np
import scipy.sparse as sp
from timing import medians, print_row

from pyomo_latpath.certificates import Conetwork
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import NormalForm, normalise
from pyomo_latpath.integrality.certify import certify
from pyomo_latpath.paths.conetwork_flow import ConetworkOracle, ConetworkStructure
from pyomo_latpath.paths.network_oracle import NetworkStructure
from pyomo_latpath.paths.vertex_oracle import HighsBasis, Vertex
from pyomo_latpath.proof import prove_optimal, whole_costs

FOREVER = Deadline(None)


def differences(rows: int, columns: int, seed: int = 0) -> LinearForm:
    """Starts of work on wheels of cheese: gaps from one to a later one, weights on the starts."""
    rng = np.random.default_rng(seed)
    before, after = _pairs(rng, rows, columns)
    return LinearForm.from_arrays(
        _difference_matrix(before, after, columns),
        row_lower=rng.integers(1, 30, before.size),
        row_upper=np.inf,
        col_lower=0,
        col_upper=40 * columns,
        cost=rng.integers(-20, 30, columns),
    )


def windows(rows: int, columns: int, seed: int = 0) -> LinearForm:
    """Gaps with a longest time as well, and a due window for every start."""
    rng = np.random.default_rng(seed)
    before, after = _pairs(rng, rows, columns)
    plan = np.cumsum(rng.integers(0, 3, columns))
    gap = plan[after] - plan[before]
    return LinearForm.from_arrays(
        _difference_matrix(before, after, columns),
        row_lower=gap - rng.integers(0, 10, gap.size),
        row_upper=gap + rng.integers(0, 10, gap.size),
        col_lower=plan - 30,
        col_upper=plan + 30,
        cost=rng.integers(-100, 101, columns),
    )


def closure(rows: int, columns: int, seed: int = 0) -> LinearForm:
    """Cheeses that pay and equipment that costs: each cheese asks for some equipment."""
    rng = np.random.default_rng(seed)
    cheeses = columns // 2
    cheese = rng.integers(0, cheeses, rows)
    gear = rng.integers(cheeses, columns, rows)
    profit = np.append(rng.integers(50, 300, cheeses), -rng.integers(50, 500, columns - cheeses))
    return LinearForm.from_arrays(
        _difference_matrix(cheese, gear, columns),
        row_lower=0,
        row_upper=np.inf,
        col_lower=0,
        col_upper=1,
        cost=-profit,
        integer=True,
    )


def lateness(rows: int, columns: int, seed: int = 0) -> LinearForm:
    """Starts in an order with gaps, and a column each for how late they are, at a cost."""
    rng = np.random.default_rng(seed)
    starts = columns // 2
    before, after = _pairs(rng, rows - starts, starts)
    late = np.arange(starts)
    due = rng.integers(0, 4 * starts, starts)
    return LinearForm.from_arrays(
        _difference_matrix(np.append(before, late), np.append(after, late + starts), columns),
        row_lower=np.append(rng.integers(1, 30, before.size), -due),
        row_upper=np.inf,
        col_lower=0,
        col_upper=np.inf,
        cost=np.append(np.zeros(starts), rng.integers(1, 20, starts)),
    )


def runs(rows: int, columns: int, seed: int = 0) -> LinearForm:
    """Wheels started per day, with least and most for stretches of days."""
    rng = np.random.default_rng(seed)
    plan = rng.integers(0, 9, columns)
    first = rng.integers(0, columns - 1, rows)
    last = np.minimum(first + rng.integers(1, 30, rows), columns - 1)
    length = last - first + 1
    matrix = sp.csr_array(
        (
            np.ones(int(length.sum())),
            np.concatenate([np.arange(a, b + 1) for a, b in zip(first, last, strict=True)]),
            np.concatenate([[0], np.cumsum(length)]),
        ),
        shape=(rows, columns),
    )
    made = matrix @ plan
    return LinearForm.from_arrays(
        matrix,
        row_lower=made - rng.integers(0, 5, rows),
        row_upper=made + rng.integers(0, 5, rows),
        col_lower=0,
        col_upper=12,
        cost=rng.integers(1, 100, columns),
    )


def _pairs(rng: np.random.Generator, rows: int, columns: int) -> tuple[np.ndarray, np.ndarray]:
    ends = np.sort(rng.integers(0, columns, (rows, 2)), axis=1)
    ends = ends[ends[:, 0] < ends[:, 1]]
    return ends[:, 0], ends[:, 1]


def _difference_matrix(before: np.ndarray, after: np.ndarray, columns: int) -> sp.csr_array:
    row = np.arange(before.size)
    return sp.csr_array(
        (np.repeat([-1.0, 1.0], row.size), (np.tile(row, 2), np.append(before, after))),
        shape=(row.size, columns),
    )


FAMILIES = {f.__name__: f for f in (differences, windows, closure, lateness, runs)}
REPEATS = 3
SIZES = ((800, 300), (3_000, 1_000), (12_000, 2_000), (12_000, 5_000), (40_000, 10_000))


def largest_block(form: LinearForm) -> tuple[NormalForm, ConetworkStructure]:
    """The certified block of a form with the most rows."""
    normal = normalise(form)
    blocks = blocks_of(normal)
    proofs = certify(normal, blocks, FOREVER)
    k = max(range(len(blocks)), key=lambda k: blocks[k].rows.size * (not blocks[k].trivial))
    proof = proofs[k]
    assert proof is not None
    part = proof[1].part
    assert isinstance(part, Conetwork)
    structure = ConetworkStructure(NetworkStructure(part.tree, part.arcs))
    return normal.restrict(blocks[k].rows, blocks[k].columns), structure


def side_by_side(name: str, normal: NormalForm, structure: ConetworkStructure) -> float:
    """Time both ways on a block, check our optimum exactly, and return the ratio."""
    costs = whole_costs(normal)

    def ours() -> Vertex:
        return ConetworkOracle(normal, structure).optimise(costs.numerators, FOREVER)

    def highs() -> Vertex:
        return HighsBasis(normal).optimise(costs.numerators, FOREVER)

    end = ours()
    assert end.status == "optimal"
    assert prove_optimal(normal, costs, end.x, end.row_dual / costs.denominator).exact
    seconds = medians({"latpath": ours, "highs": highs}, REPEATS)
    m, n = normal.matrix.shape
    print_row(f"{name} {m} x {n}", seconds)
    return seconds["highs"] / seconds["latpath"]


def main() -> None:
    """Print a line per family and size, and the geometric mean of the ratios of each size."""
    sizes = SIZES[:3] if "--quick" in sys.argv else SIZES
    for rows, columns in sizes:
        ratios = [
            side_by_side(name, *largest_block(family(rows, columns)))
            for name, family in FAMILIES.items()
        ]
        print(f"{'':34} geometric mean {statistics.geometric_mean(ratios):.1f}x", flush=True)


if __name__ == "__main__":
    main()

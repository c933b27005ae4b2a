"""Recognition of every structure: seconds up to 1,000,000 nonzeros, and their growth.

Forms as models give them, normalised and cut into blocks; timed is the search for certificates.
`network_recognition.py` and `systems.py` look closer at networks and at systems of equations.

Run: python tests/bench/recognition.py [PLOT.png]
"""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import scipy.sparse as sp
from growth import measure, plot
from network_recognition import bushy, disguised

sys.path.insert(0, str(Path(__file__).parents[1]))
from system_models import mixed_rows

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.certify import certify

SIZES = (62_500, 125_000, 250_000, 500_000, 1_000_000)
Generator = np.random.Generator


def incidence(nonzeros: int, rng: Generator) -> LinearForm:
    """A random network's incidence matrix, some rows negated."""
    arcs, nodes = nonzeros // 2, nonzeros // 20
    tail = rng.integers(0, nodes, arcs)
    head = (tail + rng.integers(1, nodes, arcs)) % nodes
    sign = rng.choice([-1.0, 1.0], nodes)
    column = np.arange(arcs)
    data = np.concatenate([sign[tail], -sign[head]])
    places = np.r_[tail, head], np.r_[column, column]
    return with_room(sp.csc_array((data, places), shape=(nodes, arcs)))


def interval(nonzeros: int, rng: Generator) -> LinearForm:
    """Runs of ones, 30 periods long on average."""
    columns, rows = nonzeros // 30, nonzeros // 200
    length = rng.integers(2, 59, columns)
    begin = (rng.random(columns) * (rows - length)).astype(int)
    row = np.concatenate([np.arange(b, b + k) for b, k in zip(begin, length, strict=True)])
    column = np.repeat(np.arange(columns), length)
    return with_room(sp.csc_array((np.ones(row.size), (row, column)), shape=(rows, columns)))


def network(nonzeros: int, rng: Generator) -> LinearForm:
    """Tree paths in a shallow tree, in disguise."""
    return with_room(bushy(nonzeros, rng))


def conetwork(nonzeros: int, rng: Generator) -> LinearForm:
    """The transpose of that."""
    return with_room(bushy(nonzeros, rng).T)


def reduced(nonzeros: int, rng: Generator) -> LinearForm:
    """A series-parallel network: reductions leave nothing of it.

    Starting from single entries, lines are copied and then prolonged by an entry, at random.
    """
    entries: list[set[int]] = [{0}]
    columns, count = 1, 1
    while count < nonzeros:
        row = int(rng.integers(len(entries)))
        if len(entries[row]) < 30 and rng.random() < 0.5:
            count += len(entries[row])
            entries.append(set(entries[row]))
        else:
            entries[row].add(columns)
            columns, count = columns + 1, count + 1
    rows = [i for i, row in enumerate(entries) for _ in row]
    return with_room(disguised(rows, [j for row in entries for j in row], [1] * len(rows), rng))


def unimodular(nonzeros: int, rng: Generator) -> LinearForm:
    """Flow balances to which multiples of each other were added."""
    matrix, _, sides = mixed_rows(nonzeros // 21, rng)
    return LinearForm.from_arrays(
        matrix, row_lower=sides, row_upper=sides, col_lower=0, col_upper=2, cost=0
    )


def with_room(matrix: sp.csc_array) -> LinearForm:
    """A form whose rows are inequalities on both sides."""
    return LinearForm.from_arrays(
        matrix, row_lower=0, row_upper=9, col_lower=0, col_upper=1, cost=0
    )


STRUCTURES = (incidence, interval, reduced, network, conetwork, unimodular)


def work(structure: Callable[..., LinearForm]) -> Iterator[tuple[int, Callable[[], object]]]:
    """The search for certificates at each size."""
    for size in SIZES:
        form = structure(size, np.random.default_rng(0))
        normal = normalise(form)
        blocks = blocks_of(normal)
        found = {proof and proof[0] for proof in certify(normal, blocks, Deadline(None))}
        name = structure.__name__.replace("reduced", "network")
        assert found <= {name, "trivial", "incidence"} and name in found, found
        yield form.matrix.nnz, lambda n=normal, b=blocks: certify(n, b, Deadline(None))


def main() -> None:
    """Print seconds by size and the exponent of their growth, and plot them."""
    curves = [measure(structure.__name__, work(structure)) for structure in STRUCTURES]
    if len(sys.argv) > 1:
        plot(curves, sys.argv[1])


if __name__ == "__main__":
    main()

"""Recognition of networks in disguise: seconds up to 1,000,000 nonzeros, and their growth.

Run: python tests/bench/network_recognition.py [PLOT.png]
"""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from functools import partial
from itertools import repeat

import numpy as np
import scipy.sparse as sp
from growth import measure, plot

from pyomo_latpath.integrality import network

SIZES = (31_250, 62_500, 125_000, 250_000, 500_000, 1_000_000)
Generator = np.random.Generator


def disguised(rows: list[int], columns: list[int], values: list[int], rng: Generator):
    """Rows and columns in random order, some of them negated."""
    m, n = max(rows) + 1, max(columns) + 1
    signs = rng.choice([-1, 1], m)[rows] * rng.choice([-1, 1], n)[columns] * np.array(values)
    places = rng.permutation(m)[rows], rng.permutation(n)[columns]
    matrix = sp.csc_array((signs, places), shape=(m, n))
    matrix.sort_indices()
    return matrix


def random_network(nonzeros: int, rng: Generator, reach: int, span: int, density: float):
    """Tree paths between random nodes; a node hangs on one of the `reach` before it."""
    rows: list[int] = []
    columns: list[int] = []
    values: list[int] = []
    m = int(nonzeros / density)
    parent = [0] + [int(rng.integers(max(0, v - reach), v)) for v in range(1, m + 1)]
    for column in range(nonzeros):
        x = int(rng.integers(m + 1))
        y = int(np.clip(x + rng.integers(-span, span + 1), 0, m))
        while x != y:
            forward = x > y
            low = x if forward else y
            rows.append(low - 1)
            columns.append(column)
            values.append(1 if forward else -1)
            x, y = (parent[x], y) if forward else (x, parent[y])
        if len(rows) >= nonzeros:
            break
    used = {row: k for k, row in enumerate(sorted(set(rows)))}
    kept = {column: k for k, column in enumerate(sorted(set(columns)))}
    return disguised([used[row] for row in rows], [kept[c] for c in columns], values, rng)


def bushy(nonzeros: int, rng: Generator):
    """A shallow tree, arcs from anywhere to anywhere: soon one large rigid member."""
    return random_network(nonzeros, rng, reach=nonzeros, span=nonzeros, density=20)


def stretched(nonzeros: int, rng: Generator):
    """A long thin tree, arcs over some 20 tree arcs."""
    return random_network(nonzeros, rng, reach=5, span=60, density=20)


def loose(nonzeros: int, rng: Generator):
    """Few arcs: many members, large polygons."""
    return random_network(nonzeros, rng, reach=5, span=12, density=3)


def chain(nonzeros: int, rng: Generator):
    """Runs of three rows, each a row further: every column joins members."""
    size = nonzeros // 3
    rows = [k + d for k in range(size) for d in range(3)]
    return disguised(rows, [k for k in range(size) for _ in range(3)], [1] * len(rows), rng)


def chain_transposed(nonzeros: int, rng: Generator):
    """The transpose of `chain`, a network as well."""
    return chain(nonzeros, rng).T.tocsc()


def runs(nonzeros: int, rng: Generator):
    """Intervals of up to 60 rows, in hiding."""
    rows: list[int] = []
    columns: list[int] = []
    m = nonzeros // 100
    for column in range(nonzeros // 30):
        length = int(rng.integers(2, 60))
        begin = int(rng.integers(m - length))
        rows += range(begin, begin + length)
        columns += repeat(column, length)
    return disguised(rows, columns, [1] * len(rows), rng)


KINDS: tuple[Callable[..., sp.csc_array], ...] = (
    bushy,
    stretched,
    loose,
    chain,
    chain_transposed,
    runs,
)


def work(kind: Callable[..., sp.csc_array]) -> Iterator[tuple[int, Callable[[], object]]]:
    """Recognition at each size; what is found is checked, outside of the time."""
    for size in SIZES:
        matrix = kind(size, np.random.default_rng(0))
        part = network.recognise(matrix)
        assert part is not None, kind
        part.check(matrix)
        yield matrix.nnz, partial(network.recognise, matrix)


def main() -> None:
    """Print seconds by size and the exponent of their growth, and plot them."""
    curves = [measure(kind.__name__, work(kind)) for kind in KINDS]
    if len(sys.argv) > 1:
        plot(curves, sys.argv[1])


if __name__ == "__main__":
    main()

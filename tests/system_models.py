"""Systems of equations that are networks in disguise, as models write them, in any size.

Each family returns a matrix, which of its rows are equations, and sides that some whole plan
meets. Their entries are not all 0, 1 and -1, or their columns not paths in any tree, but row
operations with the equations turn them into networks.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
import scipy.sparse as sp


class System(NamedTuple):
    """Rows that are equations hold with `sides`, the others have slack up to 3 below them."""

    matrix: sp.csc_array
    equality: np.ndarray
    sides: np.ndarray


Family = Callable[[int, np.random.Generator], System]


def balances(nodes: int, rng: np.random.Generator, reach: int | None = None) -> sp.csr_array:
    """Flow balances at nodes with two arcs each; node 0 is reached from all, its row left out.

    Arcs lead to one of the `reach` nodes before (all of them, unless it is given).
    """
    head = np.tile(np.arange(1, nodes + 1), 2)
    low = np.maximum(0, head - (reach or nodes))
    tail = rng.integers(low, head)
    tail, head = np.where(rng.random(head.size) < 0.5, (tail, head), (head, tail))
    ends, arc = np.concatenate([head, tail]), np.tile(np.arange(head.size), 2)
    sign = np.repeat([1, -1], head.size)
    return sp.csr_array((sign, (ends, arc)), shape=(nodes + 1, head.size))[1:]


def system(matrix: sp.sparray, rng: np.random.Generator, equality: np.ndarray | None = None):
    """Put in sides, and rows and columns in random order."""
    m, n = matrix.shape
    equality = np.full(m, True) if equality is None else equality
    rows, columns = rng.permutation(m), rng.permutation(n)
    matrix = sp.csr_array(matrix)[rows, :][:, columns].tocsc().astype(np.int64)
    matrix.eliminate_zeros()
    matrix.sort_indices()
    return System(matrix, equality[rows], matrix @ rng.integers(0, 3, n))


def mixed_rows(size: int, rng: np.random.Generator) -> System:
    """Balances to which multiples of each other were added, three times as many as rows."""
    return system(_mixture(size, np.arange(size), rng) @ balances(size, rng), rng)


def mixed_rows_of_a_chain(size: int, rng: np.random.Generator) -> System:
    """The same for a long thin network: arcs lead to one of the five nodes before."""
    return system(_mixture(size, np.arange(size), rng) @ balances(size, rng, reach=5), rng)


def equations_and_limits(size: int, rng: np.random.Generator) -> System:
    """Balances mixed with each other, and added to limits on single arcs' flows and on pairs."""
    equations = size // 2
    network = balances(equations, rng)
    picked = rng.choice(network.shape[1], size - equations, replace=False)
    limits = sp.csr_array(
        (np.ones(picked.size, np.int64), (np.arange(picked.size), picked)),
        shape=(picked.size, network.shape[1]),
    )
    mixture = _mixture(size, np.arange(equations), rng)
    matrix = mixture @ sp.vstack([network, limits], format="csr")
    return system(matrix, rng, np.arange(size) < equations)


def _mixture(size: int, sources: np.ndarray, rng: np.random.Generator) -> sp.csr_array:
    """A product of elementary matrices that keeps rows short."""
    rows: list[dict[int, int]] = [{i: 1} for i in range(size)]
    for _ in range(3 * size):
        i, k = int(rng.integers(size)), int(rng.choice(sources))
        factor = int(rng.choice([-2, -1, 1, 2]))
        if i != k and len(rows[i]) + len(rows[k]) <= 8:
            for j, value in rows[k].items():
                rows[i][j] = rows[i].get(j, 0) + factor * value
    places = [(i, j) for i, row in enumerate(rows) for j in row]
    values = [value for row in rows for value in row.values()]
    return sp.csr_array((values, tuple(np.array(places).T)), shape=(size, size))


def running_sums(size: int, rng: np.random.Generator) -> System:
    """Stock-days: in groups of eight rows, sums of the sums of all balances so far."""
    sums = np.tril(np.ones((8, 8), np.int64))
    twice = sp.kron(sp.eye_array(-(-size // 8)), sums @ sums, format="csr")[:size, :size]
    return system(twice @ balances(size, rng), rng)


def totals(size: int, rng: np.random.Generator) -> System:
    """All balances, node 0 apart, and their totals by region and by day, which depend on them."""
    nodes = size * 4 // 5
    groups = size - nodes
    parts = []
    for count in (groups // 2, groups - groups // 2):
        group = rng.integers(0, count, nodes)
        ones = np.ones(nodes, np.int64)
        parts.append(sp.csr_array((ones, (group, np.arange(nodes))), shape=(count, nodes)))
    return system(sp.vstack([sp.eye_array(nodes), *parts]) @ balances(nodes, rng), rng)


def two_levels(size: int, rng: np.random.Generator) -> System:
    """Each of many flows is a or a + 1, chosen by two columns that add up to 1."""
    choices, nodes = size // 3, size - 2 * (size // 3)
    network = balances(nodes, rng)
    level = rng.integers(2, 50, choices)
    k = np.arange(choices)
    flow = rng.choice(network.shape[1], choices, replace=choices > network.shape[1])
    shape = choices, network.shape[1]
    is_flow = sp.csr_array((np.full(choices, -1), (k, flow)), shape=shape)
    one = sp.eye_array(choices, dtype=np.int64, format="csr")
    low, high = one * level, one * (level + 1)
    blocks = [[network, None, None], [is_flow, low, high], [None, one, one]]
    return system(sp.block_array(blocks, format="csr"), rng)


def sums_and_differences(size: int, rng: np.random.Generator) -> System:
    """Of many pairs of flows, sum and difference are given: whole for these sides alone."""
    pairs, nodes = size // 4, size - 2 * (size // 4)
    network = balances(nodes, rng)
    both = rng.choice(network.shape[1], (2, pairs), replace=False)
    ones, k = np.ones(pairs, np.int64), np.arange(pairs)
    first, second = (sp.csr_array((ones, (k, x)), shape=(pairs, 2 * nodes)) for x in both)
    return system(sp.vstack([network, first + second, first - second]), rng)


FAMILIES: tuple[Family, ...] = (
    mixed_rows,
    mixed_rows_of_a_chain,
    equations_and_limits,
    running_sums,
    totals,
    two_levels,
    sums_and_differences,
)

"""Thousands of small matrices: a network is found if and only if there is one.

Told apart by two slow tests that know nothing of each other or of what is tested. The signs are
right if and only if the matrix is TU: all minors are computed (Camion 1965: a matrix whose
nonzeros are in the places of a network matrix has, up to negated rows and columns, just one choice
of signs that makes it TU). The places are right if and only if the rows fall apart into bridges
as Tutte (1960) has it.
"""

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import are_tu
from graph_search import bits, is_realisable_by_bridges

from pyomo_latpath.integrality import network

#: Matrices of each shape from 4x4 to 7x7, 20,000 in all; `test_network` has all smaller ones.
EACH = 1250


def random_paths(m, n, rng):
    """Tree paths in a random tree, rows and columns negated at random."""
    parent = [0, *(int(rng.integers(0, node)) for node in range(1, m + 1))]
    matrix = np.zeros((m, n), np.int64)
    for j in range(n):
        x, y = (int(end) for end in rng.integers(0, m + 1, 2))
        while x != y:
            if x > y:
                matrix[x - 1, j], x = 1, parent[x]
            else:
                matrix[y - 1, j], y = -1, parent[y]
    return rng.choice([1, -1], (m, 1)) * matrix * rng.choice([1, -1], n)


def random_matrix(m, n, k, rng):
    """By turns: networks, their transposes, both with entries changed, and any entries."""
    kind = k % 8
    if kind == 0:
        return rng.choice([0, 1, -1], (m, n), p=[0.6, 0.2, 0.2])
    if kind == 1:
        return rng.choice([0, 1], (m, n))
    matrix = random_paths(m, n, rng) if kind % 2 else random_paths(n, m, rng).T
    for _ in range(kind // 2 - 1):
        matrix[rng.integers(m), rng.integers(n)] = rng.integers(-1, 2)
    return matrix


@pytest.mark.parametrize("m", range(4, 8))
def test_found_if_and_only_if_there_is_one(m):
    rng = np.random.default_rng(m)
    seen = {True: 0, False: 0}
    for n in range(4, 8):
        matrices = np.array([random_matrix(m, n, k, rng) for k in range(EACH)])
        for matrix, tu in zip(matrices, are_tu(matrices).tolist(), strict=True):
            there_is_one = tu and is_realisable_by_bridges(bits(matrix))
            table = sp.csc_array(matrix)
            part = network.recognise(table)
            assert (part is not None) == there_is_one, matrix
            if part is not None:
                part.check(table)
            seen[there_is_one] += 1
    assert min(seen.values()) > 4 * EACH / 5, seen

"""From any lines that are not totally unimodular to a smallest conflict."""

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu, minors
from brute_force import network_matrix
from decisions import small_matrix

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality.regular.clock import OutOfTime
from pyomo_latpath.integrality.regular.conflict import determinant, smallest_conflict
from pyomo_latpath.integrality.regular.summand import Contradiction


def test_a_smallest_conflict_from_all_lines():
    rng = np.random.default_rng(0)
    seen = 0
    while seen < 60:
        matrix = small_matrix(rng, most=6)
        if is_tu(matrix):
            continue
        seen += 1
        everything = Contradiction(range(sum(matrix.shape)))
        rows, columns = smallest_conflict(sp.csc_array(matrix), everything, Deadline(None))
        part = matrix[np.ix_(rows, columns)]
        *smaller, (value,) = minors(part)
        assert value[0] == determinant(part)
        assert abs(value[0]) == 2
        assert all(np.abs(values).max() <= 1 for values in smaller)


def test_a_long_cycle():
    size = 400
    ring = np.eye(size, dtype=int) + np.roll(np.eye(size, dtype=int), 1, axis=0)
    assert determinant(ring) == 0
    ring[0, 0] = -1
    assert abs(determinant(ring)) == 2
    found = Contradiction(range(2 * size))
    rows, columns = smallest_conflict(sp.csc_array(ring), found, Deadline(None))
    assert rows.size == columns.size == size


@pytest.mark.parametrize("seed", range(20))
def test_determinants_of_network_matrices(seed):
    rng = np.random.default_rng(seed)
    tree = [(i + 1, int(rng.integers(i + 1))) for i in range(6)]
    arcs = [tuple(rng.choice(7, 2, replace=False).tolist()) for _ in range(6)]
    matrix = network_matrix(tree, arcs)
    assert determinant(matrix) == list(minors(matrix))[-1][0, 0]


def test_out_of_time():
    ring = sp.csc_array([[1, 1], [-1, 1]])
    with pytest.raises(OutOfTime):
        smallest_conflict(ring, Contradiction(range(4)), Deadline(0))

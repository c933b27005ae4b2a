"""Small parts that are neither graphic nor cographic."""

import networkx as nx
import numpy as np
import pytest
import scipy.sparse as sp
from known_matrices import FANO, R10
from regular_models import disguised, regular

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality.regular import r10
from pyomo_latpath.integrality.regular.minors import (
    Minor,
    near,
    neither,
    rows_and_columns,
    small_core,
    small_minor,
    smallest,
)
from pyomo_latpath.integrality.regular.separation import links_of, smallest_separation

NEVER = Deadline(None)


def a_sum(seed: int) -> sp.csc_array | None:
    """A random sum that is neither graphic nor cographic."""
    rng = np.random.default_rng(seed)
    while True:
        piece = regular(rng, 3, 7, kinds=("network", "conetwork"), orders=(3, 3, 2))
        matrix = sp.csc_array(disguised(rng, piece, pivots=2).matrix)
        if neither(matrix, NEVER):
            return matrix


@pytest.mark.parametrize("table", [*R10, FANO, FANO.T])
def test_smallest_ones(table):
    assert neither(sp.csc_array(table), NEVER)
    for axis in (0, 1):
        for k in range(table.shape[axis]):
            assert not neither(sp.csc_array(np.delete(table, k, axis)), NEVER)


def test_a_smallest_set():
    rng = np.random.default_rng(0)
    for _ in range(100):
        wanted = [set(rng.choice(30, rng.integers(1, 6)).tolist()) for _ in range(3)]

        def holds(some, wanted=wanted):
            return any(few <= set(some) for few in wanted)

        order = rng.permutation(30).tolist()
        found = smallest(lambda kept, order=order: order, holds)
        assert holds(found)
        assert not any(holds([x for x in found if x != y]) for y in found)


def test_near_lines_come_first():
    rng = np.random.default_rng(1)
    matrix = sp.csc_array(rng.random((8, 8)) < 0.2)
    links = links_of(matrix)
    listed = near(links, [3])
    assert sorted(listed) == list(range(16))
    graph = nx.Graph({x: list(beside) for x, beside in links.items()})
    distance = nx.single_source_shortest_path_length(graph, 3)
    steps = [distance[x] for x in listed if x in distance]
    assert steps == sorted(steps)
    assert set(listed[: len(steps)]) == set(distance)


@pytest.mark.parametrize("seed", range(8))
def test_a_core_and_a_minor_of_a_sum(seed):
    matrix = a_sum(seed)
    m = matrix.shape[0]
    core = small_core(matrix, links_of(matrix), NEVER)
    rows, columns = rows_and_columns(core, m)
    assert neither(matrix[rows, :][:, columns], NEVER)
    for line in core:
        rows, columns = rows_and_columns([x for x in core if x != line], m)
        assert not neither(matrix[rows, :][:, columns], NEVER)


@pytest.mark.parametrize("seed", range(12))
def test_a_small_minor(seed):
    rng = np.random.default_rng(seed)
    while True:
        support = sp.csc_array((rng.random((9, 9)) < 0.3).astype(np.int64))
        rigid = smallest_separation(support, NEVER) is None
        if rigid and neither(support, NEVER):
            break
    whole = Minor(links_of(support), frozenset(range(9)))
    minor = small_minor(whole, NEVER)
    matrix, lines = minor.matrix()
    assert len(minor.links) == lines.size == sum(matrix.shape) <= 12
    assert smallest_separation(matrix, NEVER) is None
    assert neither(matrix, NEVER)
    for x, y in minor.pivots:
        whole = whole.pivoted(x, y)
    again, _ = whole.restricted(lines.tolist()).matrix()
    assert (again.toarray() == matrix.toarray()).all()


@pytest.mark.parametrize("table", R10)
def test_r10_in_any_order(table):
    rng = np.random.default_rng(0)
    for _ in range(20):
        signs = rng.choice([1, -1], 5)[:, None] * rng.choice([1, -1], 5)
        matrix = sp.csc_array((table * signs)[rng.permutation(5)][:, rng.permutation(5)])
        r10.recognise(matrix).check(matrix)
        wrong = matrix.copy()
        wrong.data[rng.integers(wrong.nnz)] *= -1
        assert r10.find(wrong) is not None
        assert r10.recognise(wrong) is None
    assert r10.find(sp.csc_array(np.ones((5, 5)))) is None
    assert r10.find(sp.csc_array(np.ones((4, 5)))) is None

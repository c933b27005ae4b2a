"""Separations against their definition, over all sets of lines."""

import itertools

import numpy as np
import pytest
import scipy.sparse as sp

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality.regular.clock import OutOfTime
from pyomo_latpath.integrality.regular.separation import (
    links_of,
    pivot,
    smallest_separation,
    spread,
    three_separations,
)


def rank(table: np.ndarray) -> int:
    """Rank over GF(2), by elimination."""
    rows = [int("".join(map(str, row)), 2) for row in table.astype(int).tolist() if len(row)]
    found = 0
    while rows:
        row = rows.pop()
        if row:
            found += 1
            low = row & -row
            rows = [other ^ row if other & low else other for other in rows]
    return found


def cut_rank(support: np.ndarray, side: np.ndarray) -> int:
    """The connectivity of a set of lines: the ranks of both corners."""
    m = len(support)
    one, other = (support[np.ix_(s[:m], ~s[m:])] for s in (side, ~side))
    return rank(one) + rank(other)


def sides(size: int):
    """All ways to part lines in two, line 0 always on the same side."""
    for others in itertools.product([False, True], repeat=size - 1):
        yield np.array([True, *others])


def random_support(rng: np.random.Generator, most: int = 5) -> np.ndarray:
    return rng.random(rng.integers(2, most, 2)) < rng.choice([0.4, 0.6, 0.8])


@pytest.mark.parametrize("seed", range(60))
def test_the_smallest_separation(seed):
    support = random_support(np.random.default_rng(seed))
    size = sum(support.shape)
    found = smallest_separation(sp.csc_array(support), Deadline(None))
    ranks = {}
    for side in sides(size):
        if side.all():
            continue
        ranks.setdefault(cut_rank(support, side), []).append(min(side.sum(), size - side.sum()))
    if 0 in ranks:
        assert cut_rank(support, found) == 0
        assert 0 < found.sum() < size
    elif max(ranks.get(1, [0])) >= 2:
        assert cut_rank(support, found) == 1
        assert 2 <= found.sum() <= size - 2
    else:
        assert found is None


@pytest.mark.parametrize("seed", range(60))
def test_what_follows_for_a_separation(seed):
    rng = np.random.default_rng(seed)
    support = random_support(rng)
    size = sum(support.shape)
    order = rng.permutation(size)
    inside, outside = order[: int(rng.integers(1, 4))], order[-int(rng.integers(1, 4)) :]
    if np.intersect1d(inside, outside).size:
        return
    given = np.zeros(size, bool)
    given[inside] = True
    m = len(support)
    some = np.isin(np.arange(size), [*inside, *outside])
    lowest = cut_rank(support[np.ix_(some[:m], some[m:])], given[some])
    possible = [
        side
        for half in sides(size)
        for side in (half, ~half)
        if side[inside].all() and not side[outside].any() and cut_rank(support, side) == lowest
    ]
    found = spread(links_of(sp.csc_array(support)), inside, outside)
    if found.hit >= 0:
        assert not possible
        way = found.way_to(found.hit)
        assert way[-1] in outside
        assert not set(way[:-1]) & {*inside.tolist(), *outside.tolist()}
    else:
        assert cut_rank(support, found.reached) == lowest
        assert all((side | ~found.reached).all() for side in possible)


@pytest.mark.parametrize("seed", range(30))
def test_what_lies_on_the_way_contradicts_already(seed):
    rng = np.random.default_rng(seed)
    support = rng.random((6, 6)) < 0.5
    inside, outside = np.array([0, 6]), np.array([1, 7])
    found = spread(links_of(sp.csc_array(support)), inside, outside)
    if found.hit < 0:
        return
    lines = sorted({0, 6, 1, 7, *found.way_to(found.hit)})
    rows, columns = [x for x in lines if x < 6], [x - 6 for x in lines if x >= 6]
    part = sp.csc_array(support[np.ix_(rows, columns)])
    there = {line: k for k, line in enumerate(lines)}
    again = spread(
        links_of(part),
        np.array([there[x] for x in inside]),
        np.array([there[x] for x in outside]),
    )
    assert again.hit >= 0


@pytest.mark.parametrize("seed", range(30))
def test_a_pivot_of_links_is_one_of_the_matrix(seed):
    rng = np.random.default_rng(seed)
    support = rng.random((4, 5)) < 0.6
    support[1, 2] = True
    links = links_of(sp.csc_array(support))
    pivot(links, 1, 4 + 2)
    after = support ^ np.outer(support[:, 2] & (np.arange(4) != 1), support[1])
    after[:, 2] = support[:, 2]
    names = [0, 6, 2, 3, 4, 5, 1, 7, 8]  # row 1 and column 2 change places
    expected = links_of(sp.csc_array(after))
    assert links == {names[x]: {names[y] for y in beside} for x, beside in expected.items()}


def test_separations_into_halves():
    rng = np.random.default_rng(0)
    for _ in range(5):
        support = rng.random((4, 4)) < 0.6
        found = {tuple(side.tolist()) for side in three_separations(sp.csc_array(support))}
        assert found == {
            tuple(side.tolist())
            for side in sides(8)
            if side.sum() == 4 and cut_rank(support, side) == 2
        }


def test_out_of_time():
    with pytest.raises(OutOfTime):
        smallest_separation(sp.csc_array(np.ones((3, 3))), Deadline(0))

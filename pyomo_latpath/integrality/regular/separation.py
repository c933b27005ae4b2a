"""Separations of a binary matroid that is given by a matrix of 0 and 1.

The matroid's elements are the lines of the matrix: rows 0 to m - 1 (a basis), then columns m to
m + n - 1. In the bipartite graph on the lines, with an edge for each nonzero, the connectivity of
a set of elements is its cut-rank: the rank over GF(2) of the adjacency between the set and the
rest. A set of rank k - 1 with its rest is a k-separation (Tutte 1966; Cunningham 1973 on splits).

Let some elements of both sides be given, with r pairs whose adjacency Q is nonsingular. The rank
is r if and only if the Schur complement of Q, the *residual*, is zero across the cut. A residual
of 1 at (x, y) thus says: where x is on the first side, y is, too. So the separations of this rank
that keep the given elements apart are the closed sets of a directed graph.
"""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass
from itertools import combinations

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.sparse.csgraph import breadth_first_order, connected_components

from ...forms.numbers import Integers

Bits = NDArray[np.bool_]


def adjacency(support: Bits) -> Bits:
    """Adjacency between all lines.

    Examples
    --------
    >>> adjacency(np.array([[True, False]])).astype(int).tolist()
    [[0, 1, 0], [1, 0, 0], [0, 0, 0]]
    """
    m, n = support.shape
    links = np.zeros((m + n, m + n), np.bool_)
    links[:m, m:] = support
    links[m:, :m] = support.T
    return links


def residual(links: Bits, inside: Integers, outside: Integers) -> Bits:
    """What a separation that keeps two sets apart must respect.

    Parameters
    ----------
    links : ndarray, shape (N, N), bool
        Adjacency.
    inside, outside : ndarray, int64
        Disjoint sets of lines.

    Returns
    -------
    ndarray, shape (N, N), bool
    """
    rest = links
    while True:
        places = np.argwhere(rest[np.ix_(inside, outside)])
        if not len(places):
            return rest
        x, y = inside[places[0, 0]], outside[places[0, 1]]
        rest = rest ^ np.outer(rest[:, y], rest[x])


@dataclass(frozen=True, eq=False)
class Spread:
    """What follows from a set of lines on one side.

    Attributes
    ----------
    reached : ndarray, shape (N,), bool
        The smallest closed set; only a part of it if `hit` is a line.
    parent : ndarray, shape (N,), int64
        The line each one was reached from; -1 for those given.
    hit : int
        The first line of the other side to be reached, or -1.
    """

    reached: Bits
    parent: Integers
    hit: int

    def way_to(self, line: int) -> list[int]:
        """The lines on a shortest way from those given to one that was reached, and that one."""
        way = []
        while self.parent[line] >= 0:
            way.append(line)
            line = int(self.parent[line])
        return way[::-1]


def spread(rest: Bits, inside: Integers, outside: Integers) -> Spread:
    """Follow the implications of a residual, breadth first.

    Examples
    --------
    Can the first row and column be a side of a 1-separation that the last column is not on?

    >>> links = adjacency(np.array([[1, 0, 0], [0, 1, 1]], dtype=bool))
    >>> found = spread(links, np.array([0, 2]), np.array([4]))
    >>> found.hit, found.reached.astype(int).tolist()
    (-1, [1, 0, 1, 0, 0])
    """
    size = len(rest)
    barred = np.zeros(size, np.bool_)
    barred[outside] = True
    free, parent = np.ones(size, np.bool_), np.full(size, -1)
    free[inside] = False
    queue = deque(inside.tolist())
    while queue:
        x = queue.popleft()
        fresh = np.flatnonzero(rest[x] & free)
        parent[fresh], free[fresh] = x, False
        stop = fresh[barred[fresh]]
        if stop.size:
            return Spread(~free, parent, int(stop[0]))
        queue.extend(fresh.tolist())
    return Spread(~free, parent, -1)


def smallest_separation(support: Bits) -> Bits | None:
    """Find a 1-separation, else a 2-separation with two lines or more on each side.

    A 2-separation of a connected matrix cuts some edge (a, b) of each spanning tree. With this
    pair in Q it exists if and only if the implications among the other lines do not tie all of
    them together.

    Parameters
    ----------
    support : ndarray, shape (m, n), bool

    Returns
    -------
    ndarray, shape (m + n,), bool, or None
        The lines on one side. None if the matroid is 3-connected.

    Examples
    --------
    >>> smallest_separation(np.array([[1, 1, 1], [1, 1, 0], [0, 0, 1]], dtype=bool)).astype(int)
    array([0, 0, 0, 1, 1, 0])
    >>> wheel = np.array([[1, 0, 1], [1, 1, 0], [0, 1, 1]], dtype=bool)
    >>> smallest_separation(wheel) is None
    True
    """
    links = adjacency(support)
    size = len(links)
    graph = sp.csr_array(links)
    count, label = connected_components(graph, directed=False)
    if count > 1:
        return np.asarray(label == 0)
    order, above = breadth_first_order(graph, 0, directed=False)
    for a, b in zip(order[1:].tolist(), above[order[1:]].tolist(), strict=True):
        others = np.delete(np.arange(size), [a, b])
        rest = links ^ np.outer(links[:, b], links[a])
        within = rest[np.ix_(others, others)]
        count, label = connected_components(within, directed=True, connection="strong")
        if count > 1:
            side = np.zeros(size, np.bool_)
            side[others[label == _last(within, label, count)]] = True
            side[a] = True
            return side
    return None


def _last(within: Bits, label: Integers, count: int) -> int:
    """A strong component that nothing leads out of."""
    tail, head = np.nonzero(within)
    leaves = np.zeros(count, np.bool_)
    leaves[label[tail[label[tail] != label[head]]]] = True
    return int(np.argmin(leaves))


def three_separations(support: Bits) -> list[Bits]:
    """Find all 3-separations into two halves, by enumeration: for small matrices alone.

    Returns
    -------
    list of ndarray, shape (m + n,), bool
        The sides with line 0.
    """
    size = sum(support.shape)
    links = [sum(1 << y for y in np.flatnonzero(row).tolist()) for row in adjacency(support)]
    found = []
    for others in combinations(range(1, size), size // 2 - 1):
        side = (0, *others)
        outside = (1 << size) - 1 - sum(1 << x for x in side)
        if _rank([links[x] & outside for x in side]) == 2:
            found.append(np.isin(np.arange(size), side))
    return found


def _rank(vectors: list[int]) -> int:
    """Rank over GF(2) of vectors whose entries are the bits of a number."""
    basis: list[int] = []
    for vector in vectors:
        for known in basis:
            vector = min(vector, vector ^ known)
        if vector:
            basis.append(vector)
    return len(basis)

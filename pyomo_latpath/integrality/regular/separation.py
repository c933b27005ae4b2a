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

from ...deadline import Deadline
from ...forms.numbers import Integers
from .clock import check_time

Bits = NDArray[np.bool_]
#: The neighbours of each line.
Links = dict[int, set[int]]


def links_of(matrix: sp.csc_array) -> Links:
    """The bipartite graph of a matrix.

    Examples
    --------
    >>> links_of(sp.csc_array([[1, 0], [-1, 1]]))
    {0: {2}, 1: {2, 3}, 2: {0, 1}, 3: {1}}
    """
    by_row, m = matrix.tocsr(), matrix.shape[0]
    across = np.split(m + by_row.indices, by_row.indptr[1:-1])[: matrix.shape[0]]
    down = np.split(matrix.indices, matrix.indptr[1:-1])[: matrix.shape[1]]
    return {line: set(beside.tolist()) for line, beside in enumerate((*across, *down))}


def pivot(links: Links, x: int, y: int) -> None:
    """Exchange a row and a column that are adjacent, in place, as a pivot over GF(2) does."""
    others, beyond = links[x] - {y}, links[y] - {x}
    for line in others:
        links[line] ^= beyond | {x, y}
    for line in beyond:
        links[line] ^= others | {x, y}
    links[x], links[y] = beyond | {y}, others | {x}


class Residual:
    """What a separation must respect that keeps two sets of lines apart.

    Parameters
    ----------
    links : Links
    inside, outside : ndarray, int64
        Disjoint sets of lines.
    """

    def __init__(self, links: Links, inside: Integers, outside: Integers) -> None:
        self._links = links
        self._terms: list[tuple[Bits, Bits]] = []
        for x in inside.tolist():
            places = np.flatnonzero(self[x][outside])
            if places.size:
                y = int(outside[places[0]])  # x and y are a pair of Q
                column = self._eliminated(y, [(row, column) for column, row in self._terms])
                self._terms.append((column, self[x]))

    def __getitem__(self, x: int) -> Bits:
        """The lines that must be inside where x is."""
        return self._eliminated(x, self._terms)

    def _eliminated(self, line: int, terms: list[tuple[Bits, Bits]]) -> Bits:
        """A row of the adjacency, which is symmetric, minus products of columns and rows."""
        flags = np.zeros(len(self._links), np.bool_)
        flags[list(self._links[line])] = True
        for column, row in terms:
            if column[line]:
                flags ^= row
        return flags


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


def spread(links: Links, inside: Integers, outside: Integers) -> Spread:
    """Follow what a separation must respect that keeps two sets apart, breadth first.

    Examples
    --------
    Can the first row and column be a side of a 1-separation that the last column is not on?

    >>> links = links_of(sp.csc_array([[1, 0, 0], [0, 1, 1]]))
    >>> found = spread(links, np.array([0, 2]), np.array([4]))
    >>> found.hit, found.reached.astype(int).tolist()
    (-1, [1, 0, 1, 0, 0])
    """
    size, residual = len(links), Residual(links, inside, outside)
    free, parent = np.ones(size, np.bool_), np.full(size, -1)
    barred = np.zeros(size, np.bool_)
    free[inside], barred[outside] = False, True
    queue = deque(inside.tolist())
    while queue:
        x = queue.popleft()
        fresh = np.flatnonzero(residual[x] & free)
        parent[fresh], free[fresh] = x, False
        stop = fresh[barred[fresh]]
        if stop.size:
            return Spread(~free, parent, int(stop[0]))
        queue.extend(fresh.tolist())
    return Spread(~free, parent, -1)


def smallest_separation(matrix: sp.csc_array, deadline: Deadline) -> Bits | None:
    """Find a 1-separation, else a 2-separation with two lines or more on each side.

    A 2-separation of a connected matrix cuts some edge (a, b) of each spanning tree. With this
    pair in Q it exists if and only if the implications among the other lines do not tie all of
    them together. Time and space are for matrices of up to some hundred lines.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n)
    deadline : Deadline

    Returns
    -------
    ndarray, shape (m + n,), bool, or None
        The lines on one side. None if the matroid is 3-connected.

    Examples
    --------
    >>> matrix = sp.csc_array([[1, 1, 1], [1, 1, 0], [0, 0, 1]])
    >>> smallest_separation(matrix, Deadline(None)).astype(int)
    array([0, 0, 0, 1, 1, 0])
    >>> wheel = sp.csc_array([[1, 0, 1], [1, 1, 0], [0, 1, 1]])
    >>> smallest_separation(wheel, Deadline(None)) is None
    True
    """
    m, size = matrix.shape[0], sum(matrix.shape)
    links = np.zeros((size, size), np.bool_)
    links[:m, m:] = matrix.toarray() != 0
    links |= links.T
    graph = sp.csr_array(links)
    count, label = connected_components(graph, directed=False)
    if count > 1:
        return np.asarray(label == 0)
    order, above = breadth_first_order(graph, 0, directed=False)
    for a, b in zip(order[1:].tolist(), above[order[1:]].tolist(), strict=True):
        check_time(deadline)
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


def three_separations(matrix: sp.csc_array) -> list[Bits]:
    """Find all 3-separations into two halves, by enumeration: for small matrices alone.

    Returns
    -------
    list of ndarray, shape (m + n,), bool
        The sides with line 0.
    """
    size = sum(matrix.shape)
    links = [sum(1 << y for y in beside) for beside in links_of(matrix).values()]
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

"""Signs that contradict each other: a chordless cycle whose entries sum to 2 modulo 4.

In the bipartite graph of a matrix, with an edge for each nonzero, the entries of a chordless
cycle are a square matrix with two nonzeros in each row and column. Its determinant is 0 if they
sum to 0 modulo 4, else +-2, and then all smaller subdeterminants are 0 or +-1. The sums along
some chordless cycles that generate all cycles determine the signs, up to negating lines, that a
totally unimodular matrix can have (Camion 1965, Characterization of totally unimodular matrices).
"""

from __future__ import annotations

import scipy.sparse as sp

from ...deadline import Deadline
from .clock import check_time


def odd_hole(matrix: sp.csc_array, deadline: Deadline) -> list[int] | None:
    """Look for a contradiction in the signs of a matrix.

    Columns come one by one. Among its rows, shortest ways through the columns before it are
    grown, breadth first; two that meet close a chordless cycle with the column. It takes time in
    proportion to the rows and columns that these ways see.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Entries 0, 1 and -1.
    deadline : Deadline

    Returns
    -------
    list of int or None
        The lines of a cycle (columns count from m on) whose entries sum to 2 modulo 4. None: the
        signs are those that a TU matrix with these nonzeros has, if there is any.

    Examples
    --------
    >>> odd_hole(sp.csc_array([[1, 1, 0], [0, 1, 1], [1, 0, 1]]), Deadline(None))
    [2, 3, 0, 4, 1, 5]
    >>> odd_hole(sp.csc_array([[1, 1, 0], [0, 1, 1], [-1, 0, 1]]), Deadline(None)) is None
    True
    """
    m, n = matrix.shape
    start, rows, entries = (a.tolist() for a in (matrix.indptr, matrix.indices, matrix.data))
    beside: list[dict[int, int]] = [{} for _ in range(m + n)]
    block = list(range(m))
    for column in range(n):
        check_time(deadline)
        here = slice(start[column], start[column + 1])
        own = dict(zip(rows[here], entries[here], strict=True))
        ways = len(own) - len({_root(block, row) for row in own})
        hole = _grow(beside, own, ways)
        if hole is not None:
            return [*hole, m + column]
        beside[m + column] = own
        for row, entry in own.items():
            beside[row][m + column] = entry
            block[_root(block, row)] = _root(block, next(iter(own)))
    return None


def _root(above: list[int], node: int) -> int:
    """The name of a set in a forest of sets."""
    while above[node] != node:
        above[node] = above[above[node]]
        node = above[node]
    return node


def _grow(beside: list[dict[int, int]], own: dict[int, int], ways: int) -> list[int] | None:
    """Tie the rows of a new column together by so many ways; return one that contradicts it."""
    source = {row: row for row in own}
    parent = dict.fromkeys(own, -1)
    product = dict(own)  # of the entries from the column to each line
    group = {row: [row] for row in own}
    front = list(own)
    while ways:
        following = []
        for line in front:
            mine = source[line]
            for other, entry in beside[line].items():
                theirs = source.get(other)
                if theirs is None:
                    source[other], parent[other] = mine, line
                    product[other] = entry * product[line]
                    following.append(other)
                elif theirs != mine and group[theirs] is not group[mine]:
                    way = _way(parent, line)[::-1] + _way(parent, other)
                    # 2l entries sum to 0 modulo 4 if and only if their product is (-1)^l.
                    half = (len(way) + 1) // 2
                    if entry * product[line] * product[other] != (-1) ** half:
                        return way
                    few, many = sorted((group[theirs], group[mine]), key=len)
                    many += few
                    group |= dict.fromkeys(few, many)
                    ways -= 1
        front = following
    return None


def _way(parent: dict[int, int], line: int) -> list[int]:
    """From a line back to the row that it was reached from."""
    way = []
    while line >= 0:
        way.append(line)
        line = parent[line]
    return way

"""Slow and plain ways to tell whether a matrix is that of a network, to compare with."""

from __future__ import annotations

import functools
import itertools

import numpy as np

Signed = tuple[int, int]


@functools.cache
def path_sets(m: int) -> dict[frozenset[int], frozenset[Signed]]:
    """All trees with m numbered edges, as the paths they have.

    Keys are sets of paths, a path being a bit per edge; values are the same paths walked in all
    arcs pointing to node 0: the bits of arcs passed along, and of those passed against.
    """
    found = {}
    for parents in itertools.product(range(m + 1), repeat=m):
        to_root = [climb(parents, node) for node in range(m + 1)]
        if None in to_root:
            continue
        signed = {(a & ~b, b & ~a) for a in to_root for b in to_root}
        found.setdefault(frozenset(a | b for a, b in signed), frozenset(signed))
    return found


def climb(parents: tuple[int, ...], node: int) -> int | None:
    """Bits of the edges from a node to node 0; edge i is that from node i + 1 to its parent."""
    passed = 0
    while node:
        if passed >> (node - 1) & 1:
            return None
        passed |= 1 << (node - 1)
        node = parents[node - 1]
    return passed


def bits(lines: np.ndarray) -> list[int]:
    """A bit per nonzero, for each line."""
    return [sum(1 << k for k in np.flatnonzero(line).tolist()) for line in lines]


def is_realisable(matrix: np.ndarray) -> bool:
    """Whether in some tree the nonzeros of each column are a path: all trees are tried."""
    columns = bits(matrix.T)
    return any(paths.issuperset(columns) for paths in path_sets(len(matrix)))


def is_network(matrix: np.ndarray) -> bool:
    """Whether it is a network matrix: all trees and all directions of their arcs are tried."""
    columns = list(zip(bits(matrix.T > 0), bits(matrix.T < 0), strict=True))
    for paths, signed in path_sets(len(matrix)).items():
        if paths.issuperset(a | b for a, b in columns):
            for turn in range(1 << len(matrix)):
                turned = ((a & ~turn | b & turn, b & ~turn | a & turn) for a, b in columns)
                if signed.issuperset(turned):
                    return True
    return False


def is_realisable_by_bridges(rows: list[int]) -> bool:
    """The same as `is_realisable` for larger matrices, given as a bit per column for each row.

    Tutte (1960), as in Schrijver (1986), section 20.1: of three rows that share a column, one
    must have at least two bridges, the classes of the other rows linked by columns outside it.
    Bridges that overlap must be on different sides of it; then each can be tested on its own.
    """
    once = twice = thrice = 0
    for row in rows:
        once, twice, thrice = once | row, twice | once & row, thrice | twice & row
    if not thrice:
        return True
    column = thrice & -thrice
    for i in [i for i, row in enumerate(rows) if row & column][:3]:
        bridges = bridges_of(rows, i)
        if len(bridges) > 1:
            return has_two_sides(rows, i, bridges) and all(
                is_realisable_by_bridges([rows[i], *(rows[k] for k in bridge)])
                for bridge in bridges
            )
    return False


def bridges_of(rows: list[int], i: int) -> list[list[int]]:
    """Classes of the rows but one, linked by columns where that one is zero."""
    classes: list[tuple[int, list[int]]] = []
    for k, row in enumerate(rows):
        if k != i:
            outside, members = row & ~rows[i], [k]
            for other in [other for other in classes if other[0] & outside]:
                outside, members = outside | other[0], members + other[1]
                classes.remove(other)
            classes.append((outside, members))
    return [members for _, members in classes]


def has_two_sides(rows: list[int], i: int, bridges: list[list[int]]) -> bool:
    """Whether bridges can be put on two sides of a row, overlapping ones apart."""
    inside = [{rows[k] & rows[i] for k in bridge} for bridge in bridges]
    union = [functools.reduce(int.__or__, parts) for parts in inside]

    def crosses(a: int, b: int) -> bool:
        return any(part & union[b] and union[b] & ~part for part in inside[a])

    side: dict[int, int] = {}
    for first in range(len(bridges)):
        front = [] if first in side else [first]
        side.setdefault(first, 0)
        while front:
            a = front.pop()
            for b in range(len(bridges)):
                if a != b and crosses(a, b) and crosses(b, a):
                    if b not in side:
                        side[b] = 1 - side[a]
                        front.append(b)
                    elif side[b] == side[a]:
                        return False
    return True

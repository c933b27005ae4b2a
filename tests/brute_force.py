"""Slow and plain answers to compare with: determinants, vertices, walks in trees."""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from fractions import Fraction

import numpy as np


def maximal_minors(table: np.ndarray) -> Iterator[int]:
    """Determinants of all square submatrices that use every row."""
    m, n = table.shape
    for columns in itertools.combinations(range(n), m):
        yield int(determinant([[Fraction(int(x)) for x in row] for row in table[:, columns]]))


def determinant(table: list[list[Fraction]]) -> Fraction:
    """Determinant by elimination in fractions."""
    table, value = [list(row) for row in table], Fraction(1)
    for k in range(len(table)):
        pivot = next((i for i in range(k, len(table)) if table[i][k]), None)
        if pivot is None:
            return Fraction(0)
        if pivot != k:
            table[k], table[pivot], value = table[pivot], table[k], -value
        value *= table[k][k]
        for i in range(k + 1, len(table)):
            factor = table[i][k] / table[k][k]
            table[i] = [a - factor * b for a, b in zip(table[i], table[k], strict=True)]
    return value


def solve(rows: list[list[Fraction]], right: list[Fraction]) -> list[Fraction] | None:
    """Solve a square system in fractions; None if it is singular."""
    size = len(rows)
    table = [[*map(Fraction, row), Fraction(side)] for row, side in zip(rows, right, strict=True)]
    for k in range(size):
        pivot = next((i for i in range(k, size) if table[i][k]), None)
        if pivot is None:
            return None
        table[k], table[pivot] = table[pivot], table[k]
        table[k] = [a / table[k][k] for a in table[k]]
        for i in range(size):
            if i != k and table[i][k]:
                factor = table[i][k]
                table[i] = [a - factor * b for a, b in zip(table[i], table[k], strict=True)]
    return [row[-1] for row in table]


def vertices(matrix, row_lower, row_upper, col_lower, col_upper) -> set[tuple[Fraction, ...]]:
    """All vertices of {L <= Ax <= U, l <= x <= u}: every choice of n tight limits is tried."""
    matrix = [[Fraction(entry) for entry in row] for row in np.asarray(matrix).tolist()]
    n = len(np.asarray(col_lower))
    unit = [[Fraction(int(i == j)) for j in range(n)] for i in range(n)]
    lines = [*matrix, *unit]
    low = [*np.asarray(row_lower).tolist(), *np.asarray(col_lower).tolist()]
    high = [*np.asarray(row_upper).tolist(), *np.asarray(col_upper).tolist()]
    limits = [
        sorted({Fraction(side) for side in pair if abs(side) != float("inf")})
        for pair in zip(low, high, strict=True)
    ]
    found = set()
    for chosen in itertools.combinations(range(len(lines)), n):
        for sides in itertools.product(*(limits[i] for i in chosen)):
            point = solve([lines[i] for i in chosen], list(sides))
            if point is None:
                break
            values = [sum(a * x for a, x in zip(line, point, strict=True)) for line in lines]
            if all(lo <= v <= hi for lo, v, hi in zip(low, values, high, strict=True)):
                found.add(tuple(point))
    return found


def network_matrix(tree, arcs) -> np.ndarray | None:
    """Walk each arc's path in the tree, step by step; None if the tree is none."""
    m = len(tree)
    ends = [end for pair in (*tree, *arcs) for end in pair]
    if any(not 0 <= end <= m for end in ends):
        return None
    at: dict[int, list[tuple[int, int, int]]] = {node: [] for node in range(m + 1)}
    for row, (tail, head) in enumerate(tree):
        at[tail].append((head, row, 1))
        at[head].append((tail, row, -1))
    matrix = np.zeros((m, len(arcs)), dtype=np.int64)
    for column, (tail, head) in enumerate(arcs):
        steps = {tail: None}
        front = [tail]
        while front:
            node = front.pop()
            for to, row, sign in at[node]:
                if to not in steps:
                    steps[to] = (node, row, sign)
                    front.append(to)
        if len(steps) != m + 1:
            return None
        node = head
        while steps[node] is not None:
            node, row, sign = steps[node]
            matrix[row, column] = sign
    connected = {0}
    for _ in range(m):
        connected |= {to for node in connected for to, _, _ in at[node]}
    return matrix if len(connected) == m + 1 else None

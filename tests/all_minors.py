"""All square subdeterminants of small matrices at once: the definition, order by order."""

from __future__ import annotations

from collections.abc import Iterator
from functools import cache
from itertools import combinations

import numpy as np


def minors(matrix: np.ndarray) -> Iterator[np.ndarray]:
    """Subdeterminants of order 1, 2, ..., by expansion along the last row.

    Each time an array with a row for each set of rows and a column for each set of columns, in
    the order of `combinations`; of a stack of matrices, a stack of such arrays.
    """
    matrix = np.asarray(matrix, dtype=np.int64)
    *stack, m, n = matrix.shape
    before = np.ones((*stack, 1, 1), np.int64)
    for size in range(1, min(m, n) + 1):
        last, first = _last_and_others(m, size)
        values = np.zeros((*stack, last.size, len(_each_left_out(n, size)[0])), np.int64)
        for k in range(size):
            column, rest = (table[:, k] for table in _each_left_out(n, size))
            sign = (-1) ** (size - 1 + k)
            values += sign * matrix[..., last, :][..., column] * before[..., first, :][..., rest]
        yield values
        before = values


def is_tu(matrix: np.ndarray) -> bool:
    """Whether all subdeterminants are 0, 1 or -1."""
    return all(np.abs(values).max() <= 1 for values in minors(matrix))


def are_tu(matrices: np.ndarray) -> np.ndarray:
    """The same for each of a stack of matrices."""
    holds = np.ones(matrices.shape[:-2], np.bool_)
    for values in minors(matrices):
        holds &= (np.abs(values) <= 1).all(axis=(-2, -1))
    return holds


@cache
def _places(size: int, count: int) -> dict[tuple[int, ...], int]:
    return {some: k for k, some in enumerate(combinations(range(size), count))}


@cache
def _last_and_others(m: int, size: int) -> tuple[np.ndarray, np.ndarray]:
    known = _places(m, size - 1)
    last = [some[-1] for some in combinations(range(m), size)]
    return np.array(last), np.array([known[some[:-1]] for some in combinations(range(m), size)])


@cache
def _each_left_out(n: int, size: int) -> tuple[np.ndarray, np.ndarray]:
    known, chosen = _places(n, size - 1), list(combinations(range(n), size))
    rest = [[known[some[:k] + some[k + 1 :]] for k in range(size)] for some in chosen]
    return np.array(chosen), np.array(rest)

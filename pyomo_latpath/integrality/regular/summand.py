"""A matrix on its way through the decision, and the exception that ends it with a no."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import scipy.sparse as sp

from ...forms.numbers import Integers


class Contradiction(Exception):
    """Some lines are not totally unimodular (TU).

    Attributes
    ----------
    lines : frozenset of int
        Rows; columns count from m on.
    minimal : bool
        Whether all smaller sets are known to be TU.
    """

    def __init__(self, lines: Iterable[int], minimal: bool = False) -> None:
        super().__init__("not totally unimodular")
        self.lines = frozenset(map(int, lines))
        self.minimal = minimal


@dataclass(frozen=True, eq=False)
class Summand:
    """A summand of the matrix that is to be decided.

    Attributes
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
    rows, columns : ndarray, int64
        The numbers of its lines in the certificate, ascending.
    behind : tuple of frozenset of int, length m + n
        For each line, rows first, lines of the whole matrix: if a set of lines is not TU here,
        those behind them are not TU there.
    """

    matrix: sp.csc_array
    rows: Integers
    columns: Integers
    behind: tuple[frozenset[int], ...]

    def restricted(self, rows: Integers, columns: Integers) -> Summand:
        """The summand on some of its rows and columns."""
        matrix = self.matrix[:, columns][rows, :]
        lines = [*rows.tolist(), *(self.rows.size + columns).tolist()]
        behind = tuple(self.behind[line] for line in lines)
        return Summand(matrix, self.rows[rows], self.columns[columns], behind)

    def all_behind(self, lines: Iterable[int]) -> frozenset[int]:
        """What is behind any of some lines."""
        return frozenset[int]().union(*(self.behind[line] for line in lines))

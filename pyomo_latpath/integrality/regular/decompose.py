"""The complete decision: a matrix is taken apart until its summands are known, or contradict.

Seymour (1980), Decomposition of regular matroids: a totally unimodular (TU) matrix that is neither
a network matrix nor the transpose of one, nor R10, is a sum of order 1, 2 or 3 of smaller ones.
Where to take it apart is told by a small minor. If that is R12, its separation into halves runs
through the whole matrix, or the matrix is not TU; if it is R10, the matrix has a separation of
order 2, or is not TU; F7 and F7* are in no TU matrix.
"""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp
from scipy.sparse.csgraph import connected_components

from ...certificate_sums import Sum
from ...certificates import Conetwork, Network, Part, Step
from ...deadline import Deadline
from ...forms.numbers import Integers
from ...summands import Split
from .. import network
from ..reductions import reduce_matrix
from . import r10
from .clock import check_time
from .minors import neither
from .separate import separation
from .signs import odd_hole
from .splitting import split_at
from .summand import Contradiction, Summand

#: So many nonzeros are sooner looked at for wrong signs than for a network.
FEW = 1000


def take_apart(matrix: sp.csc_array, deadline: Deadline) -> Part:
    """Prove a matrix TU.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Canonical: sorted indices, no stored zeros.
    deadline : Deadline

    Returns
    -------
    Part

    Raises
    ------
    Contradiction
        If it is not TU, with lines (columns count from m on) that are not TU.
    OutOfTime
    """
    work = _Work(matrix, deadline)
    waiting = [0]
    while waiting:
        waiting += work.look_at(waiting.pop())
    if not work.steps:
        return work.parts[0]
    return Sum(tuple(work.steps), tuple(work.parts[k] for k in range(len(work.summands))))


class _Work:
    """What has been done so far, and the summands there are."""

    def __init__(self, matrix: sp.csc_array, deadline: Deadline) -> None:
        m, n = matrix.shape
        behind = tuple(frozenset([line]) for line in range(m + n))
        self.summands = [Summand(matrix, np.arange(m), np.arange(n), behind)]
        self.next_row, self.next_column = m, n
        self.steps: list[Split | Step] = []
        self.parts: dict[int, Part] = {}
        self.deadline = deadline
        self.signs_checked = False

    def look_at(self, k: int) -> list[int]:
        """Recognise a summand, or take it apart; returns the summands to look at next."""
        summand = self.summands[k]
        for place in np.flatnonzero(np.abs(summand.matrix.data) > 1)[:1].tolist():
            column = int(np.searchsorted(summand.matrix.indptr, place, side="right")) - 1
            lines = summand.matrix.indices[place], summand.rows.size + column
            raise Contradiction(summand.all_behind(lines))
        if not self.signs_checked and summand.matrix.nnz <= FEW:
            self._check_signs(summand)
        reduction = reduce_matrix(summand.matrix, self.deadline)
        check_time(self.deadline)
        part = _recognise(reduction.matrix, self.deadline)
        if part is not None:
            self.parts[k] = reduction.prove(part)
            return []
        self.steps += [_numbered(step, summand) for step in reduction.steps]
        rest = self.summands[k] = summand.restricted(reduction.rows, reduction.columns)
        if not self.signs_checked or self._has_known_nonzeros(rest.matrix):
            self._check_signs(rest)
        try:
            return self._take_apart(k, rest)
        except Contradiction as found:
            raise Contradiction(rest.all_behind(found.lines)) from None

    def _has_known_nonzeros(self, matrix: sp.csc_array) -> bool:
        """Whether they are those of a network matrix, its transpose or R10."""
        return not neither(matrix, self.deadline) or r10.find(matrix) is not None

    def _check_signs(self, summand: Summand) -> None:
        """Look for signs that contradict each other, the quickest way to a no.

        At the start there often are some; later, only where the nonzeros leave no other way.
        """
        self.signs_checked = True
        hole = odd_hole(summand.matrix, self.deadline)
        if hole is not None:
            single = all(len(summand.behind[line]) == 1 for line in hole)
            behind = summand.all_behind(hole)
            raise Contradiction(behind, minimal=single and len(behind) == len(hole))

    def _take_apart(self, k: int, summand: Summand) -> list[int]:
        matrix = summand.matrix
        links = sp.block_array([[None, matrix], [matrix.T, None]], format="csr")
        count, block = connected_components(links, directed=False)
        if count > 1:
            return self._take_blocks_apart(k, summand, block)
        side = separation(matrix, self.deadline)
        split, first, second = split_at(summand, side, self.next_row, self.next_column)
        self.next_row += split.order - 1
        self.next_column += (0, 1, 4)[split.order - 1]
        self.steps.append(split)
        self.summands[k] = first
        self.summands.append(second)
        return [k, len(self.summands) - 1]

    def _take_blocks_apart(self, k: int, summand: Summand, block: Integers) -> list[int]:
        """Take apart connected blocks, given the block of each line."""
        m, changed = summand.rows.size, [k]
        order = np.argsort(block, kind="stable")
        for lines in np.split(order, np.flatnonzero(np.diff(block[order])) + 1):
            piece = summand.restricted(lines[lines < m], lines[lines >= m] - m)
            if self.summands[k] is summand:
                self.summands[k] = piece
                continue
            self.steps.append(Split(piece.rows, piece.columns, np.empty((0, 2), np.int64)))
            changed.append(len(self.summands))
            self.summands.append(piece)
        return changed


def _recognise(matrix: sp.csc_array, deadline: Deadline) -> Part | None:
    """Recognise a network matrix, its transpose, R10, or a matrix without lines."""
    if not sum(matrix.shape):
        return Network(np.empty((0, 2), np.int64), np.empty((0, 2), np.int64))
    part = network.recognise(matrix, deadline)
    check_time(deadline)
    if part is not None:
        return part
    part = network.recognise(matrix.T.tocsc(), deadline)
    check_time(deadline)
    return r10.recognise(matrix) if part is None else Conetwork(part.tree, part.arcs)


def _numbered(step: Step, summand: Summand) -> Step:
    """A reduction in the numbers of the certificate."""
    numbers = summand.rows if step.axis == "row" else summand.columns
    of = int(numbers[step.of]) if step.reason == "copy" else -1
    sign = step.sign if step.reason == "copy" else 1
    return Step(step.axis, int(numbers[step.line]), step.reason, of, sign)

"""Reductions that keep total unimodularity both ways, repeated to the end.

Dropped are rows and columns that are zero, that have one entry only (+-1), and copies of others
up to sign (Schrijver 1986, section 19.4). What is left is often much smaller, or nothing: then
the matrix is that of a series-parallel network. Copies are found by hashing (a line's hash is
the sum of random weights of its entries, so that it is easy to keep up to date) and then
compared entry by entry. All in time near-linear in the number of nonzeros.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp

from ..certificate_parts import Axis, Reason
from ..certificates import Conetwork, Network, Part, Reduced, Step
from ..deadline import Deadline
from ..forms.numbers import Integers

#: Hashes are whole numbers modulo 2**64.
MASK = 2**64 - 1


@dataclass(frozen=True, eq=False)
class Reduction:
    """What was dropped and what is left.

    Attributes
    ----------
    steps : tuple of Step
        In order. A unit's `of` is the line across that its entry lies on, `sign` that entry.
    rows, columns : ndarray, int64
        What is left, ascending.
    matrix : scipy.sparse.csc_array, int64
        The matrix on them.
    """

    steps: tuple[Step, ...]
    rows: Integers
    columns: Integers
    matrix: sp.csc_array

    def prove(self, rest: Part) -> Part:
        """Turn the proof of what is left into one of the whole matrix.

        Reductions of (co)network matrices are undone on their trees, so that these stay
        (co)networks.
        """
        if not self.steps:
            return rest
        if isinstance(rest, Network):
            return Network(*_grow(rest.tree, rest.arcs, self.steps, self.rows, self.columns))
        if isinstance(rest, Conetwork):
            across: dict[Axis, Axis] = {"row": "column", "column": "row"}
            steps = [step._replace(axis=across[step.axis]) for step in self.steps]
            return Conetwork(*_grow(rest.tree, rest.arcs, steps, self.columns, self.rows))
        plain = [step if step.reason == "copy" else Step(*step[:3]) for step in self.steps]
        return Reduced(tuple(plain), rest)


def recognise(matrix: sp.csc_array) -> Network | None:
    """Recognise a matrix that reduces to nothing, as a network.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64

    Examples
    --------
    >>> recognise(sp.csc_array([[1, 1, 1], [1, 1, 0]])).arcs.tolist()
    [[0, 2], [0, 2], [1, 2]]
    """
    if (np.abs(matrix.data) != 1).any():
        return None
    reduction = reduce_matrix(matrix)
    if reduction.rows.size or reduction.columns.size:
        return None
    empty = np.empty((0, 2), np.int64)
    return Network(*_grow(empty, empty, reduction.steps, reduction.rows, reduction.columns))


def reduce_matrix(matrix: sp.csc_array, deadline: Deadline | None = None) -> Reduction:
    """Drop zero, unit and copied rows and columns until there are none.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Entries +-1.
    deadline : Deadline, optional
        Where it comes first, what was dropped by then is returned; that is valid, too.

    Returns
    -------
    Reduction

    Examples
    --------
    >>> reduction = reduce_matrix(sp.csc_array([[1, 1, 0], [0, 1, 1], [1, 0, 1], [0, 1, 1]]))
    >>> reduction.rows, [step.reason for step in reduction.steps]
    (array([0, 1, 2]), ['copy'])
    """
    deadline = deadline or Deadline(None)
    lines = _Lines(matrix)
    while lines.waiting and not deadline.passed:
        for _ in range(min(1000, len(lines.waiting))):
            lines.look_at(lines.waiting.popleft())
    m, n = matrix.shape
    alive = np.frombuffer(lines.alive, dtype=np.bool_)
    rows, columns = np.flatnonzero(alive[:m]), np.flatnonzero(alive[m : m + n])
    rest = matrix[rows, :][:, columns].tocsc() if lines.steps else matrix
    return Reduction(tuple(lines.steps), rows, columns, rest)


class _Lines:
    """Rows (0 to m - 1) and columns (m to m + n - 1) that are still there, with their hashes."""

    def __init__(self, matrix: sp.csc_array) -> None:
        self.m = matrix.shape[0]
        by_row = matrix.tocsr()
        self.start = np.concatenate((by_row.indptr, matrix.indptr[1:] + matrix.nnz)).tolist()
        self.across = np.concatenate((by_row.indices + self.m, matrix.indices)).tolist()
        self.entry = np.concatenate((by_row.data, matrix.data)).tolist()
        self.alive = bytearray(b"\1" * sum(matrix.shape))
        random = np.random.default_rng(0)
        weight = random.integers(0, MASK, sum(matrix.shape), dtype=np.uint64)
        row_hash = by_row.astype(np.uint64) @ weight[self.m :]
        col_hash = matrix.astype(np.uint64).T @ weight[: self.m]
        self.weight, hashes = weight.tolist(), np.concatenate((row_hash, col_hash))
        count = np.concatenate((np.diff(by_row.indptr), np.diff(matrix.indptr)))
        self.hash, self.count = hashes.tolist(), count.tolist()
        self.short: dict[int, tuple[list[int], list[int]]] = {}
        self.steps: list[Step] = []
        self.known: tuple[dict[int, int], dict[int, int]] = ({}, {})
        # A line is waiting to be looked at if something about it is new.
        unlike = np.minimum(hashes, ~hashes + np.uint64(1))
        suspect = count <= 1
        for axis, part in enumerate((slice(0, self.m), slice(self.m, None))):
            _, first, back = np.unique(unlike[part], return_index=True, return_inverse=True)
            suspect[part] |= first[back] != np.arange(back.size)
            firsts = (first + axis * self.m).tolist()
            self.known[axis].update(zip(unlike[part][first].tolist(), firsts, strict=True))
        self.waiting = deque(np.flatnonzero(suspect).tolist())

    def look_at(self, line: int) -> None:
        """Drop a line if it is zero, unit or a copy."""
        if not self.alive[line]:
            return
        if self.count[line] == 0:
            self._drop(line, "zero", -1, 1)
        elif self.count[line] == 1:
            (across,), (entry,) = self._entries(line)
            self._drop(line, "unit", across, entry)
        else:
            known, key = self.known[line >= self.m], self._key(line)
            other = known.get(key, line)
            if other == line or not self.alive[other] or self._key(other) != key:
                known[key] = line
                return
            mine, others = self._entries(line), self._entries(other)
            if mine == others:
                self._drop(line, "copy", other, 1)
            elif mine == (others[0], [-value for value in others[1]]):
                self._drop(line, "copy", other, -1)

    def _key(self, line: int) -> int:
        """The same for a line and its negation."""
        value = self.hash[line]
        return int(min(value, -value & MASK))

    def _entries(self, line: int) -> tuple[list[int], list[int]]:
        """Live entries; a long list of mostly dead ones is shortened for good."""
        here = slice(self.start[line], self.start[line + 1])
        across, entry = self.short.get(line) or (self.across[here], self.entry[here])
        size = len(across)
        if size != self.count[line]:
            live = [k for k in range(size) if self.alive[across[k]]]
            across, entry = [across[k] for k in live], [entry[k] for k in live]
            if size > 8 + 2 * len(live):
                self.short[line] = across, entry
        return across, entry

    def _drop(self, line: int, reason: Reason, of: int, sign: int) -> None:
        m = self.m
        for across, entry in zip(*self._entries(line), strict=True):
            self.count[across] -= 1
            self.hash[across] = (self.hash[across] - entry * self.weight[line]) & MASK
            self.waiting.append(across)
        self.alive[line] = 0
        axis: Axis = "row" if line < m else "column"
        places = [place - m if place >= m else place for place in (line, of)]
        self.steps.append(Step(axis, places[0], reason, places[1], sign))


def _grow(
    tree: Integers, arcs: Integers, steps: Iterable[Step], rows: Integers, columns: Integers
) -> tuple[Integers, Integers]:
    """Undo reductions on a tree and its further arcs, the last one first.

    A unit row prolongs the one arc that it meets, a copied row subdivides a tree arc, unit and
    copied columns run along arcs that are there.
    """
    steps = list(steps)
    trunk = dict(zip(rows.tolist(), map(tuple, tree.tolist()), strict=True))
    chords = dict(zip(columns.tolist(), map(tuple, arcs.tolist()), strict=True))
    node = rows.size
    for axis, line, reason, of, sign in reversed(steps):
        if axis == "column":
            source = {"zero": {-1: (0, 0)}, "unit": trunk, "copy": chords}[reason]
            tail, head = source[of]
            chords[line] = (tail, head) if sign == 1 else (head, tail)
            continue
        node += 1
        if reason == "zero":
            tail, head = 0, node
        elif reason == "unit":
            start, tail = chords[of]
            head = node
            chords[of] = (start, node)
        else:
            tail, head = node, trunk[of][1]
            trunk[of] = (trunk[of][0], node)
        trunk[line] = (tail, head) if sign == 1 else (head, tail)
    return _table(trunk), _table(chords)


def _table(ends: dict[int, tuple[int, ...]]) -> Integers:
    """Ends of lines 0, 1, ... as an array."""
    return np.array([ends[line] for line in range(len(ends))], dtype=np.int64).reshape(-1, 2)

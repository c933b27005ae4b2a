"""Certificates of the matrices in `regular_models`: one leaf is taken off after the other."""

from __future__ import annotations

import itertools
from collections.abc import Iterator

import numpy as np
import scipy.sparse as sp
from regular_models import Piece

from pyomo_latpath.certificate_sums import R10_MATRICES
from pyomo_latpath.certificates import R10, CertificateError, Part, Split, Sum
from pyomo_latpath.integrality.recognise import prove_tu
from pyomo_latpath.summands import Summands


def split_off(table: np.ndarray, rows, columns, sign: int = 1) -> Split:
    """Split with entries that span both corners, if their ranks add up to at most 2."""
    rest = [np.setdiff1d(np.arange(size), named) for size, named in
            zip(table.shape, (rows, columns), strict=True)]  # fmt: skip
    entries = [
        (int(above[i]), int(below[j]))
        for above, below in ((rest[0], columns), (rows, rest[1]))
        for i, j in spanning(table[np.ix_(above, below)])
    ]
    return Split(
        np.array(rows), np.array(columns), np.array(entries, np.int64).reshape(-1, 2), sign
    )


def spanning(corner: np.ndarray) -> list[tuple[int, int]]:
    """Places in the lines of a nonsingular submatrix, as large as there is one, at most 2x2."""
    if not corner.any():
        return []
    i, j = np.argwhere(corner)[0].tolist()
    left = corner - corner[i, j] * np.outer(corner[:, j], corner[i])
    if not left.any():
        return [(i, j)]
    k, n = np.argwhere(left)[0].tolist()
    return [(i, j), (k, n)]


def leaf_part(matrix: sp.csc_array) -> Part | None:
    """The proof of a leaf."""
    proof = prove_tu(matrix)
    return r10_part(matrix.toarray()) if proof is None else proof[1]


def r10_part(table: np.ndarray) -> R10 | None:
    """R10 in any disguise: all orders of the columns are tried."""
    if table.shape != (5, 5):
        return None
    for known, order in itertools.product(R10_MATRICES, itertools.permutations(range(5))):
        pattern = {tuple(row): i for i, row in enumerate((table[:, order] != 0).tolist())}
        rows = [pattern.get(tuple(row)) for row in (known != 0).tolist()]
        if None not in rows:
            signs = signs_between(table[rows][:, order], known)
            return R10(np.array(rows), np.array(order), *signs)
    return None


def signs_between(table: np.ndarray, known: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Signs of rows and columns that turn one matrix into the other; the first row keeps its."""
    rows, columns = np.zeros(len(table), np.int64), np.zeros(table.shape[1], np.int64)
    rows[0], ratio = 1, table * known
    for _ in range(len(table)):
        columns = np.where(columns == 0, np.sign(rows @ ratio), columns)
        rows = np.where(rows == 0, np.sign(ratio @ columns), rows)
    return rows, columns


def sum_proofs(piece: Piece) -> Iterator[Sum]:
    """All certificates there are with these leaves: one for each choice of signs that works."""
    for signs in itertools.product((1, -1), repeat=piece.orders.count(3)):
        proof = taken_apart(piece, iter(signs))
        if proof is not None:
            yield proof


def taken_apart(piece: Piece, signs: Iterator[int]) -> Sum | None:
    """Split off the last leaf, and so on; what connects it belongs to its host from then on."""
    summands, steps, parts = Summands(sp.csc_array(piece.matrix)), [], []
    rows, columns = dict(enumerate(piece.rows.tolist())), dict(enumerate(piece.columns.tolist()))
    for leaf in range(len(piece.orders), 0, -1):
        own_rows, own_columns, matrix = summands.summand(0)
        named = [
            np.flatnonzero([owner[line] == leaf for line in lines.tolist()])
            for owner, lines in ((rows, own_rows), (columns, own_columns))
        ]
        split = split_off(matrix.toarray(), *named)
        entries = np.stack([own_rows[split.entries[:, 0]], own_columns[split.entries[:, 1]]], 1)
        sign = next(signs) if piece.orders[leaf - 1] == 3 else 1
        steps.append(Split(own_rows[named[0]], own_columns[named[1]], entries, sign))
        try:
            summands.split(steps[-1])
        except CertificateError:
            return None
        for owner, lines in zip((rows, columns), summands.summand(0)[:2], strict=True):
            owner |= {k: piece.hosts[leaf - 1] for k in lines.tolist() if k not in owner}
        parts.append(leaf_part(summands.summand(len(summands) - 1)[2]))
    parts.insert(0, leaf_part(summands.summand(0)[2]))
    return None if None in parts else Sum(tuple(steps), tuple(parts))

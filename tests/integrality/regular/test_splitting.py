"""Summands at a separation: those that the certificate's reader builds, and TU if the whole is."""

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from regular_models import disguised, regular
from test_separation import cut_rank, sides

from pyomo_latpath.integrality.regular.splitting import split_at
from pyomo_latpath.integrality.regular.summand import Contradiction, Summand
from pyomo_latpath.summands import Split, Summands


def whole_of(matrix: np.ndarray) -> Summand:
    m, n = matrix.shape
    lines = tuple(frozenset([line]) for line in range(m + n))
    return Summand(sp.csc_array(matrix), np.arange(m), np.arange(n), lines)


def separations(matrix: np.ndarray, rank: int):
    """All sides of at least four lines with a cut-rank, where both halves connect their links."""
    for half in sides(sum(matrix.shape)):
        for side in (half, ~half):
            if min(side.sum(), (~side).sum()) >= 4 and cut_rank(matrix != 0, side) == rank:
                yield side


def assert_same_summands(matrix: np.ndarray, split: Split, summands: tuple[Summand, ...]) -> None:
    """What the reader of certificates makes of the split is what is returned."""
    reader = Summands(sp.csc_array(matrix))
    reader.split(split)
    for k, summand in enumerate(summands):
        rows, columns, expected = reader.summand(k)
        assert (rows == summand.rows).all()
        assert (columns == summand.columns).all()
        assert (expected.toarray() == summand.matrix.toarray()).all()
        assert len(summand.behind) == rows.size + columns.size


@pytest.mark.parametrize("seed", range(40))
def test_summands_of_large_sums(seed):
    rng = np.random.default_rng(seed)
    piece = disguised(rng, regular(rng, 2, 6, orders=(2, 3, 3)))
    side = np.concatenate((piece.rows, piece.columns)) == piece.rows[0]
    split, *summands = split_at(whole_of(piece.matrix), side, *piece.matrix.shape)
    assert_same_summands(piece.matrix, split, summands)
    for summand in summands:
        assert (np.abs(summand.matrix.data) == 1).all()


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("rank", [1, 2])
def test_summands_of_small_matrices(seed, rank):
    """If the summands are TU, so is the whole; a contradiction is one."""
    rng = np.random.default_rng(seed)
    matrix = disguised(rng, regular(rng, 1, 5, kinds=("network", "conetwork"))).matrix
    matrix = matrix[:5][:, :6]
    m = len(matrix)
    for side in list(separations(matrix, rank))[:40]:
        for other in (matrix, matrix * np.where(rng.random(matrix.shape) < 0.1, -1, 1)):
            try:
                split, *summands = split_at(whole_of(other), side, *other.shape)
            except AssertionError:  # a half that does not connect its links
                continue
            except Contradiction as fault:
                lines = sorted(fault.lines)
                rows, columns = [x for x in lines if x < m], [x - m for x in lines if x >= m]
                assert not is_tu(other[np.ix_(rows, columns)])
                continue
            if all(np.abs(summand.matrix.data).max(initial=0) <= 1 for summand in summands):
                assert_same_summands(other, split, summands)
            if all(is_tu(summand.matrix.toarray()) for summand in summands):
                assert is_tu(other)


def test_what_is_behind_a_contradiction_is_one():
    """If lines of a summand are not TU, those behind them are not TU in the whole."""
    rng = np.random.default_rng(0)
    seen = 0
    for _ in range(60):
        piece = disguised(rng, regular(rng, 2, 4, kinds=("network", "conetwork"), orders=(3, 2)))
        m = len(piece.matrix)
        side = np.concatenate((piece.rows, piece.columns)) == piece.rows[0]
        matrix = piece.matrix.copy()
        inside = np.argwhere((matrix != 0) & np.equal.outer(piece.rows, piece.columns))
        matrix[tuple(inside[rng.integers(len(inside))])] *= -1
        try:
            _, *summands = split_at(whole_of(matrix), side, *matrix.shape)
        except Contradiction:
            continue
        for summand in summands:
            size = sum(summand.matrix.shape)
            for _ in range(20):
                lines = rng.choice(size, min(size, 10), replace=False).tolist()
                rows = [x for x in lines if x < summand.rows.size]
                columns = [x - summand.rows.size for x in lines if x >= summand.rows.size]
                if not rows or not columns or is_tu(summand.matrix.toarray()[rows][:, columns]):
                    continue
                behind = sorted(summand.all_behind(lines))
                rows, columns = [x for x in behind if x < m], [x - m for x in behind if x >= m]
                if max(len(rows), len(columns)) <= 9:
                    seen += 1
                    assert not is_tu(matrix[np.ix_(rows, columns)])
    assert seen > 20

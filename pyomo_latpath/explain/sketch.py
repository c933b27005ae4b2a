"""The matrix from afar: its blocks, and how dense it is where."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..forms.blocks import Block
from ..forms.normalise import NormalForm
from ..forms.numbers import Integers
from ..integrality.finding import BlockFinding, Verdict

#: Cells along each side of the grid, at most.
CELLS = 40


@dataclass(frozen=True)
class BlockSummary:
    """What is known about one block.

    Attributes
    ----------
    rows, columns, nonzeros : int
    verdict : Verdict
    structure : str or None
    sentence : str
        What it is, or why there is no certificate.
    row_slice, column_slice : pair of int
        Where it lies in the order of the sketch: first, and one past the last.
    """

    rows: int
    columns: int
    nonzeros: int
    verdict: Verdict
    structure: str | None
    sentence: str
    row_slice: tuple[int, int]
    column_slice: tuple[int, int]


@dataclass(frozen=True, eq=False)
class Sketch:
    """The nonzeros of the normalised matrix counted on a grid, its blocks on the diagonal.

    Attributes
    ----------
    rows, columns : int
        Of the matrix.
    counts : ndarray, shape (p, q), int64
        p, q <= 40. Cell (i, j) counts the nonzeros in the rows row_edges[i] to
        row_edges[i + 1] - 1 of the permuted matrix, and columns alike.
    row_edges, column_edges : ndarray, shape (p + 1,), (q + 1,), int64
    """

    rows: int
    columns: int
    counts: Integers
    row_edges: Integers
    column_edges: Integers


def sketch_of(normal: NormalForm, blocks: Sequence[Block]) -> Sketch:
    """Count nonzeros on a grid.

    Parameters
    ----------
    normal : NormalForm
    blocks : sequence of Block
        In the order in which they are to stand on the diagonal.

    Examples
    --------
    >>> from pyomo_latpath.forms.blocks import blocks_of
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 0, 1], [0, 1, 0]], row_lower=0, row_upper=1,
    ...                               col_lower=0, col_upper=9, cost=0)
    >>> normal = normalise(form)
    >>> sketch_of(normal, blocks_of(normal)).counts
    array([[1, 0, 0],
           [0, 1, 1]])
    """
    m, n = normal.matrix.shape
    row_edges, row_cell = _cells(m, [block.rows for block in blocks])
    column_edges, column_cell = _cells(n, [block.columns for block in blocks])
    p, q = row_edges.size - 1, column_edges.size - 1
    cell = row_cell[normal.matrix.indices] * q
    cell += np.repeat(column_cell, np.diff(normal.matrix.indptr))
    counts = np.bincount(cell, minlength=p * q).reshape(p, q)
    return Sketch(m, n, counts, row_edges, column_edges)


def _cells(size: int, parts: Sequence[Integers]) -> tuple[Integers, Integers]:
    """Edges of the cells, and the cell in which each line lies."""
    count = min(CELLS, size)
    edges = np.arange(count + 1) * size // max(count, 1)
    position = np.empty(size, np.int64)
    order = np.concatenate([*parts, np.empty(0, np.int64)]).astype(np.int64)
    # Lines outside all blocks (rows whose columns are all fixed, say) come last.
    order = np.concatenate((order, np.setdiff1d(np.arange(size), order)))
    position[order] = np.arange(size)
    return edges, np.searchsorted(edges, position, side="right") - 1


def summaries(
    normal: NormalForm, blocks: Sequence[Block], findings: Sequence[BlockFinding]
) -> tuple[BlockSummary, ...]:
    """Sum up the blocks, in the order of the sketch."""
    entries = np.diff(normal.matrix.indptr)
    row = column = 0
    told = []
    for block, finding in zip(blocks, findings, strict=False):  # fewer where time ran out
        m, n = block.rows.size, block.columns.size
        told.append(
            BlockSummary(
                rows=m,
                columns=n,
                nonzeros=int(entries[block.columns].sum()),
                verdict=finding.verdict,
                structure=finding.structure,
                sentence=finding.reason,
                row_slice=(row, row + m),
                column_slice=(column, column + n),
            )
        )
        row, column = row + m, column + n
    return tuple(told)

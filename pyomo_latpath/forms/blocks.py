"""Blocks: the connected parts of a form, which can be judged and solved one by one."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp
from scipy.sparse.csgraph import connected_components

from .normalise import NormalForm
from .numbers import Integers


@dataclass(frozen=True, eq=False)
class Block:
    """A connected component of the bipartite graph of rows and columns.

    Attributes
    ----------
    rows, columns : ndarray, int64
        Ascending indices into the `NormalForm`.
    trivial : bool
        True for the one block that gathers all components with a single column: their rows
        are bounds in disguise.
    """

    rows: Integers
    columns: Integers
    trivial: bool


def blocks_of(normal: NormalForm) -> list[Block]:
    """Split a form into its blocks; the trivial one, if there is one, comes first.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 1, 0], [0, 0, 2]], row_lower=0, row_upper=1,
    ...                               col_lower=0, col_upper=9, cost=0)
    >>> [(b.rows.tolist(), b.columns.tolist(), b.trivial) for b in blocks_of(normalise(form))]
    [([1], [2], True), ([0], [0, 1], False)]
    """
    m, n = normal.matrix.shape
    if n == 0:
        return []
    graph = sp.csc_array(
        (np.ones(normal.matrix.nnz, np.int8), normal.matrix.indices, normal.matrix.indptr),
        shape=(m, n),
    )
    square = sp.block_array([[None, graph], [graph.T, None]], format="csr")
    count, label = connected_components(square, directed=False)
    row_label, col_label = label[:m], label[m:]
    width = np.bincount(col_label, minlength=count)
    lone = width == 1
    blocks = []
    if lone.any():
        rows, columns = np.flatnonzero(lone[row_label]), np.flatnonzero(lone[col_label])
        blocks.append(Block(rows, columns, trivial=True))
    wide = np.flatnonzero(~lone)
    if wide.size == 1 and not blocks:
        return [Block(np.arange(m), np.arange(n), trivial=False)]
    rows_of, columns_of = _members(row_label, count), _members(col_label, count)
    blocks.extend(Block(rows_of[k], columns_of[k], trivial=False) for k in wide)
    return blocks


def _members(label: Integers, count: int) -> list[Integers]:
    order = np.argsort(label, kind="stable")
    ends = np.cumsum(np.bincount(label, minlength=count))
    return np.split(order, ends[:-1])

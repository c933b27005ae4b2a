"""Integer declarations that the other ones imply.

Fix some integer columns at whole values. If the matrix of what remains is totally unimodular, and
its sides and bounds are whole whatever these values are, then each vertex of what remains is whole
(Hoffman and Kruskal 1956): the declarations of its columns are implied, and need not be made.
"""

from __future__ import annotations

from collections import deque

import numpy as np

from ..deadline import Deadline
from ..forms.blocks import blocks_of
from ..forms.linear_form import Flags
from ..forms.normalise import NormalForm
from ..forms.numbers import Integers
from .certify import certify


def implied_columns(normal: NormalForm, deadline: Deadline | None = None) -> Flags:
    """Find integer columns whose declarations the other ones imply, many at once.

    Columns alike (as many nonzeros, binary or not) are taken up together, sparse ones first; a
    set that does not stand the test is halved, after all larger ones. What is found is valid
    together; there may be larger sets.

    Parameters
    ----------
    normal : NormalForm
    deadline : Deadline, optional
        What was found by then is returned.

    Returns
    -------
    ndarray, shape (n,), bool
        False for continuous columns.

    Notes
    -----
    A large part with structure, greedily chosen, and the rest handled apart: so hidden networks
    are put to use (Bixby and Cunningham 1980).

    Examples
    --------
    Whether a van goes decides; what it carries (2 <= x + y <= 5 z) is whole by itself.

    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 1, 0], [1, 1, -5]], row_lower=[2, -np.inf],
    ...                               row_upper=[np.inf, 0], col_lower=0, col_upper=[4, 4, 1],
    ...                               cost=[3, 2, 9])
    >>> implied_columns(normalise(form))
    array([ True,  True, False])
    """
    deadline = deadline or Deadline(None)
    implied = np.zeros(normal.columns.size, np.bool_)
    waiting = deque(_alike(normal))
    while waiting and not deadline.passed:
        some = waiting.popleft()
        if _remain_whole(normal, implied, some, deadline):
            implied[some] = True
        elif some.size > 1:
            half = some.size // 2
            waiting += some[:half], some[half:]
    return implied


def mostly_implied(normal: NormalForm, deadline: Deadline) -> Flags | None:
    """Find out quickly whether at least half of the integer declarations are implied.

    Parameters
    ----------
    normal : NormalForm
    deadline : Deadline

    Returns
    -------
    ndarray, shape (n,), bool, or None
        The columns, in whole sets of columns alike, large ones first; None where these are fewer
        than half of the integer columns, which is told as soon as it is clear.
    """
    implied = np.zeros(normal.columns.size, np.bool_)
    sets = sorted(_alike(normal), key=len, reverse=True)
    hoped, least = sum(some.size for some in sets), (int(normal.integer.sum()) + 1) // 2
    for some in sets:
        if hoped < max(least, 1) or deadline.passed:
            return None
        if _remain_whole(normal, implied, some, deadline):
            implied[some] = True
        else:
            hoped -= some.size
    return implied if implied.sum() >= max(least, 1) else None


def _alike(normal: NormalForm) -> list[Integers]:
    """Candidates, split by their number of nonzeros and into binary ones and others.

    Candidates are integer columns of 0, 1 and -1, in rows that stay whole when others are fixed.
    """
    whole = normal.whole_rows & normal.whole_sides
    column = np.repeat(np.arange(normal.columns.size), np.diff(normal.matrix.indptr))
    odd = (np.abs(normal.matrix.data) != 1) | ~whole[normal.matrix.indices]
    able = normal.integer & normal.whole_bounds & ~normal.form.semicontinuous[normal.columns]
    able[column[odd]] = False
    candidates = np.flatnonzero(able)
    binary = (normal.col_lower == 0) & (normal.col_upper == 1)
    kind = (2 * np.diff(normal.matrix.indptr) + binary)[candidates]
    order = np.argsort(kind, kind="stable")
    starts = np.flatnonzero(np.diff(kind[order])) + 1
    return np.split(candidates[order], starts) if candidates.size else []


def _remain_whole(normal: NormalForm, implied: Flags, some: Integers, deadline: Deadline) -> bool:
    """Whether blocks that hold `some` are certified when these, implied and free columns vary."""
    varies = implied | ~normal.integer
    varies[some] = True
    columns = np.flatnonzero(varies)
    rest = normal.restrict(np.arange(normal.rows.size), columns)
    asked = np.isin(columns, some)
    # Blocks of one column are whole: candidates have entries of +-1.
    blocks = [b for b in blocks_of(rest) if not b.trivial and asked[b.columns].any()]
    return all(found is not None for found in certify(rest, blocks, deadline, "linear"))

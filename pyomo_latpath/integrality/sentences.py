"""What a certificate shows a matrix to be, in sentences for people."""

from __future__ import annotations

from collections import Counter

import scipy.sparse as sp

from ..certificates import (
    R10,
    Conetwork,
    Network,
    Part,
    Pivot,
    Reduced,
    Split,
    Step,
    Sum,
    Unimodular,
)

#: Kinds of parts that need no further words, one and several.
IN_WORDS = {
    "network": ("a network matrix", "network matrices"),
    "conetwork": ("the transpose of a network matrix", "transposes of network matrices"),
    "r10": ("R10", "copies of R10"),
    "trivial": ("bounds on single columns", "matrices of bounds on single columns"),
}
#: Any other kind.
FURTHER = ("a further sum", "further sums")
NUMERALS = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine")
#: So many summands are told one by one.
FEW = 3


def describe(structure: str, part: Part, matrix: sp.csc_array) -> str:
    """Say in one sentence what a matrix is.

    Rows and columns are called what the certificate lets them be; which side of a transport
    network is that of the sources, say, it does not tell.

    Parameters
    ----------
    structure : str
        As in `BlockFinding.structure`.
    part : Part
        The proof of the matrix.
    matrix : scipy.sparse.csc_array
        What the proof is about; only its shape is asked for.

    Examples
    --------
    >>> from . import incidence, interval
    >>> matrix = sp.csc_array([[1, 1, 0, 0], [0, 0, 1, 1], [1, 0, 1, 0]])
    >>> describe("incidence", incidence.recognise(matrix), matrix)
    'a transport network: 1 row on one side, 2 on the other, 4 columns'
    >>> matrix = sp.csc_array([[1, 0], [1, 1], [0, 1]])
    >>> describe("interval", interval.recognise(matrix), matrix)
    'an interval matrix: 2 columns, each over consecutive ones of 3 rows'
    """
    m, n = matrix.shape
    if isinstance(part, Network) and structure == "incidence":
        return _incidence(part)
    if isinstance(part, Network) and structure == "interval":
        return f"an interval matrix: {_many(n, 'column')}, each over consecutive ones of " + _many(
            m, "row"
        )
    if isinstance(part, Network):
        return f"a network: {_many(n, 'column')}, each a path in a tree of {_many(m, 'row')}"
    if isinstance(part, Conetwork):
        return (
            f"the transpose of a network: {_many(m, 'row')}, each a path in a tree of "
            f"{_many(n, 'column')}"
        )
    return _in_short(part, (m, n))


def describe_part(part: Part, rows: int, columns: int) -> list[str]:
    """Say what a matrix is: in one sentence, and if it is a sum, one more for each summand.

    Parameters
    ----------
    part : Part
        The proof of the matrix.
    rows, columns : int
        Its shape.

    Examples
    --------
    >>> import numpy as np
    >>> split = Split(np.array([1, 2]), np.array([1, 2]), np.array([[0, 1]]))
    >>> above = Network(np.array([[0, 1]]), np.array([[0, 1], [0, 1]]))
    >>> below = Network(np.array([[1, 2], [0, 1], [2, 3]]), np.array([[0, 3], [1, 3]]))
    >>> for sentence in describe_part(Sum((split,), (above, below)), 3, 3):
    ...     print(sentence)
    a 2-sum of a network matrix (1 row, 2 columns) and a network matrix (3 rows, 2 columns)
    summand 1: a network matrix (1 row, 2 columns)
    summand 2: a network matrix (3 rows, 2 columns)
    """
    inner = part
    while isinstance(inner, Pivot | Reduced | Unimodular):
        inner = inner.rest
    told = [_in_short(part, (rows, columns))]
    if isinstance(inner, Sum):
        for k, summand in enumerate(inner.parts):
            told.append(f"summand {k + 1}: {_in_short(summand, shape_of(summand))}")
    return told


def shape_of(part: Part) -> tuple[int, int]:
    """Rows and columns of the matrix that a part is about; a trivial one does not tell: 0 and 0.

    Examples
    --------
    >>> import numpy as np
    >>> shape_of(Network(np.array([[0, 1]]), np.array([[0, 1], [0, 1]])))
    (1, 2)
    """
    if isinstance(part, Network):
        return len(part.tree), len(part.arcs)
    if isinstance(part, Conetwork):
        return len(part.arcs), len(part.tree)
    if isinstance(part, R10):
        return 5, 5
    if isinstance(part, Pivot | Unimodular):
        return shape_of(part.rest)
    if isinstance(part, Reduced | Sum):
        parts = (part.rest,) if isinstance(part, Reduced) else part.parts
        rows, columns = (sum(sizes) for sizes in zip(*map(shape_of, parts), strict=True))
        for step in part.steps:
            if isinstance(step, Split):  # its connecting lines are in none but the summands
                rows -= step.order - 1
                columns -= (0, 1, 4)[step.order - 1]
            else:
                rows += step.axis == "row"
                columns += step.axis == "column"
        return rows, columns
    return 0, 0


def _incidence(part: Network) -> str:
    """What kind of graph it is: the rows are all nodes of a star but the centre, its last."""
    m, n = len(part.tree), len(part.arcs)
    away = part.tree[:, 0] == m
    pairs = part.arcs[(part.arcs != m).all(axis=1) & (part.arcs[:, 0] != part.arcs[:, 1])]
    crossing = away[pairs[:, 0]] != away[pairs[:, 1]]
    if not pairs.size:
        return f"{_many(n, 'column')} over {_many(m, 'row')}, each in one row only"
    if crossing.all():
        fewer, more = sorted((int(away.sum()), int((~away).sum())))
        sides = f"{_many(fewer, 'row')} on one side, {more:,} on the other"
        return f"a transport network: {sides}, {_many(n, 'column')}"
    if not crossing.any():
        return f"a flow network: {_many(m, 'node')}, {_many(n, 'arc')}"
    return f"a network: {_many(m, 'node')} on two sides, {_many(n, 'arc')}"


def _in_short(part: Part, shape: tuple[int, int]) -> str:
    """One phrase for a part and its size."""
    if isinstance(part, Pivot):
        return f"after a pivot, {_in_short(part.rest, shape)}"
    if isinstance(part, Unimodular):
        count = _many(len(part.operations), "row operation")
        return f"after {count} with equations, {_in_short(part.rest, shape)}"
    if isinstance(part, Reduced):
        return _in_short(part.rest, shape_of(part.rest)) + _left_out(part)
    if isinstance(part, Sum):
        orders = Counter(step.order for step in part.steps if isinstance(step, Split))
        sums = [
            f"{'a' if count == 1 else _few(count)} {order}-sum{'s' * (count > 1)}"
            for order, count in sorted(orders.items(), reverse=True)
        ]
        return (f"{_listed(sums)} of " if sums else "") + _summands(part) + _left_out(part)
    return _one(part.kind, shape)


def _summands(part: Sum) -> str:
    """The summands of a sum: each if they are few, else counted by kind."""
    if len(part.parts) <= FEW:
        return _listed([_in_short(summand, shape_of(summand)) for summand in part.parts])
    kinds: dict[str, list[tuple[int, int]]] = {}
    for summand in part.parts:
        kind = summand.rest.kind if isinstance(summand, Reduced) else summand.kind
        kinds.setdefault(kind, []).append(shape_of(summand))
    return _listed([_several(kind, shapes) for kind, shapes in kinds.items()])


def _one(kind: str, shape: tuple[int, int]) -> str:
    named = IN_WORDS.get(kind, FURTHER)[0]
    return named if kind == "r10" else f"{named} ({_size(shape)})"


def _several(kind: str, shapes: list[tuple[int, int]]) -> str:
    largest = max(shapes, key=sum)
    if len(shapes) == 1:
        return _one(kind, largest)
    named = f"{_few(len(shapes))} {IN_WORDS.get(kind, FURTHER)[1]}"
    return named if kind == "r10" else f"{named} (the largest with {_size(largest)})"


def _left_out(part: Reduced | Sum) -> str:
    """What had to go first."""
    count = sum(isinstance(step, Step) for step in part.steps)
    if not count:
        return ""
    lines = (
        "line that is zero, unit or a copy is"
        if count == 1
        else ("lines that are zero, unit or copies are")
    )
    return f", once {_few(count)} {lines} left out"


def _few(count: int) -> str:
    """A count as it is written within a sentence."""
    return NUMERALS[count] if count < len(NUMERALS) else f"{count:,}"


def _size(shape: tuple[int, int]) -> str:
    return f"{_many(shape[0], 'row')}, {_many(shape[1], 'column')}"


def _many(count: int, noun: str) -> str:
    """A count with its noun."""
    return f"{count:,} {noun}{'s' * (count != 1)}"


def _listed(phrases: list[str]) -> str:
    """Phrases with commas, and the last with 'and'."""
    return " and ".join(filter(None, [", ".join(phrases[:-1]), phrases[-1]]))

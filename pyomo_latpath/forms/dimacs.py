"""Reader of DIMACS files: minimum-cost flows (.min) and assignments (.asn).

A flow file has one problem line ``p min NODES ARCS``, lines ``n NODE SUPPLY`` for the nodes
with a supply (negative: a demand) and lines ``a TAIL HEAD LOWER CAPACITY COST``. An
assignment file has ``p asn NODES ARCS``, lines ``n NODE`` for the left nodes and lines
``a LEFT RIGHT COST``. Lines that start with c are comments; they and empty lines may stand
anywhere. The cost is minimised in both. Source: DIMACS (1991), "The first DIMACS
international algorithm implementation challenge: problem definitions and specifications".
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from .dimacs_text import Content, Dialect, Lines, parse
from .file_text import ModelFileError, read_bytes
from .linear_form import LinearForm, NumberedNames

Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

#: Whole numbers up to here are exact in 64-bit floating point.
LARGEST_EXACT = 2.0**53

FLOW = Dialect("min", {"n": ("node", "supply"), "a": ("tail", "head", "lower", "capacity", "cost")})
ASSIGNMENT = Dialect("asn", {"n": ("node",), "a": ("left", "right", "cost")})


class ArcNames(Sequence[str]):
    """Names made from the ends of arcs when asked for.

    Attributes
    ----------
    tails, heads : ndarray, shape (n,), int64
        Node numbers as in the file, from 1.
    numbered : bool
        Whether the arc's own number is part of its name, as parallel arcs need it.

    Examples
    --------
    >>> ArcNames(np.array([3, 3]), np.array([9, 9]), numbered=True)[1]
    'a2 (3->9)'
    >>> ArcNames(np.array([3, 4]), np.array([9, 9]), numbered=False)[1]
    '4->9'
    """

    def __init__(self, tails: Indices, heads: Indices, *, numbered: bool) -> None:
        self.tails, self.heads, self.numbered = tails, heads, numbered

    def __len__(self) -> int:
        return self.tails.size

    def __getitem__(self, index: Any) -> Any:
        if isinstance(index, slice):
            return [self[i] for i in range(*index.indices(self.tails.size))]
        ends = f"{self.tails[index]}->{self.heads[index]}"
        return f"a{index % self.tails.size + 1} ({ends})" if self.numbered else ends


def read_flow(path: Path | str) -> LinearForm:
    """Read a minimum-cost flow.

    Row i says that what leaves node i, less what enters it, is its supply; every arc is a
    whole-number column between its lower bound and its capacity. Supplies that do not add
    up to zero make a model without solution, not an error.

    Parameters
    ----------
    path : path-like
        A .min file, or .min.gz.

    Raises
    ------
    ModelFileError
        With the line number, for a line that cannot be read, a node number out of range, a
        lower bound above the capacity, a negative one, or counts that do not fit the
        problem line.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     file = Path(folder) / "caves.min"
    ...     _ = file.write_text("p min 2 1\\nn 1 4\\nn 2 -4\\na 1 2 0 5 3\\n")
    ...     form = read_flow(file)
    >>> form.col_names[0], form.row_names[1], form.row_lower.tolist()
    ('a1 (1->2)', 'node 2', [4.0, -4.0])
    """
    path = Path(path)
    content = _read(path, FLOW)
    supply = np.zeros(content.nodes)
    nodes = content.lines["n"]
    supply[_node_numbers(path, content, nodes, 0, "node") - 1] = nodes.numbers[:, 1]
    arcs = content.lines["a"]
    tails = _node_numbers(path, content, arcs, 0, "tail")
    heads = _node_numbers(path, content, arcs, 1, "head")
    lower, capacity, cost = arcs.numbers[:, 2], arcs.numbers[:, 3], arcs.numbers[:, 4]
    _refuse(path, arcs, capacity < 0, lambda k: f"the capacity {_plain(capacity[k])} is negative")
    _refuse(path, arcs, lower < 0, lambda k: f"the lower bound {_plain(lower[k])} is negative")
    _refuse(
        path,
        arcs,
        lower > capacity,
        lambda k: f"the lower bound {_plain(lower[k])} exceeds the capacity {_plain(capacity[k])}",
    )
    return LinearForm.from_arrays(
        _incidence(tails, heads, content.nodes, -1.0),
        row_lower=supply,
        row_upper=supply,
        col_lower=lower,
        col_upper=capacity,
        cost=cost,
        row_names=NumberedNames("node ", content.nodes),
        col_names=ArcNames(tails, heads, numbered=True),
    )


def read_assignment(path: Path | str) -> LinearForm:
    """Read an assignment: every node, left and right, is in exactly one chosen pair.

    Parameters
    ----------
    path : path-like
        An .asn file, or .asn.gz.

    Raises
    ------
    ModelFileError
        With the line number, for a line that cannot be read, a node number out of range, a
        pair that does not lead from a left node to a right one, or counts that do not fit
        the problem line.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     file = Path(folder) / "vans.asn"
    ...     _ = file.write_text("p asn 2 1\\nn 1\\na 1 2 7\\n")
    ...     form = read_assignment(file)
    >>> form.col_names[0], form.cost.tolist(), form.row_upper.tolist()
    ('1->2', [7.0], [1.0, 1.0])
    """
    path = Path(path)
    content = _read(path, ASSIGNMENT)
    left = np.zeros(content.nodes + 1, dtype=np.bool_)
    left[_node_numbers(path, content, content.lines["n"], 0, "left")] = True
    pairs = content.lines["a"]
    tails = _node_numbers(path, content, pairs, 0, "left")
    heads = _node_numbers(path, content, pairs, 1, "right")
    _refuse(
        path, pairs, ~left[tails], lambda k: f"node {tails[k]} has no 'n' line, so it is not left"
    )
    _refuse(
        path, pairs, left[heads], lambda k: f"node {heads[k]} has an 'n' line, so it is not right"
    )
    keys = tails * (content.nodes + 1) + heads
    return LinearForm.from_arrays(
        _incidence(tails, heads, content.nodes, 1.0),
        row_lower=1.0,
        row_upper=1.0,
        col_lower=0.0,
        col_upper=1.0,
        cost=pairs.numbers[:, 2],
        row_names=NumberedNames("node ", content.nodes),
        col_names=ArcNames(tails, heads, numbered=np.unique(keys).size < keys.size),
    )


def _incidence(tails: Indices, heads: Indices, nodes: int, at_head: float) -> sp.coo_array:
    """Node-arc matrix; the two entries of a self loop fall on one place and cancel."""
    arcs = np.arange(tails.size)
    return sp.coo_array(
        (
            np.concatenate([np.ones(tails.size), np.full(heads.size, at_head)]),
            (np.concatenate([tails, heads]) - 1, np.concatenate([arcs, arcs])),
        ),
        shape=(nodes, tails.size),
    )


def _read(path: Path, dialect: Dialect) -> Content:
    content = parse(path, read_bytes(path), dialect)
    found = content.lines["a"].places.size
    if found != content.arcs:
        raise ModelFileError(
            path,
            content.problem_place,
            f"the problem line announces {content.arcs} arcs, the file has {found}; it may be "
            "cut off",
        )
    for letter, lines in content.lines.items():
        _refuse_inexact(path, lines, dialect.fields[letter])
    numbers = content.lines["n"].numbers[:, 0]
    again = np.ones(numbers.size, dtype=np.bool_)
    again[np.unique(numbers, return_index=True)[1]] = False
    _refuse(
        path,
        content.lines["n"],
        again,
        lambda k: f"node {_plain(numbers[k])} has a second 'n' line",
    )
    return content


def _refuse_inexact(path: Path, lines: Lines, fields: Sequence[str]) -> None:
    for field, values in zip(fields, lines.numbers.T, strict=True):
        _refuse(
            path,
            lines,
            np.abs(values) > LARGEST_EXACT,
            lambda _, field=field: (  # type: ignore[misc]
                f"the {field} is beyond 2^53, where whole numbers are no longer exact; scale it"
            ),
        )


def _node_numbers(path: Path, content: Content, lines: Lines, field: int, what: str) -> Indices:
    values = lines.numbers[:, field]
    bad = (values != np.floor(values)) | (values < 1) | (values > content.nodes)
    _refuse(
        path,
        lines,
        bad,
        lambda k: f"the {what} {_plain(values[k])} is not a node; nodes are 1 to {content.nodes}",
    )
    return values.astype(np.int64)


def _refuse(path: Path, lines: Lines, bad: Flags, sentence: Callable[[int], str]) -> None:
    """Raise for the first line marked bad."""
    if bad.any():
        k = int(np.argmax(bad))
        raise ModelFileError(path, int(lines.places[k]), sentence(k))


def _plain(value: float) -> str:
    return str(int(value)) if float(value).is_integer() else repr(float(value))

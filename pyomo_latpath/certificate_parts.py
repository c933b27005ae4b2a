"""The kinds of proof that a matrix is totally unimodular (TU) or unimodular, each with its check.

A part knows its JSON and checks one whole-number matrix; `certificates` puts parts together to
the certificate of a model. Nothing here knows how a part was found. Checks use whole-number
arithmetic alone, in time near-linear in the sizes of matrix and part (row operations: in the time
that it takes to do them). A new kind is one new class, with one line in `KINDS`.

Network matrices: Tutte (1965); Schrijver (1986), section 19.3.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, ClassVar, Literal, NamedTuple, Protocol

import numpy as np
import scipy.sparse as sp
from scipy.sparse.csgraph import connected_components

from .certificate_reading import CertificateError, read_pairs, read_table, read_value, require
from .forms.numbers import Integers


class Part(Protocol):
    """What all kinds have in common: JSON both ways, and the check of one int64 matrix."""

    kind: ClassVar[str]

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Part:
        """Read what `to_dict` wrote; raises CertificateError for anything else."""

    def check(self, matrix: sp.csc_array) -> None:
        """Raise CertificateError unless this proves the matrix TU (`Unimodular`: unimodular)."""


@dataclass(frozen=True, eq=False)
class Network:
    """The matrix of a network: one row per arc of a tree, one column per further arc.

    Attributes
    ----------
    tree : ndarray, shape (m, 2), int64
        Tail and head of the tree arc behind each row; the nodes are 0 to m.
    arcs : ndarray, shape (n, 2), int64
        Tail and head of the arc behind each column. Its entries are the tree path from tail to
        head: +1 where the path runs along a tree arc, -1 where it runs against one.

    Examples
    --------
    >>> interval = Network(np.array([[0, 1], [1, 2]]), np.array([[0, 1], [0, 2]]))
    >>> interval.check(sp.csc_array([[1, 1], [0, 1]]))
    """

    tree: Integers
    arcs: Integers
    kind: ClassVar[str] = "network"

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        return {"kind": self.kind, "tree": self.tree.tolist(), "arcs": self.arcs.tolist()}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Network:
        """Read what `to_dict` wrote."""
        return cls(read_pairs(data, "tree"), read_pairs(data, "arcs"))

    def check(self, matrix: sp.csc_array) -> None:
        """Check that every column is the tree path of its arc."""
        _check_network(matrix, self.tree, self.arcs, "column")


@dataclass(frozen=True, eq=False)
class Conetwork:
    """The transpose of a network's matrix: `tree` has an arc per column, `arcs` one per row."""

    tree: Integers
    arcs: Integers
    kind: ClassVar[str] = "conetwork"

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        return {"kind": self.kind, "tree": self.tree.tolist(), "arcs": self.arcs.tolist()}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Conetwork:
        """Read what `to_dict` wrote."""
        return cls(read_pairs(data, "tree"), read_pairs(data, "arcs"))

    def check(self, matrix: sp.csc_array) -> None:
        """Check that every row is the tree path of its arc."""
        _check_network(matrix.T.tocsc(), self.tree, self.arcs, "row")


def _check_network(matrix: sp.csc_array, tree: Integers, arcs: Integers, line: str) -> None:
    """Compare the matrix with the tree paths, without walking them.

    Let each arc stand for the vector with +1 at its head and -1 at its tail. Those of a tree's
    arcs are linearly independent, so a path is the only combination of them that yields the
    arc from its start to its end.
    """
    m, n = matrix.shape
    require(tree.shape == (m, 2), f"the tree has {len(tree)} arcs; the matrix needs {m}")
    require(arcs.shape == (n, 2), f"there are {len(arcs)} further arcs; the matrix needs {n}")
    for ends in (tree, arcs):
        require(((ends >= 0) & (ends <= m)).all(), f"an arc ends at no node from 0 to {m}")
    links = sp.coo_array((np.ones(m), (tree[:, 0], tree[:, 1])), shape=(m + 1, m + 1))
    pieces, _ = connected_components(links.tocsr(), directed=False)
    require(pieces == 1, "the tree's arcs do not connect all of its nodes")
    require((np.abs(matrix.data) <= 1).all(), "an entry is not 0, 1 or -1")
    difference = (_end_vectors(tree, m + 1) @ matrix - _end_vectors(arcs, m + 1)).tocsc()
    wrong = np.flatnonzero(difference.data)
    if wrong.size:
        place = int(np.searchsorted(difference.indptr, wrong[0], side="right")) - 1
        raise CertificateError(f"its {line} {place} is not the tree path of its arc")


def _end_vectors(arcs: Integers, nodes: int) -> sp.csc_array:
    """Arcs as columns: +1 at the head, -1 at the tail, nothing for a loop."""
    place = arcs[:, ::-1].ravel()
    sign = np.tile(np.array([1, -1], np.int64), len(arcs))
    start = np.arange(0, 2 * len(arcs) + 1, 2)
    return sp.csc_array((sign, place, start), shape=(nodes, len(arcs)))


Axis = Literal["row", "column"]
Reason = Literal["zero", "unit", "copy"]


class Step(NamedTuple):
    """One reduction: a row or column that is dropped, and why that keeps TU both ways."""

    axis: Axis
    line: int
    reason: Reason
    of: int = -1
    sign: int = 1


def step_to_dict(step: Step) -> dict[str, Any]:
    """Return a reduction as plain data."""
    data: dict[str, Any] = {step.axis: int(step.line), "reason": step.reason}
    return data | ({"of": int(step.of), "sign": int(step.sign)} if step.reason == "copy" else {})


def step_from_dict(data: dict[str, Any]) -> Step:
    """Read what `step_to_dict` wrote."""
    axis: Axis = "row" if "row" in data else "column"
    line, reason = read_value(data, axis, int), read_value(data, "reason", str)
    of = [read_value(data, key, int) for key in ("of", "sign")] if reason == "copy" else []
    return Step(axis, line, reason, *of)


@dataclass(frozen=True, eq=False)
class Reduced:
    """Zero, unit and copied (or negated) rows and columns are dropped, then the rest is proven.

    Attributes
    ----------
    steps : tuple of Step
        In their order; indices are those of the whole matrix.
    rest : Part
        For what is left, its rows and columns in ascending order.
    """

    steps: tuple[Step, ...]
    rest: Part
    kind: ClassVar[str] = "reduced"

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        steps = [step_to_dict(step) for step in self.steps]
        return {"kind": self.kind, "steps": steps, "rest": self.rest.to_dict()}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Reduced:
        """Read what `to_dict` wrote."""
        steps = read_value(data, "steps", list)
        require(all(isinstance(step, dict) for step in steps), "a reduction is not an object")
        rest = part_from_dict(read_value(data, "rest", dict))
        return cls(tuple(step_from_dict(step) for step in steps), rest)

    def check(self, matrix: sp.csc_array) -> None:
        """Check that every step holds at its time, and the rest."""
        require(not isinstance(self.rest, Unimodular), "what is left must be TU")
        end = len(self.steps)
        # What stays "goes" after the last step, one by one.
        gone = {"row": end + np.arange(matrix.shape[0]), "column": end + np.arange(matrix.shape[1])}
        for when, (axis, line, reason, of, _) in enumerate(self.steps):
            times = gone[axis]
            require(0 <= line < times.size, f"reduction {when}: there is no {axis} {line}")
            require(times[line] >= end, f"reduction {when} drops {axis} {line} again")
            require(reason in ("zero", "unit", "copy"), f"reduction {when}: unknown {reason!r}")
            require(reason != "copy" or 0 <= of < times.size, f"reduction {when}: no {axis} {of}")
            times[line] = when
        _check_steps(matrix.tocsr(), "row", self.steps, gone["row"], gone["column"])
        _check_steps(matrix, "column", self.steps, gone["column"], gone["row"])
        rows, columns = (np.flatnonzero(gone[axis] >= end) for axis in ("row", "column"))
        self.rest.check(matrix[rows, :][:, columns].tocsc())


def _check_steps(
    lines: sp.csr_array | sp.csc_array,
    axis: str,
    steps: tuple[Step, ...],
    gone: Integers,
    cross_gone: Integers,
) -> None:
    """Check the steps of one axis, all at once.

    Sorted by the time at which their cross line goes, last first, the entries of a line that
    are still there at some time are its first few.
    """
    start, span = lines.indptr.astype(np.int64), len(steps) + max(lines.shape) + 1
    key = np.repeat(np.arange(gone.size) * span, np.diff(start)) + span - cross_gone[lines.indices]
    order = np.argsort(key, kind="stable")
    key, cross, value = key[order], lines.indices[order], lines.data[order]

    def alive(line: Integers, when: Integers) -> Integers:
        return np.asarray(np.searchsorted(key, line * span + span - when) - start[line])

    def those(reason: str) -> tuple[Integers, ...]:
        picked = [
            (when, step.line, step.of, step.sign)
            for when, step in enumerate(steps)
            if step.axis == axis and step.reason == reason
        ]
        return tuple(np.array(picked, dtype=np.int64).reshape(-1, 4).T)

    when, line, _, _ = those("zero")
    require((alive(line, when) == 0).all(), f"a {axis} dropped as zero is not zero")
    when, line, _, _ = those("unit")
    require((alive(line, when) == 1).all(), f"a {axis} dropped as unit has not just one entry")
    require((np.abs(value[start[line]]) == 1).all(), f"a {axis} dropped as unit has another entry")
    when, line, of, sign = those("copy")
    wrong, length = f"a {axis} dropped as a copy is none", alive(line, when)
    require(((np.abs(sign) == 1) & (gone[of] > when)).all(), wrong)
    require((alive(of, when) == length).all(), wrong)
    within = np.arange(length.sum()) - np.repeat(np.cumsum(length) - length, length)
    own, other = np.repeat(start[line], length) + within, np.repeat(start[of], length) + within
    require((cross[own] == cross[other]).all(), wrong)
    require((value[own] == np.repeat(sign, length) * value[other]).all(), wrong)


@dataclass(frozen=True, eq=False)
class Unimodular:
    """Row operations with equations that make the matrix TU, whatever the size of its entries.

    To add a multiple of an equation to another row changes no solution, and the sides stay whole.
    The operations are the inverse of a basis in product form: where an inequality's slack is
    basic, nothing is added from its row (Schrijver 1986, sections 19.1 and 4.1). Equations may
    also be divided, where nothing but whole numbers comes out: that is whole for these sides alone.

    Attributes
    ----------
    operations : ndarray, shape (k, 3), int64
        In their order: [row, source, factor] adds `factor` times row `source`, an equation, to
        the row; [row, row, factor] divides the row, an equation, by `factor`.
    rest : Part
        For the matrix that comes out. Rows that depend on others have become zero.

    Examples
    --------
    >>> swap = Network(np.array([[0, 1], [1, 2]]), np.array([[1, 2], [0, 1]]))
    >>> Unimodular(np.array([[0, 1, -2], [1, 0, -1]]), swap).check(sp.csc_array([[2, 3], [1, 1]]))
    """

    operations: Integers
    rest: Part
    kind: ClassVar[str] = "unimodular"

    @property
    def needs_sides(self) -> bool:
        """Whether the claim holds for the sides that the model has, and perhaps for no others."""
        return bool((self.operations[:, 0] == self.operations[:, 1]).any())

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        operations = self.operations.tolist()
        return {"kind": self.kind, "operations": operations, "rest": self.rest.to_dict()}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Unimodular:
        """Read what `to_dict` wrote."""
        operations = read_table(data, "operations", 3)
        return cls(operations, part_from_dict(read_value(data, "rest", dict)))

    def check(self, matrix: sp.csc_array) -> None:
        """Do the operations, and check what comes out.

        An operation takes as long as its source has entries. Which rows are equations is for
        `check_sides`.
        """
        require(not isinstance(self.rest, Unimodular), "what comes out must be TU")
        m, n = matrix.shape
        inside = (self.operations[:, :2] >= 0) & (self.operations[:, :2] < m)
        require(inside.all(), f"an operation is on a row outside 0 to {m - 1}")
        rows: list[dict[int, int]] = [{} for _ in range(m)]
        entries = matrix.tocoo()
        for i, j, value in zip(*(x.tolist() for x in (*entries.coords, entries.data)), strict=True):
            rows[i][j] = value
        for row, source, factor in self.operations.tolist():
            self._operate(rows[row], rows[source], factor)
        start = np.cumsum([0, *map(len, rows)])
        columns = np.array([j for row in rows for j in row], dtype=np.int64)
        values = [value for row in rows for value in row.values()]
        plain = all(-1 <= value <= 1 for value in values)
        require(plain, "what comes out has an entry other than 0, 1 and -1")
        table = sp.csr_array((np.array(values, np.int64), columns, start), shape=(m, n))
        self.rest.check(table.tocsc())

    def check_sides(self, sides: Sequence[tuple[Fraction | None, Fraction | None]]) -> None:
        """Check that sources are equations, and that divisions leave their sides whole.

        Parameters
        ----------
        sides : sequence of pairs, one per row
            Scaled sides, rounded where that is allowed; None where there is none.
        """
        equation = [lower is not None and lower == upper for lower, upper in sides]
        for source in self.operations[:, 1].tolist():
            require(equation[source], f"its row {source} is added to others, but is no equation")
        if self.needs_sides:
            # What an inequality's sides become is not asked for.
            shifted = [{0: lower or Fraction(0)} for lower, _ in sides]
            for row, source, factor in self.operations.tolist():
                self._operate(shifted[row], shifted[source], factor)

    @staticmethod
    def _operate(row: dict[int, Any], source: dict[int, Any], factor: int) -> None:
        """Do one operation, in whole numbers of any size; a row has a value per column."""
        if row is source:
            require(factor > 0, "a row is divided by less than 1")
            for j, value in row.items():
                row[j], left = divmod(value, factor)
                require(left == 0, "a division leaves a number that is not whole")
            return
        for j, value in source.items():
            changed = row.get(j, 0) + factor * value
            if changed:
                row[j] = changed
            else:
                row.pop(j, None)


@dataclass(frozen=True, eq=False)
class Trivial:
    """Every row is a bound on one column. Speaks of integer columns and their rows alone."""

    kind: ClassVar[str] = "trivial"

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        return {"kind": self.kind}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Trivial:
        """Read what `to_dict` wrote."""
        return cls()

    def check(self, matrix: sp.csc_array) -> None:
        """Check that each row has at most one entry, and that it is 1 or -1."""
        width = np.bincount(matrix.indices, minlength=matrix.shape[0])
        require((width <= 1).all(), "a row of a trivial block has more than one entry")
        require((np.abs(matrix.data) == 1).all(), "an entry of a trivial block is not 1 or -1")


#: What `kind` may say; `certificate_sums` adds its kinds.
KINDS: dict[str, type[Part]] = {
    part.kind: part for part in (Network, Conetwork, Reduced, Unimodular, Trivial)
}


def part_from_dict(data: dict[str, Any]) -> Part:
    """Read one part; its `kind` says which it is."""
    kind = data.get("kind")
    require(isinstance(kind, str) and kind in KINDS, f"{kind!r} is no kind of certificate")
    return KINDS[str(kind)].from_dict(data)

"""The kinds of proof that a matrix is totally unimodular (TU) or unimodular, each with its check.

A part knows its JSON and checks one whole-number matrix; `certificates` puts parts together to
the certificate of a model. Nothing here knows how a part was found. Checks use whole-number
arithmetic alone, in time near-linear in the sizes of matrix and part. A new kind is one new
class, with one line in `KINDS`.

Network matrices: Tutte (1965); Schrijver (1986), section 19.3.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, ClassVar, Literal, NamedTuple, Protocol

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.sparse.csgraph import connected_components

from .certificate_reading import (
    SAFE,
    CertificateError,
    read_indices,
    read_pairs,
    read_value,
    require,
    require_indices,
)
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
        steps: list[dict[str, Any]] = []
        for step in self.steps:
            steps.append({step.axis: int(step.line), "reason": step.reason})
            if step.reason == "copy":
                steps[-1] |= {"of": int(step.of), "sign": int(step.sign)}
        return {"kind": self.kind, "steps": steps, "rest": self.rest.to_dict()}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Reduced:
        """Read what `to_dict` wrote."""
        steps = []
        for step in read_value(data, "steps", list):
            require(isinstance(step, dict), "a reduction is not an object")
            axis: Axis = "row" if "row" in step else "column"
            copied = step.get("reason") == "copy"
            of = [read_value(step, key, int) for key in ("of", "sign")] if copied else []
            line, reason = read_value(step, axis, int), read_value(step, "reason", str)
            steps.append(Step(axis, line, reason, *of))
        return cls(tuple(steps), part_from_dict(read_value(data, "rest", dict)))

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
    """A system Mx = b with M unimodular: all rows, and a slack column for each inequality.

    For a basis B of M with determinant +-1 and B^-1 M TU, all vertices are whole for whole sides
    and bounds, whatever the size of the entries: Mx = b and B^-1 Mx = B^-1 b are one system
    (Schrijver 1986, section 19.1). Where B^-1 is not whole but B^-1 b is, they are whole for
    these sides alone.

    Attributes
    ----------
    kept : ndarray, shape (k,), int64
        Rows of M that generate the others, which then only repeat what these say.
    slacks : ndarray, int64
        Rows with a slack; M's columns are the matrix's, then these.
    basis : ndarray, shape (k,), int64
        Columns of M.
    inverse : tuple of k tuples of k int
        B^-1 times `denominator`.
    denominator : int
        1; above 1 where only these sides are claimed.
    rest : Part
        For B^-1 M, k rows and all columns of M.
    """

    kept: Integers
    slacks: Integers
    basis: Integers
    inverse: tuple[tuple[int, ...], ...]
    denominator: int
    rest: Part
    kind: ClassVar[str] = "unimodular"

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        places = {name: getattr(self, name).tolist() for name in ("kept", "slacks", "basis")}
        inverse = [list(row) for row in self.inverse]
        numbers = {"inverse": inverse, "denominator": self.denominator}
        return {"kind": self.kind, **places, **numbers, "rest": self.rest.to_dict()}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Unimodular:
        """Read what `to_dict` wrote."""
        table = read_value(data, "inverse", list)
        plain = all(isinstance(row, list) and all(type(x) is int for x in row) for row in table)
        require(plain, "'inverse' is not a table of whole numbers")
        return cls(
            kept=read_indices(data, "kept"),
            slacks=read_indices(data, "slacks"),
            basis=read_indices(data, "basis"),
            inverse=tuple(tuple(row) for row in table),
            denominator=read_value(data, "denominator", int),
            rest=part_from_dict(read_value(data, "rest", dict)),
        )

    def check(self, matrix: sp.csc_array) -> None:
        """Check basis, inverse and rest; whether M has all its slacks is for `check_sides`."""
        require(not isinstance(self.rest, Unimodular), "B^-1 M must be TU")
        m, k, count = matrix.shape[0], self.kept.size, self.slacks.size
        require_indices(self.kept, m, "'kept'")
        require_indices(self.slacks, m, "'slacks'")
        require_indices(self.basis, matrix.shape[1] + count, "'basis'")
        square = self.basis.size == len(self.inverse) == k
        require(square and all(len(row) == k for row in self.inverse), "the basis is not square")
        require(self.denominator >= 1, "the inverse's denominator is below 1")
        slack = sp.csc_array(
            (np.ones(count, np.int64), self.slacks, np.arange(count + 1)), shape=(m, count)
        )
        whole = sp.hstack([matrix, slack], format="csc")
        generating = whole[self.kept, :]
        inverse = np.array(self.inverse, dtype=object).reshape(k, k)
        basic = _product(inverse, generating[:, self.basis])
        is_inverse = (basic == self.denominator * np.eye(k, dtype=np.int64)).all()
        require(is_inverse, "the inverse times the basis is not the identity")
        scaled = _product(inverse, generating)
        require((scaled % self.denominator == 0).all(), "B^-1 M is not whole")
        rest = scaled // self.denominator
        require((np.abs(rest) <= 1).all(), "B^-1 M has an entry other than 0, 1 and -1")
        rest = rest.astype(np.int64)
        again = _product(whole[:, self.basis], rest)
        require((again == whole.toarray()).all(), "a row that is not kept says something else")
        self.rest.check(sp.csc_array(rest))

    def check_sides(self, sides: Sequence[tuple[Fraction | None, Fraction | None]]) -> None:
        """Check that inequalities have slacks and, if it is needed, that B^-1 b is whole.

        Parameters
        ----------
        sides : sequence of pairs, one per row
            Scaled sides, rounded where that is allowed; None where there is none.
        """
        slack = set(self.slacks.tolist())
        for i, (lower, upper) in enumerate(sides):
            known = i in slack or (lower is not None and lower == upper)
            require(known, f"its row {i} is an inequality without a slack")
        if self.denominator > 1:
            # A slack takes over its row's sides as bounds, which leaves 0 for b.
            b = [(0 if i in slack else sides[i][0]) or 0 for i in self.kept.tolist()]
            for row in self.inverse:
                value = Fraction(sum(x * y for x, y in zip(row, b, strict=True)))
                require((value / self.denominator).denominator == 1, "B^-1 b is not whole")


def _product(left: Any, right: Any) -> NDArray[Any]:
    """Exact product of tables, sparse or not: 64 bits where they hold it, else Python integers."""
    both = (left, right)
    largest = [int(np.abs(t.data if sp.issparse(t) else t).max(initial=0)) for t in both]
    if max(largest) < SAFE and largest[0] * largest[1] * max(left.shape[1], 1) < SAFE:
        a, b = (t if sp.issparse(t) else t.astype(np.int64) for t in both)
        return np.asarray(a @ b)
    a, b = ((t.toarray() if sp.issparse(t) else t).astype(object) for t in both)
    return np.asarray(a @ b)


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


#: What `kind` may say.
KINDS: dict[str, type[Part]] = {
    part.kind: part for part in (Network, Conetwork, Reduced, Unimodular, Trivial)
}


def part_from_dict(data: dict[str, Any]) -> Part:
    """Read one part; its `kind` says which it is."""
    kind = data.get("kind")
    require(isinstance(kind, str) and kind in KINDS, f"{kind!r} is no kind of certificate")
    return KINDS[str(kind)].from_dict(data)

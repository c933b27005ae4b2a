"""Proofs that take a matrix apart: sums of order 1, 2 and 3, a pivot, and R10.

Seymour (1980), Decomposition of regular matroids: every totally unimodular (TU) matrix is put
together from network matrices, their transposes and the two matrices of R10 (Schrijver 1986,
section 19.4; Truemper 1992, Matroid Decomposition, chapters 8 and 11). A `Sum` takes it apart
again; `summands` tells why TU summands make a TU matrix.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
import scipy.sparse as sp

from .certificate_parts import (
    KINDS,
    Part,
    Step,
    Unimodular,
    part_from_dict,
    step_from_dict,
    step_to_dict,
)
from .certificate_reading import (
    CertificateError,
    read_indices,
    read_value,
    require,
    require_indices,
)
from .forms.numbers import Integers
from .summands import Split, Summands

__all__ = ["R10", "R10_MATRICES", "Pivot", "Split", "Sum", "Summands", "pivoted"]


@dataclass(frozen=True, eq=False)
class Sum:
    """A matrix that is taken apart by sums, and by reductions on the way; its summands are TU.

    Attributes
    ----------
    steps : tuple of Split or Step
        In their order; lines are numbered as `Summands` numbers them.
    parts : tuple of Part
        One for each summand: the first is what stays, then one for each split. A part counts
        along its summand's rows and columns, in ascending order.

    Examples
    --------
    >>> from pyomo_latpath.certificate_parts import Network
    >>> split = Split(np.array([1, 2]), np.array([1, 2]), np.array([[0, 1]]))
    >>> above = Network(np.array([[0, 1]]), np.array([[0, 1], [0, 1]]))
    >>> below = Network(np.array([[1, 2], [0, 1], [2, 3]]), np.array([[0, 3], [1, 3]]))
    >>> Sum((split,), (above, below)).check(sp.csc_array([[1, 1, 1], [0, 1, 1], [0, 1, 0]]))
    """

    steps: tuple[Split | Step, ...]
    parts: tuple[Part, ...]
    kind: ClassVar[str] = "sum"

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        steps = [s.to_dict() if isinstance(s, Split) else step_to_dict(s) for s in self.steps]
        parts = [part.to_dict() for part in self.parts]
        return {"kind": self.kind, "steps": steps, "parts": parts}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Sum:
        """Read what `to_dict` wrote."""
        steps, parts = (read_value(data, key, list) for key in ("steps", "parts"))
        for thing in (*steps, *parts):
            require(isinstance(thing, dict), "a step or part of a sum is not an object")
        read = (step_from_dict(s) if "reason" in s else Split.from_dict(s) for s in steps)
        return cls(tuple(read), tuple(part_from_dict(part) for part in parts))

    def check(self, matrix: sp.csc_array) -> None:
        """Check that each step holds at its time, and each summand."""
        summands, what = Summands(matrix), ""
        try:
            for when, step in enumerate(self.steps):
                what = f"step {when}"
                summands.take(step)
            what, count = "its end", len(summands)
            require(len(self.parts) == count, f"{len(self.parts)} parts for {count} summands")
            for k, part in enumerate(self.parts):
                what = f"summand {k}"
                require(not isinstance(part, Unimodular), "what is left must be TU")
                part.check(summands.summand(k)[2])
        except CertificateError as error:
            raise CertificateError(f"{what}: {error}") from None


#: Entries that one pivot may change; beyond, memory could run out.
MOST_CHANGED = 10**7


def pivoted(matrix: sp.csc_array, row: int, column: int) -> sp.csc_array:
    """Exchange a row and a column at an entry e, 1 or -1: [e c; b D] becomes [e ec; -eb D-ebc].

    One is TU if and only if the other is (Schrijver 1986, section 19.4, which has column eb).

    Examples
    --------
    >>> pivoted(sp.csc_array([[1, 1], [1, 0]]), 0, 0).toarray()
    array([[ 1,  1],
           [-1, -1]])
    """
    m, n = matrix.shape
    entry = int(matrix[row, column])
    units = [sp.csc_array(([1], ([k], [0])), shape=(s, 1)) for k, s in ((row, m), (column, n))]
    change = (matrix[:, [column]] - units[0]) @ (matrix[[row], :] + units[1].T)
    result = (matrix - entry * change).tocsc()
    result.eliminate_zeros()
    result.sort_indices()
    return result


@dataclass(frozen=True, eq=False)
class Pivot:
    """The matrix after one pivot, see `pivoted`, is proven by `rest`."""

    row: int
    column: int
    rest: Part
    kind: ClassVar[str] = "pivot"

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        place = {"row": int(self.row), "column": int(self.column)}
        return {"kind": self.kind, **place, "rest": self.rest.to_dict()}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Pivot:
        """Read what `to_dict` wrote."""
        row, column = (read_value(data, key, int) for key in ("row", "column"))
        return cls(row, column, part_from_dict(read_value(data, "rest", dict)))

    def check(self, matrix: sp.csc_array) -> None:
        """Check the entry, and the rest."""
        require(not isinstance(self.rest, Unimodular), "the pivoted matrix must be TU")
        inside = 0 <= self.row < matrix.shape[0] and 0 <= self.column < matrix.shape[1]
        require(inside, f"there is no row {self.row} or no column {self.column}")
        unit = abs(matrix[self.row, self.column]) == 1
        require(unit, f"the entry ({self.row}, {self.column}) of the pivot is not 1 or -1")
        changed = matrix[[self.row], :].nnz * matrix[:, [self.column]].nnz
        require(changed <= MOST_CHANGED, f"the pivot changes {changed} entries: too many")
        self.rest.check(pivoted(matrix, self.row, self.column))


#: The two matrices of R10: Seymour (1980); Schrijver (1986), section 19.4, (52).
R10_MATRICES = (
    np.array(
        [
            [1, -1, 0, 0, -1],
            [-1, 1, -1, 0, 0],
            [0, -1, 1, -1, 0],
            [0, 0, -1, 1, -1],
            [-1, 0, 0, -1, 1],
        ]
    ),
    np.array(
        [
            [1, 1, 1, 1, 1],
            [1, 1, 1, 0, 0],
            [1, 0, 1, 1, 0],
            [1, 0, 0, 1, 1],
            [1, 1, 0, 0, 1],
        ]
    ),
)


@dataclass(frozen=True, eq=False)
class R10:
    """One of the two matrices of R10, up to the order and the signs of its lines.

    Attributes
    ----------
    row_order, column_order : ndarray, shape (5,), int64
        Which line of the matrix stands at each place of `R10_MATRICES`.
    row_signs, column_signs : ndarray, shape (5,), int64
        1 or -1 along these; times both signs, the entries are those of R10.
    """

    row_order: Integers
    column_order: Integers
    row_signs: Integers
    column_signs: Integers
    kind: ClassVar[str] = "r10"

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        names = ("row_order", "column_order", "row_signs", "column_signs")
        return {"kind": self.kind, **{name: getattr(self, name).tolist() for name in names}}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> R10:
        """Read what `to_dict` wrote."""
        names = ("row_order", "column_order", "row_signs", "column_signs")
        return cls(*(read_indices(data, name) for name in names))

    def check(self, matrix: sp.csc_array) -> None:
        """Compare with both matrices."""
        require(matrix.shape == (5, 5), "R10 has five rows and five columns")
        for lines, signs, axis in (
            (self.row_order, self.row_signs, "row"),
            (self.column_order, self.column_signs, "column"),
        ):
            require(lines.size == signs.size == 5, f"R10 needs five {axis}s and their signs")
            require_indices(lines, 5, f"'{axis}_order'")
            require((np.abs(signs) == 1).all(), f"a {axis}'s sign is not 1 or -1")
        table = matrix.toarray()[np.ix_(self.row_order, self.column_order)]
        table = self.row_signs[:, None] * table * self.column_signs
        same = any(np.array_equal(table, known) for known in R10_MATRICES)
        require(same, "its lines in this order and with these signs are not those of R10")


KINDS.update({part.kind: part for part in (Sum, Pivot, R10)})

"""The answer to "why is this relaxation fractional?", as data in the names of the model.

Indices lead into the form; they are left out of `to_dict()` wherever names stand beside them.
Numbers that are not known are NaN (None in `to_dict()`).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from ..forms.linear_form import LinearForm
from ..integrality.finding import Finding, Verdict, Witness
from .plain import plain
from .remedy import Remedy

Indices = NDArray[np.int64]


@dataclass(frozen=True)
class ComponentShare:
    """How often one variable component of the model is fractional.

    Attributes
    ----------
    name : str
        Of the component ("ship" for "ship[cave,town]").
    integers : int
        Its columns that are declared integer.
    fractional : int
        Those of them that are fractional at the relaxation's optimum.
    worst_name : str or None
        The one furthest from a whole number there.
    worst_value : Fraction or None
    sampled : int
        Of the sampled vertices, how many have a fractional column of this component.
    """

    name: str
    integers: int
    fractional: int
    worst_name: str | None
    worst_value: Fraction | None
    sampled: int


@dataclass(frozen=True)
class Fractional:
    """Which integer columns are fractional at the optimum of the normalised relaxation.

    Attributes
    ----------
    count, integers : int
        Fractional ones, and all.
    worst_name : str or None
        The column furthest from a whole number.
    worst_value : Fraction or None
        Its value; the simplest fraction within 1e-9 of the computed one.
    components : tuple of ComponentShare
        Most fractional columns first.
    samples : int
        K, the vertices on which `ComponentShare.sampled` rests: a sample, no proof.
    samples_fractional : int
        Those with any fractional column.
    """

    count: int
    integers: int
    worst_name: str | None
    worst_value: Fraction | None
    components: tuple[ComponentShare, ...]
    samples: int
    samples_fractional: int


@dataclass(frozen=True)
class Gap:
    """What wholeness costs: the relaxation's optimum against the best whole plan.

    Attributes
    ----------
    sense : 'min' or 'max'
    declared_bound : float
        Optimum of the relaxation as the model declares it.
    rounded_bound : float
        The same after sides and bounds were rounded inwards, which loses no whole plan.
    plan : float
        Objective of the best whole plan found.
    plan_bound : float
        Best proven bound on every whole plan.
    plan_status : str
        'optimal' where `plan` is the best one, 'time_limit' where the search was cut off,
        'infeasible' where there is none, 'unbounded', 'error' or 'unknown' (not looked for).
    seconds : float
        Of the search for the plan.
    """

    sense: Literal["min", "max"]
    declared_bound: float
    rounded_bound: float
    plan: float
    plan_bound: float
    plan_status: str
    seconds: float

    @property
    def absolute(self) -> float:
        """By how much the plan is worse than the relaxation's optimum, as declared."""
        worse = self.plan - self.declared_bound
        return max(0.0, worse if self.sense == "min" else -worse)

    @property
    def relative(self) -> float:
        """The same as a share of the plan's objective (of 1 where that is smaller)."""
        return self.absolute / max(1.0, abs(self.plan))

    @property
    def exact(self) -> bool:
        """Whether the plan is the best one, so that the gap is not only an upper bound."""
        return self.plan_status == "optimal"


@dataclass(frozen=True, eq=False)
class Group:
    """Rows that belong together: a constraint component of the model.

    Attributes
    ----------
    name : str
    rows : ndarray, int64
        Indices into the form.
    size, nonzeros : int
        How many rows, how many entries.
    beyond : int
        Entries at integer columns that are not 0 or +-1 after scaling.
    broken_sides : int
        Rows with a side that is not whole after scaling.
    continuous : int
        Entries at continuous columns, in rows that hold integer columns, too.
    tight : int
        Rows that are tight at the relaxation's optimum.
    certified_alone : bool or None
        Whether the model with these rows alone is certified whole; None where not tried.
    to_blame : bool
        Whether it is in one of the `culprits`.
    """

    name: str
    rows: Indices = field(repr=False)
    size: int
    nonzeros: int
    beyond: int
    broken_sides: int
    continuous: int
    tight: int
    certified_alone: bool | None
    to_blame: bool


@dataclass(frozen=True, eq=False)
class Culprit:
    """A smallest set of groups without which everything that is left is certified whole.

    Attributes
    ----------
    groups : tuple of str
        No proper subset of them does.
    smallest : bool
        Whether it is also known that no set of fewer groups does.
    rows : tuple of str
        Names of a set of rows among them that does, too, and of which none can stay.
    row_indices : ndarray, int64
    rows_minimal : bool
        Whether that was shown for each row; False where the time ran out before.
    structures : tuple of str
        Of what is left without the groups, largest block first ('network', ...).
    remains : str
        One sentence about that.
    objective_without : float
        Optimum without the groups: exact for whole plans, since what is left is certified.
    price : float
        By how much the model's best known plan is worse: what these side constraints cost (at
        most, where `Gap.exact` is False).
    """

    groups: tuple[str, ...]
    smallest: bool
    rows: tuple[str, ...]
    row_indices: Indices = field(repr=False)
    rows_minimal: bool
    structures: tuple[str, ...]
    remains: str
    objective_without: float
    price: float


@dataclass(frozen=True, eq=False)
class Violator:
    """A smallest conflict: a square submatrix with determinant +-2, or an entry beyond 0, +-1.

    Attributes
    ----------
    rows, columns : ndarray, shape (k,), int64
        Indices into the form. Of a cycle in its order: row i has its nonzeros at columns i - 1
        and i (cyclically), column i at rows i and i + 1.
    row_names, column_names : tuple of str, length k
    entries : ndarray, shape (k, k), int64
        After scaling, in this order.
    determinant : int
    cycle : bool
        Whether each row and each column has exactly two nonzeros, all on one cycle.
    minimal : bool
        Whether every proper submatrix is shown to be totally unimodular.
    groups : tuple of str
        Names of the groups that its rows belong to.
    block : int
        Place of its block in `Explanation.blocks`.
    """

    rows: Indices = field(repr=False)
    columns: Indices = field(repr=False)
    row_names: tuple[str, ...]
    column_names: tuple[str, ...]
    entries: NDArray[np.int64]
    determinant: int
    cycle: bool
    minimal: bool
    groups: tuple[str, ...]
    block: int


@dataclass(frozen=True)
class Reason:
    """A side reason: numbers that no certificate can do with.

    Attributes
    ----------
    kind : str
        'coefficient' (not 0 or +-1 after scaling), 'side' or 'bound' (not whole), 'continuous'
        (continuous columns in rows of integer ones), 'parity' (equations that no whole numbers
        satisfy) or 'semicontinuous'.
    where : str
        Name of the row group, or of the variable component.
    count : int
        How many.
    examples : tuple of str
        Names of rows or columns, worst first; a few.
    sentence : str
    """

    kind: Literal["coefficient", "side", "bound", "continuous", "parity", "semicontinuous"]
    where: str
    count: int
    examples: tuple[str, ...]
    sentence: str


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
    """The matrix from afar: nonzeros counted on a grid, blocks on the diagonal.

    Attributes
    ----------
    rows, columns : int
        Of the normalised matrix.
    counts : ndarray, shape (p, q), int64
        p, q <= 40. Cell (i, j) counts the nonzeros of the permuted matrix in rows
        row_edges[i] to row_edges[i + 1] - 1 and columns alike.
    row_edges, column_edges : ndarray, shape (p + 1,), (q + 1,), int64
    """

    rows: int
    columns: int
    counts: NDArray[np.int64]
    row_edges: NDArray[np.int64]
    column_edges: NDArray[np.int64]


@dataclass(frozen=True)
class Whole:
    """A model whose vertices are all whole: why, what its declarations cost, what would break it.

    Attributes
    ----------
    sentences : tuple of str
        What its blocks are; equal ones once, with their number.
    breakers : tuple of str
        What could break it; each true of the certificates at hand.
    path_seconds : float
        One run of the path route; NaN where it was not run.
    highs_seconds : float
        One run of HiGHS's branch and bound on the same form.
    highs_ended : bool
        False where that was cut off, and would have taken longer.
    """

    sentences: tuple[str, ...]
    breakers: tuple[str, ...]
    path_seconds: float
    highs_seconds: float
    highs_ended: bool


@dataclass(frozen=True)
class NoOptimum:
    """A model without a best plan: infeasible, or unbounded.

    Attributes
    ----------
    kind : 'infeasible' or 'unbounded'
    sentence : str
    names : tuple of str
        Rows (and 'bounds of COLUMN') that conflict; the columns that grow without end.
    minimal : bool
        Whether none of those rows and bounds could be left out.
    groups : tuple of str
        A set of groups that conflict by themselves.
    groups_minimal : bool
        Whether none of the groups could be left out.
    """

    kind: Literal["infeasible", "unbounded"]
    sentence: str
    names: tuple[str, ...]
    minimal: bool
    groups: tuple[str, ...]
    groups_minimal: bool


@dataclass(frozen=True, eq=False)
class Explanation:
    """Where and why the relaxation of a model is fractional, and what can be done.

    Attributes
    ----------
    finding : Finding
        The verdict, block by block.
    rows, columns, integers, nonzeros : int
        Of the model.
    fractional : Fractional or None
        None where the relaxation has no optimum.
    gap : Gap or None
    witness : Witness or None
        A fractional vertex, exact.
    groups : tuple of Group
        All row groups, in the order of the model.
    grouped_by : str
        'component' (Pyomo constraints), 'name' (stems of row names) or 'pattern' (names say
        nothing; rows with the same coefficients stand together, named after the first).
    culprits : tuple of Culprit
        Smallest first.
    violators : tuple of Violator
        From different places of the model.
    reasons : tuple of Reason
        Worst first.
    whole : Whole or None
        Where every vertex is proven whole.
    no_optimum : NoOptimum or None
        Where the model is infeasible or unbounded.
    remedies : tuple of Remedy
        Most useful first; each checked.
    blocks : tuple of BlockSummary
        In the order of `finding.blocks`.
    sketch : Sketch
    complete : bool
        Whether every question was answered to the end.
    cut_off : tuple of str
        What was left open, by time limit or interruption: one sentence each.
    interrupted : bool
    seconds : dict of str to float
        By part of the answer.
    form : LinearForm
    model : object or None
        The Pyomo model, where one was given.
    """

    finding: Finding = field(repr=False)
    rows: int
    columns: int
    integers: int
    nonzeros: int
    fractional: Fractional | None
    gap: Gap | None
    witness: Witness | None
    groups: tuple[Group, ...]
    grouped_by: Literal["component", "name", "pattern"]
    culprits: tuple[Culprit, ...]
    violators: tuple[Violator, ...]
    reasons: tuple[Reason, ...]
    whole: Whole | None
    no_optimum: NoOptimum | None
    remedies: tuple[Remedy, ...]
    blocks: tuple[BlockSummary, ...]
    sketch: Sketch
    complete: bool
    cut_off: tuple[str, ...]
    interrupted: bool
    seconds: dict[str, float]
    form: LinearForm = field(repr=False)
    model: Any = field(default=None, repr=False)

    @property
    def verdict(self) -> Verdict:
        """Refuted before undecided before sampled before proven."""
        return self.finding.verdict

    @property
    def sense(self) -> Literal["min", "max"]:
        """The model's own sense."""
        return self.form.sense

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON; certificates are left to `finding.to_dict()`."""
        told: dict[str, Any] = plain(self)
        told |= {"verdict": self.verdict.value, "sense": self.sense}
        if self.gap is not None:
            told["gap"] |= plain({"absolute": self.gap.absolute, "relative": self.gap.relative})
        if self.witness is not None:
            told["witness"] = self.witness.to_dict()
            names = [self.form.col_names[j] for j in self.witness.columns.tolist()]
            told["witness"]["column_names"] = names
        return told

    def to_text(self) -> str:
        """The answer as a page of text."""
        from .text import to_text

        return to_text(self)

    def to_html(self) -> str:
        """The answer as one self-contained HTML page."""
        from .page import to_html

        return to_html(self)

    def _repr_html_(self) -> str:
        from .notebook import to_notebook

        return to_notebook(self)

"""The answer to "why is this relaxation fractional?", as data in the names of the model.

Indices lead into the form; they are left out of `to_dict()` wherever names stand beside them.
Numbers that are not known are NaN (None in `to_dict()`).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

from ..forms.linear_form import LinearForm
from ..integrality.finding import Finding, Verdict, Witness
from .conflict import NamedViolator
from .culprits import Culprit
from .fractional import ComponentShare, Fractional
from .gap import Gap
from .groups import Group
from .no_optimum import NoOptimum
from .plain import plain
from .reasons import Reason
from .remedies.remedy import Remedy
from .sketch import BlockSummary, Sketch
from .whole import Whole

__all__ = [
    "BlockSummary",
    "ComponentShare",
    "Culprit",
    "Explanation",
    "Fractional",
    "Gap",
    "Group",
    "NamedViolator",
    "NoOptimum",
    "Reason",
    "Remedy",
    "Sketch",
    "Whole",
]


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
        Smallest first; of the same size, first that without which the relaxation's optimum
        changes least.
    violators : tuple of NamedViolator
        From different places of the model.
    reasons : tuple of Reason
        Worst first.
    whole : Whole or None
        Where every vertex is proven whole.
    no_optimum : NoOptimum or None
        Where the model is infeasible or unbounded.
    remedies : tuple of Remedy
        Each checked. In the order in which `bound_together` counts them: sides and bounds
        rounded, smaller coefficients, rows split, cuts, declarations dropped.
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
    violators: tuple[NamedViolator, ...]
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
        from .telling.text import to_text

        return to_text(self)

    def to_html(self) -> str:
        """The answer as one self-contained HTML page."""
        from .telling.page import to_html

        return to_html(self)

    def _repr_html_(self) -> str:
        from .telling.notebook import to_notebook

        return to_notebook(self)

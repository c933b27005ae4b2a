"""What was found out about a form so far, and the explanation that it makes.

An interruption may come at any moment, so each answer is put down as soon as it is known.
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np

from ..forms.blocks import blocks_of
from ..forms.linear_form import LinearForm
from ..forms.normalise import normalise
from ..integrality.finding import Finding, Verdict, Witness
from ..solution import Solution
from . import culprits
from .conflict import NamedViolator
from .culprits import Culprit, CulpritSet
from .explanation import Explanation
from .fractional import Fractional
from .gap import Gap
from .groups import groups_of, oddities_of
from .no_optimum import NoOptimum
from .reasons import find_reasons
from .relaxation import Place, places_of
from .remains import Certified
from .remedies.remedy import Remedy
from .sketch import sketch_of, summaries
from .stems import column_stems, row_stems
from .whole import Whole


class Found:
    """The answers so far.

    Parameters
    ----------
    form : LinearForm
    seed : int
        Of the vertex sampler.

    Attributes
    ----------
    normal, blocks
        The form normalised, and split.
    row_stems, column_stems, odd
        What belongs together, and which numbers are odd.
    bounds : (float, float)
        Optimum of the relaxation as declared, and after rounding; NaN where not known.
    solution : (Solution, float) or None
        The best whole plan, and the seconds that the search for it took.
    culprits : list of (CulpritSet, Culprit)
        Not priced yet.
    cut_off : list of str
        What was left open.
    finding, groups, fractional, violators, whole, no_optimum, remedies, interrupted, seconds
        As in `Explanation`.
    """

    def __init__(self, form: LinearForm, seed: int) -> None:
        self.form = form
        self.normal = normalise(form)
        self.blocks = tuple(blocks_of(self.normal))
        self.row_stems, self.column_stems = row_stems(form), column_stems(form)
        self.odd = oddities_of(self.normal, self.blocks)
        self.groups = groups_of(self.normal, self.row_stems, self.odd, None)
        self.finding = Finding((), self.normal.snapped, seed)
        self.fractional: Fractional | None = None
        self.bounds = math.nan, math.nan
        self.solution: tuple[Solution, float] | None = None
        self.violators: list[NamedViolator] = []
        self.culprits: list[tuple[CulpritSet, Culprit]] = []
        self.whole: Whole | None = None
        self.no_optimum: NoOptimum | None = None
        self.remedies: list[Remedy] = []
        self.interrupted = False
        self.cut_off: list[str] = []
        self.seconds: dict[str, float] = {}

    @property
    def certified(self) -> Certified:
        """The proofs, where all blocks have one."""
        proofs = [
            (str(block.structure), block.certificate.blocks[0])
            for block in self.finding.blocks
            if block.certificate is not None
        ]
        return Certified(self.normal, self.blocks, tuple(proofs))

    @property
    def gap(self) -> Gap | None:
        """Bounds and plan as far as they are known; None before the relaxation's optimum is."""
        declared, rounded = self.bounds
        if math.isnan(rounded):
            return None
        if self.solution is None:
            nan = math.nan
            return Gap(self.form.sense, declared, rounded, nan, nan, "unknown", 0.0)
        solution, seconds = self.solution
        return Gap(
            sense=self.form.sense,
            declared_bound=declared,
            rounded_bound=rounded,
            plan=solution.objective,
            plan_bound=solution.bound,
            plan_status=solution.status,
            seconds=seconds,
        )

    @property
    def witness(self) -> Witness | None:
        """The fractional vertex of the first block that has one."""
        met = (block.witness for block in self.finding.blocks)
        return next((witness for witness in met if witness is not None), None)

    def places(self) -> list[Place]:
        """Where known fractional vertices are fractional; without any, what is not certified."""
        pairs = zip(self.blocks, self.finding.blocks, strict=False)
        open_ones = [block for block, told in pairs if told.verdict is not Verdict.PROVEN]
        if self.witness is None:
            return [Place(block.rows, block.columns) for block in open_ones]
        rows, columns = [np.empty(0, np.int64)], [np.empty(0, np.int64)]
        for block in self.finding.blocks:
            if block.witness is not None:
                broken = [value.denominator > 1 for value in block.witness.values]
                columns.append(block.witness.columns[broken])
                rows.append(block.witness.tight_rows)
        return places_of(
            self.normal,
            np.searchsorted(self.normal.rows, np.unique(np.concatenate(rows))),
            np.searchsorted(self.normal.columns, np.unique(np.concatenate(columns))),
        )

    def block_of(self, violator: NamedViolator) -> int:
        """Place of the block that a conflict lies in; -1 where none holds it."""
        row = int(violator.rows[0])
        held = (k for k, b in enumerate(self.blocks) if row in self.normal.rows[b.rows])
        return next(held, -1)

    def _priced_culprits(self) -> tuple[Culprit, ...]:
        """Smallest first; of the same size, first what the relaxation's optimum needs least."""
        told, found = [culprit for _, culprit in self.culprits], self.gap
        if found is None:
            return tuple(told)

        def order(culprit: Culprit) -> tuple[int, float]:
            change = abs(culprit.objective_without - found.rounded_bound)
            return len(culprit.groups), math.inf if math.isnan(change) else change

        return tuple(
            replace(culprit, price=culprits.price(found.worse_than(culprit.objective_without)))
            for culprit in sorted(told, key=order)
        )

    def explanation(self, model: Any) -> Explanation:
        """What was found so far."""
        found = self.gap
        has_plan = self.solution is not None and self.solution[0].x is not None
        m, n = self.form.shape
        return Explanation(
            finding=self.finding,
            rows=m,
            columns=n,
            integers=int(self.form.integer.sum()),
            nonzeros=int(self.form.matrix.nnz),
            fractional=self.fractional,
            gap=found,
            witness=self.witness,
            groups=self.groups,
            grouped_by=self.row_stems.by,
            culprits=self._priced_culprits(),
            violators=tuple(self.violators),
            reasons=find_reasons(
                self.normal, self.odd, self.row_stems, self.column_stems, has_plan=has_plan
            ),
            whole=self.whole,
            no_optimum=self.no_optimum,
            remedies=tuple(self.remedies),
            blocks=summaries(self.normal, self.blocks, self.finding.blocks),
            sketch=sketch_of(self.normal, self.blocks),
            complete=not self.cut_off,
            cut_off=tuple(self.cut_off),
            interrupted=self.interrupted,
            seconds=self.seconds,
            form=self.form,
            model=model,
        )

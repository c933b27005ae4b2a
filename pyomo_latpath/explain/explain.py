"""Why a relaxation is fractional: one question after the other, the cheap ones first.

Each answer is kept as it comes, so that a time limit or an interruption costs only what was not
reached. Where the time is not limited, questions whose cost nobody can foresee get a few seconds
each; what they leave open is told.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from typing import Any

import numpy as np

from ..deadline import Deadline
from ..forms.blocks import blocks_of
from ..forms.linear_form import LinearForm
from ..forms.normalise import normalise
from ..highs import LpResult
from ..integrality.assess import assess
from ..integrality.finding import Finding, Verdict, Witness
from ..solution import Solution
from . import culprits, no_optimum, whole
from .conflict import NamedViolator, violators
from .culprits import Culprit, CulpritSet, Search
from .explanation import Explanation
from .fractional import Fractional, measure
from .gap import Declared, Gap, best_plan, declared_optimum
from .groups import groups_of, oddities_of
from .no_optimum import NoOptimum
from .reasons import find_reasons
from .relaxation import Place, Relaxation, places_of
from .remains import Certified, Remains
from .remedies.context import Context
from .remedies.find import find_remedies
from .remedies.remedy import Remedy
from .sketch import sketch_of, summaries
from .stems import column_stems, row_stems
from .whole import Whole

Progress = Callable[[str], None]

#: Vertices to look at, at most.
SAMPLES = 32
#: Share of the time that is left, and seconds where the time is not limited, for each question.
BUDGETS: dict[str, tuple[float, float]] = {
    "verdict": (0.3, 3.0),
    "refutation": (0.15, 1.5),
    "sampling": (0.1, 1.0),
    "violators": (0.2, 5.0),
    "culprits": (0.6, 20.0),
    "plan": (0.4, 10.0),
    "rows": (0.3, 5.0),
    "infeasible": (0.8, 20.0),
    "branch and bound": (0.9, 20.0),
    "remedies": (0.9, 10.0),
}


def explain(
    form: LinearForm,
    *,
    time_limit: float | None = None,
    seed: int = 0,
    progress: Progress | None = None,
    model: Any = None,
) -> Explanation:
    """Explain where and why the relaxation of a form is fractional, and what can be done.

    Parameters
    ----------
    form : LinearForm
    time_limit : float, optional
        Seconds. Without one, questions whose cost cannot be foreseen get 1 to 20 seconds each.
    seed : int
        Of the vertex sampler.
    progress : callable, optional
        Takes a line about what is being done.
    model : object, optional
        What the form was compiled from; kept.

    Returns
    -------
    Explanation
        After a KeyboardInterrupt, with what was found by then.

    Raises
    ------
    ValueError
        For a negative time limit or seed.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1, 0], [0, 1, 1], [1, 0, 1]], row_lower=0, row_upper=1,
    ...     col_lower=0, col_upper=1, cost=1, sense="max",
    ...     row_names=["cave[1]", "cave[2]", "van"])
    >>> explanation = explain(form)
    >>> [culprit.groups for culprit in explanation.culprits], explanation.gap.absolute
    ([('van',), ('cave',)], 0.5)
    """
    if time_limit is not None and not time_limit >= 0:
        raise ValueError(f"time_limit is {time_limit}; it must be a number of seconds from 0 on")
    if seed < 0:
        raise ValueError(f"seed is {seed}; it must be a whole number from 0 on")
    draft = _Draft(form, Deadline(time_limit), seed, progress or (lambda line: None))
    try:
        draft.answer()
    except KeyboardInterrupt:
        draft.interrupted = True
        draft.cut_off.append(f"it was interrupted while {draft.doing}")
    return draft.finished(model)


class _Draft:
    """An explanation in the making."""

    def __init__(self, form: LinearForm, deadline: Deadline, seed: int, tell: Progress) -> None:
        self.form, self.deadline, self.seed, self.tell = form, deadline, seed, tell
        self.doing, self.interrupted = "reading the model", False
        self.cut_off: list[str] = []
        self.seconds: dict[str, float] = {}
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
        self.remains = Remains(form)

    @contextmanager
    def _question(self, name: str, doing: str) -> Iterator[Deadline]:
        """Time a question, and give it its share of the time."""
        self.doing = doing
        self.tell(doing)
        share, seconds = BUDGETS.get(name, (1.0, math.inf))
        limited = self.deadline.left < math.inf
        since = time.perf_counter()
        try:
            yield self.deadline.within(share * self.deadline.left if limited else seconds)
        finally:
            spent = time.perf_counter() - since
            self.seconds[name] = self.seconds.get(name, 0.0) + spent

    def answer(self) -> None:
        """Ask all questions in turn."""
        if self.normal.conflict is not None:
            self._assess(0)
            self._without_optimum()
            return
        if self.form.semicontinuous.any():  # without their gaps such columns are no relaxation
            self._assess(0)
            return
        relaxation = Relaxation(self.normal)
        with self._question("relaxation", "solving the relaxation"):
            optimum = relaxation.optimum(self.deadline)
            places = relaxation.places(optimum.x) if optimum.status == "optimal" else []
        self._assess(SAMPLES, fractional=bool(places))
        if optimum.status in ("infeasible", "unbounded"):
            self._without_optimum()
        elif optimum.status == "optimal":
            self._measure(relaxation, optimum)
            if all(block.certificate is not None for block in self.finding.blocks):
                self._tell_whole()
            else:
                self._tell_fractional(relaxation, places or self._places())
            if self.no_optimum is None:
                self._find_remedies(relaxation, optimum)
        else:
            self.cut_off.append("the relaxation was not solved in time")

    def _assess(self, samples: int, *, fractional: bool = False) -> None:
        """The verdict: a fractional optimum nearly settles it, a whole one asks for more."""
        name = "refutation" if fractional else "verdict"
        with self._question(name, "assessing the model") as deadline:
            limit = None if deadline.left == math.inf else deadline.left
            count = 1 if fractional else samples
            self.finding = assess(self.form, samples=count, time_limit=limit, seed=self.seed)

    def _measure(self, relaxation: Relaxation, optimum: LpResult) -> None:
        """What the relaxation's optimum is like."""
        self.groups = groups_of(self.normal, self.row_stems, self.odd, optimum.x)
        with self._question("sampling", "looking at vertices") as deadline:
            told = measure(
                relaxation,
                optimum,
                self.column_stems,
                samples=SAMPLES,
                seed=self.seed,
                deadline=deadline,
            )
        with self._question("relaxation", "solving the relaxation as declared") as deadline:
            rounded = Declared(relaxation.objective(optimum), told.count)
            declared = declared_optimum(self.normal, rounded, deadline)
        self.bounds = declared.bound, rounded.bound
        self.fractional = replace(told, declared=declared.fractional)

    def _find_remedies(self, relaxation: Relaxation, optimum: LpResult) -> None:
        context = Context(
            form=self.form,
            normal=self.normal,
            blocks=self.blocks,
            finding=self.finding,
            groups=self.groups,
            optimum=optimum,
            basis=relaxation.basis,
            fractional=self.fractional,
            gap=self._gap(),
            violators=tuple(self.violators),
            seed=self.seed,
        )
        with self._question("remedies", "looking for remedies") as deadline:
            for remedy in find_remedies(context, deadline):
                self.remedies.append(remedy)
                self.tell(remedy.title)

    def _without_optimum(self) -> None:
        """Infeasible or unbounded: which of the two, and why."""
        with self._question("infeasible", "finding out what conflicts") as deadline:
            self.solution = best_plan(self.normal, deadline.left, self.seed)
            solution = self.solution[0]
            if solution.status == "unbounded":
                self.no_optimum = no_optimum.unbounded(self.normal, solution.ray)
            elif solution.status == "infeasible":
                self._tell_infeasible(solution, deadline)
            else:
                self.cut_off.append("whether any plan exists was not found out in time")

    def _tell_infeasible(self, solution: Solution, deadline: Deadline) -> None:
        self.no_optimum = no_optimum.infeasible(self.remains, solution, self.groups, deadline)
        if not self.no_optimum.groups_minimal:
            self.cut_off.append("perhaps fewer groups of rows conflict than those told")

    def _tell_whole(self) -> None:
        with self._question("plan", "solving it along whole vertices") as deadline:
            self.solution = best_plan(self.normal, deadline.left, self.seed)
        certified = self._certified()
        self.whole = Whole(
            sentences=whole.sentences(certified),
            breakers=whole.breakers(certified),
            path_seconds=self.solution[1],
            highs_seconds=math.nan,
            highs_ended=False,
            keepers=whole.keepers(certified),
        )
        with self._question("branch and bound", "solving it by branch and bound") as deadline:
            seconds, ended = whole.time_branch_and_bound(self.form, deadline)
            self.whole = replace(self.whole, highs_seconds=seconds, highs_ended=ended)
        if not ended:
            self.cut_off.append(f"branch and bound was stopped after {seconds:.1f} s")

    def _certified(self) -> Certified:
        proofs = [
            (str(block.structure), block.certificate.blocks[0])
            for block in self.finding.blocks
            if block.certificate is not None
        ]
        return Certified(self.normal, self.blocks, tuple(proofs))

    def _tell_fractional(self, relaxation: Relaxation, places: list[Place]) -> None:
        with self._question("violators", "looking for the smallest conflict") as deadline:
            names = [self.row_stems.names[k] for k in self.row_stems.label.tolist()]
            for violator in violators(self.normal, places, names, deadline):
                self.violators.append(replace(violator, block=self._block_of(violator)))
            if deadline.passed:
                self.cut_off.append("further conflicts were not looked for")
        self._find_culprits(relaxation)
        self._find_plan()
        if self.no_optimum is None:
            self._thin_out_rows()

    def _find_plan(self) -> None:
        if self.deadline.passed:
            self.cut_off.append("the best whole plan was not looked for")
            return
        with self._question("plan", "looking for the best whole plan") as deadline:
            self.solution = best_plan(self.normal, deadline.left, self.seed)
        status = self.solution[0].status
        if status == "interrupted":
            raise KeyboardInterrupt
        if status == "infeasible":
            with self._question("infeasible", "finding out what conflicts") as deadline:
                self._tell_infeasible(self.solution[0], deadline)
        elif status != "optimal":
            none = self.solution[0].x is None
            when = "in time" if status == "time_limit" else f"(its search ended with: {status})"
            told = f"no whole plan was found {when}"
            rough = f"the best whole plan was not found {when}; the gap is an upper one"
            self.cut_off.append(told if none else rough)

    def _find_culprits(self, relaxation: Relaxation) -> None:
        with self._question("culprits", "looking for groups to blame") as deadline:
            conflicts = [violator.groups for violator in self.violators]
            search = Search(self.remains, self.groups, conflicts, relaxation, deadline, self.tell)
            try:
                for found in search.run():
                    objective = culprits.objective_without(search, found.places, deadline)
                    self.culprits.append((found, self._culprit(found, objective)))
                    named = ", ".join(self.groups[k].name for k in found.places)
                    self.tell(f"without {named} it is whole")
            finally:
                self._mark_groups(search)
            if not search.exhausted:
                self.cut_off.append("further sets of groups to blame may exist")

    def _mark_groups(self, search: Search) -> None:
        blamed = {k for found, _ in self.culprits for k in found.places}
        self.groups = tuple(
            replace(group, to_blame=k in blamed, certified_alone=search.alone.get(k))
            for k, group in enumerate(self.groups)
        )

    def _culprit(self, found: CulpritSet, objective: float) -> Culprit:
        rows = np.concatenate([self.groups[k].rows for k in found.places])
        return Culprit(
            groups=tuple(self.groups[k].name for k in found.places),
            smallest=found.smallest,
            rows=tuple(self.form.row_names[i] for i in rows.tolist()),
            row_indices=rows,
            rows_minimal=rows.size == 1,
            structures=found.certified.structures,
            remains="; ".join(whole.sentences(found.certified, most=2)),
            objective_without=objective,
            price=math.nan,
        )

    def _thin_out_rows(self) -> None:
        with self._question("rows", "looking for the rows to blame") as deadline:
            for place, (found, culprit) in enumerate(self.culprits):
                if culprit.rows_minimal:
                    continue
                share = deadline.within(deadline.left / (len(self.culprits) - place))
                rows, minimal = culprits.smallest_rows(self.remains, culprit.row_indices, share)
                names = tuple(self.form.row_names[i] for i in rows.tolist())
                told = replace(culprit, rows=names, row_indices=rows, rows_minimal=minimal)
                self.culprits[place] = found, told
                if not minimal:
                    named = ", ".join(culprit.groups)
                    self.cut_off.append(f"perhaps fewer rows of {named} are to blame than told")

    def _witness(self) -> Witness | None:
        met = (block.witness for block in self.finding.blocks)
        return next((witness for witness in met if witness is not None), None)

    def _places(self) -> list[Place]:
        """Where known fractional vertices are fractional; without any, what is not certified."""
        pairs = zip(self.blocks, self.finding.blocks, strict=False)
        open_ones = [block for block, told in pairs if told.verdict is not Verdict.PROVEN]
        if self._witness() is None:
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

    def _block_of(self, violator: NamedViolator) -> int:
        row = int(violator.rows[0])
        held = (k for k, b in enumerate(self.blocks) if row in self.normal.rows[b.rows])
        return next(held, -1)

    def _gap(self) -> Gap | None:
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

    def finished(self, model: Any) -> Explanation:
        """What was found so far."""
        found = self._gap()
        told = [
            culprit
            if found is None
            else replace(culprit, price=culprits.price(found.worse_than(culprit.objective_without)))
            for _, culprit in self.culprits
        ]
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
            witness=self._witness(),
            groups=self.groups,
            grouped_by=self.row_stems.by,
            culprits=tuple(told),
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

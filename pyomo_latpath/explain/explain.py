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
from ..forms.linear_form import LinearForm
from ..highs import LpResult
from ..integrality.assess import assess
from ..solution import Solution
from . import culprits, no_optimum, whole
from .conflict import violators
from .culprits import Culprit, CulpritSet, Search
from .explanation import Explanation
from .found import Found
from .fractional import measure
from .gap import Declared, best_plan, declared_optimum
from .groups import groups_of
from .naming import listed
from .relaxation import Place, Relaxation
from .remains import Remains
from .remedies.find import find_remedies
from .whole import Whole

Progress = Callable[[str], None]

#: Vertices to look at, at most.
SAMPLES = 32
#: So many groups are named in a sentence.
NAMED = 3
#: Share of the time that is left, and seconds where the time is not limited, for each question.
BUDGETS: dict[str, tuple[float, float]] = {
    "verdict": (0.3, 3.0),
    "refutation": (0.15, 1.5),
    "sampling": (0.1, 1.0),
    "violators": (0.2, 5.0),
    "culprits": (0.6, 20.0),
    "plan": (0.4, 10.0),
    "infeasible": (0.8, 20.0),
    "branch and bound": (0.5, 20.0),  # HiGHS may take some seconds more than it is given
    "remedies": (0.9, 10.0),
    "rows": (0.9, 5.0),
}
#: Seconds for rows whose presence costs nothing at the model's own objective.
IN_PASSING = 0.5


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
    inquiry = _Inquiry(form, Deadline(time_limit), seed, progress or (lambda line: None))
    found = inquiry.found
    try:
        inquiry.run()
    except KeyboardInterrupt:
        found.interrupted = True
        found.cut_off.append(f"it was interrupted while {inquiry.doing}")
    return found.explanation(model)


class _Inquiry:
    """The questions, and the answers so far."""

    def __init__(self, form: LinearForm, deadline: Deadline, seed: int, tell: Progress) -> None:
        self.form, self.deadline, self.seed, self.tell = form, deadline, seed, tell
        self.doing = "reading the model"
        self.found = Found(form, seed)
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
            self.found.seconds[name] = self.found.seconds.get(name, 0.0) + spent

    def run(self) -> None:
        """Ask all questions in turn."""
        found = self.found
        if found.normal.conflict is not None:
            self._assess(0)
            self._without_optimum()
            return
        if self.form.semicontinuous.any():  # without their gaps such columns are no relaxation
            self._assess(0)
            return
        relaxation = Relaxation(found.normal)
        with self._question("relaxation", "solving the relaxation"):
            optimum = relaxation.optimum(self.deadline)
            places = relaxation.places(optimum.x) if optimum.status == "optimal" else []
        self._assess(SAMPLES, fractional=bool(places))
        if optimum.status in ("infeasible", "unbounded"):
            self._without_optimum()
        elif optimum.status == "optimal":
            self._measure(relaxation, optimum)
            if all(block.certificate is not None for block in found.finding.blocks):
                self._tell_whole()
            else:
                self._tell_fractional(relaxation, places or found.places())
            if found.no_optimum is None:
                self._find_remedies(relaxation)
                self._thin_out_rows()
        else:
            found.cut_off.append("the relaxation was not solved in time")

    def _assess(self, samples: int, *, fractional: bool = False) -> None:
        """The verdict: a fractional optimum nearly settles it, a whole one asks for more."""
        name = "refutation" if fractional else "verdict"
        with self._question(name, "assessing the model") as deadline:
            limit = None if deadline.left == math.inf else deadline.left
            count = 1 if fractional else samples
            self.found.finding = assess(self.form, samples=count, time_limit=limit, seed=self.seed)

    def _measure(self, relaxation: Relaxation, optimum: LpResult) -> None:
        """What the relaxation's optimum is like."""
        found = self.found
        found.groups = groups_of(found.normal, found.row_stems, found.odd, optimum.x)
        with self._question("sampling", "looking at vertices") as deadline:
            told = measure(
                relaxation,
                optimum,
                found.column_stems,
                samples=SAMPLES,
                seed=self.seed,
                deadline=deadline,
            )
        with self._question("relaxation", "solving the relaxation as declared") as deadline:
            rounded = Declared(relaxation.objective(optimum), told.count)
            declared = declared_optimum(found.normal, rounded, deadline)
        found.bounds = declared.bound, rounded.bound
        found.fractional = replace(told, declared=declared.fractional)

    def _find_remedies(self, relaxation: Relaxation) -> None:
        if self.deadline.passed:
            self.found.cut_off.append("remedies were not looked for")
            return
        with self._question("remedies", "looking for remedies") as deadline:
            for remedy in find_remedies(self.found.normal, relaxation.basis, deadline):
                self.found.remedies.append(remedy)
                self.tell(remedy.title)

    def _without_optimum(self) -> None:
        """Infeasible or unbounded: which of the two, and why."""
        found = self.found
        with self._question("infeasible", "finding out what conflicts") as deadline:
            found.solution = best_plan(found.normal, deadline.left, self.seed)
            solution = found.solution[0]
            if solution.status == "unbounded":
                found.no_optimum = no_optimum.unbounded(self.form, solution.ray, deadline)
            elif solution.status == "infeasible":
                self._tell_infeasible(solution, deadline)
            else:
                found.cut_off.append("whether any plan exists was not found out in time")

    def _tell_infeasible(self, solution: Solution, deadline: Deadline) -> None:
        found = self.found
        found.no_optimum = no_optimum.infeasible(self.remains, solution, found.groups, deadline)
        if not found.no_optimum.groups_minimal:
            found.cut_off.append("perhaps fewer groups of rows conflict than those told")

    def _tell_whole(self) -> None:
        found = self.found
        with self._question("plan", "solving it along whole vertices") as deadline:
            found.solution = best_plan(found.normal, deadline.left, self.seed)
        certified = found.certified
        told = Whole(
            sentences=whole.sentences(certified, found.row_stems),
            breakers=whole.breakers(certified),
            path_seconds=found.solution[1],
            highs_seconds=math.nan,
            highs_ended=False,
            keepers=whole.keepers(certified),
        )
        found.whole = told
        with self._question("branch and bound", "solving it by branch and bound") as deadline:
            seconds, ended = whole.time_branch_and_bound(self.form, deadline)
            found.whole = replace(told, highs_seconds=seconds, highs_ended=ended)
        if not ended:
            found.cut_off.append(f"branch and bound was stopped after {seconds:.1f} s")

    def _tell_fractional(self, relaxation: Relaxation, places: list[Place]) -> None:
        found = self.found
        with self._question("violators", "looking for the smallest conflict") as deadline:
            names = [found.row_stems.names[k] for k in found.row_stems.label.tolist()]
            for violator in violators(found.normal, places, names, deadline):
                found.violators.append(replace(violator, block=found.block_of(violator)))
            if deadline.passed:
                found.cut_off.append("further conflicts were not looked for")
        self._find_culprits(relaxation)
        self._find_plan()

    def _find_culprits(self, relaxation: Relaxation) -> None:
        found = self.found
        with self._question("culprits", "looking for groups to blame") as deadline:
            conflicts = [violator.groups for violator in found.violators]
            search = Search(self.remains, found.groups, conflicts, relaxation, deadline, self.tell)
            try:
                for those in search.run():
                    objective = culprits.objective_without(search, those.places, deadline)
                    culprit = self._culprit(those, objective)
                    found.culprits.append((those, culprit))
                    self.tell(f"without {listed(culprit.groups, NAMED)} it is whole")
            finally:
                self._mark_groups(search)
            if not search.exhausted:
                found.cut_off.append("further sets of groups to blame may exist")

    def _mark_groups(self, search: Search) -> None:
        blamed = {k for those, _ in self.found.culprits for k in those.places}
        self.found.groups = tuple(
            replace(group, to_blame=k in blamed, certified_alone=search.alone.get(k))
            for k, group in enumerate(self.found.groups)
        )

    def _culprit(self, those: CulpritSet, objective: float) -> Culprit:
        groups = [self.found.groups[k] for k in those.places]
        rows = np.concatenate([group.rows for group in groups])
        return Culprit(
            groups=tuple(group.name for group in groups),
            smallest=those.smallest,
            rows=tuple(self.form.row_names[i] for i in rows.tolist()),
            row_indices=rows,
            rows_minimal=rows.size == 1,
            structures=those.certified.structures,
            remains="; ".join(whole.sentences(those.certified, self.found.row_stems, most=2)),
            objective_without=objective,
            price=math.nan,
        )

    def _find_plan(self) -> None:
        found = self.found
        if self.deadline.passed:
            found.cut_off.append("the best whole plan was not looked for")
            return
        with self._question("plan", "looking for the best whole plan") as deadline:
            found.solution = best_plan(found.normal, deadline.left, self.seed)
        solution = found.solution[0]
        if solution.status == "interrupted":
            raise KeyboardInterrupt
        if solution.status == "infeasible":
            with self._question("infeasible", "finding out what conflicts") as deadline:
                self._tell_infeasible(solution, deadline)
        elif solution.status != "optimal":
            timed_out = solution.status == "time_limit"
            when = "in time" if timed_out else f"(its search ended with: {solution.status})"
            told = f"no whole plan was found {when}"
            rough = f"the best whole plan was not found {when}; the gap is an upper one"
            found.cut_off.append(told if solution.x is None else rough)

    def _thin_out_rows(self) -> None:
        """Fewest rows to leave out: asked in passing where the optimum is whole with them."""
        found = self.found
        if all(culprit.rows_minimal for _, culprit in found.culprits):
            return
        with self._question("rows", "looking for the rows to blame") as deadline:
            if found.fractional is not None and not found.fractional.count:
                deadline = deadline.within(IN_PASSING)
            for place, (those, culprit) in enumerate(found.culprits):
                if culprit.rows_minimal:
                    continue
                self.tell(f"looking for the fewest rows of {listed(culprit.groups, NAMED)}")
                share = deadline.within(deadline.left / (len(found.culprits) - place))
                rows, minimal = culprits.smallest_rows(self.remains, culprit.row_indices, share)
                names = tuple(self.form.row_names[i] for i in rows.tolist())
                told = replace(culprit, rows=names, row_indices=rows, rows_minimal=minimal)
                found.culprits[place] = those, told
                if not minimal:
                    blamed = listed(culprit.groups, NAMED)
                    found.cut_off.append(f"perhaps fewer rows of {blamed} are to blame than told")

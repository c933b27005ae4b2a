"""Routing: each block to the path solver or to branch and bound, and the answers merged.

| block                  | its relaxation            | route | how the answer is checked           |
|------------------------|---------------------------|-------|-------------------------------------|
| certified              | whole, by the certificate | path  | exact prices                        |
| not certified          | optimum is whole          | path  | exact prices, or within tolerance   |
| not certified          | another optimum is whole  | path  | exact prices, or within tolerance   |
| not certified          | optimum is fractional     | highs | violations recomputed               |
| semicontinuous columns | not looked at             | highs | violations recomputed               |

A whole optimum of the relaxation is an optimum of the model, whatever other vertices look
like; so every block without a certificate first gets its relaxation's optimum at the true
objective, and that vertex is also the first sample of its verdict.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from .answers import Merged, PartAnswer, merge, walk_report, without_plan
from .blame import Blame, blame, blame_conflict
from .branching import branch_part
from .deadline import Deadline
from .forms.blocks import Block
from .forms.linear_form import Floats, LinearForm
from .forms.normalise import NormalForm
from .forms.plan import TOLERANCE, feasible_start, largest_violation, rounding_room
from .grouping import Group
from .highs import LinearProgram, LpResult
from .highs_mip import MipSettings, check_settings
from .integrality.certify import KnownProofs, certify
from .integrality.finding import BlockFinding, Finding, Verdict
from .integrality.implied import mostly_implied
from .integrality.verdicts import conflict_finding, proven_finding, sampled_finding
from .paths.optimal_face import attainable, is_whole, whole_optimum
from .paths.path_solver import PathResult, walk_to_optimum
from .prepared import Prepared, Rest, prepare
from .proof import Proof, prove_optimal, prove_unbounded, shortfall, whole_costs
from .relaxation import Relaxation, relax
from .solution import RouteReport, Solution
from .why import telling, why

#: Share of the time spent so far that sampling for a verdict may add, and samples at most.
SAMPLING_SHARE, MOST_SAMPLES = 0.1, 32
#: The search of the optimal face may take so many times the relaxation's pivots and a few; once
#: as many where nothing says that whole plans reach the optimum's value.
FACE_SHARE, FACE_PIVOTS = 10, 50
#: Seconds that the longer search for a certificate of a block with a whole optimum may take,
#: where that is more than what the solve took so far.
LONG_SECONDS = 0.05
#: Relative error of plans that no exact check could be made of.
ROUNDING = 1e-9
#: Share of the time limit that the search for certificates may take.
CERTIFY_SHARE = 0.5


class _Clock:
    """Seconds by stage."""

    def __init__(self, compile_seconds: float) -> None:
        self.begun = time.perf_counter()
        self.seconds = {"compile": compile_seconds, "assess": 0.0, "solve": 0.0, "proof": 0.0}

    @property
    def total(self) -> float:
        return time.perf_counter() - self.begun

    def spend(self, stage: str, since: float) -> None:
        self.seconds[stage] += time.perf_counter() - since


@dataclass(frozen=True)
class _Request:
    """What the caller asked, checked."""

    form: LinearForm
    start: Floats | None
    samples: int | None
    seed: int
    settings: MipSettings
    fixed_plan_prices: bool
    deadline: Deadline
    clock: _Clock
    store: KnownProofs | None


def solve(
    form: LinearForm,
    *,
    start: ArrayLike | None = None,
    samples: int | None = None,
    time_limit: float | None = None,
    rel_gap: float | None = None,
    abs_gap: float | None = None,
    threads: int | None = None,
    seed: int = 0,
    highs_options: Mapping[str, Any] | None = None,
    fixed_plan_prices: bool = False,
    log: Callable[[str], None] | None = None,
    compile_seconds: float = 0.0,
    store: KnownProofs | None = None,
) -> Solution:
    """Solve a form by the route that its integrality allows.

    Parameters
    ----------
    form : LinearForm
    start : array_like, shape (n,), optional
        A whole feasible plan; the path solver walks from there.
    samples : int, optional
        Vertices sampled for the verdict on a block without a certificate; as many as fit in a
        tenth of the time spent so far, at most 32, when not given.
    time_limit : float, optional
        Seconds for all stages together.
    rel_gap, abs_gap : float, optional
        Gaps at which branch and bound may stop; HiGHS's own when not given.
    threads : int, optional
        Threads of branch and bound.
    seed : int
        Of the vertex sampler.
    highs_options : mapping, optional
        Further options of branch and bound, by HiGHS's names.
    fixed_plan_prices : bool
        On the HiGHS route, price the linear program that is left when the integer columns are
        held at the plan found.
    log : callable, optional
        Takes HiGHS's log, line by line.
    compile_seconds : float
        Spent before; reported.
    store : KnownProofs, optional
        Certificates kept from other solves, say a `batch.store.CertificateStore`.

    Returns
    -------
    Solution

    Raises
    ------
    ValueError
        For a start that is not a whole feasible plan (names the row or column), a negative
        time limit or number of samples, or an option that HiGHS refuses (`OptionError`).

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=[2, 3])
    >>> solution = solve(form)
    >>> solution.status, solution.x, solution.report.route, solution.report.proof
    ('optimal', array([1., 0.]), 'path', 'exact')
    """
    clock = _Clock(compile_seconds)
    if time_limit is not None and not time_limit >= 0:
        raise ValueError(f"time_limit is {time_limit}; it must be a number of seconds from 0 on")
    if samples is not None and samples < 0:
        raise ValueError(f"samples is {samples}; it must be 0 or more")
    settings = MipSettings(rel_gap, abs_gap, threads, highs_options, log)
    check_settings(settings)
    request = _Request(
        form=form,
        start=None if start is None else feasible_start(form, start),
        samples=samples,
        seed=seed,
        settings=settings,
        fixed_plan_prices=fixed_plan_prices,
        deadline=Deadline(time_limit),
        clock=clock,
        store=store,
    )
    since = time.perf_counter()
    early = request.deadline
    early = early if time_limit is None else early.within(CERTIFY_SHARE * time_limit)
    prepared = prepare(form, early, store)
    normal = prepared.normal
    clock.spend("assess", since)
    if normal.conflict is not None:
        return _rounded_away(request, normal)
    if form.semicontinuous.any():
        parts = [branch_part(normal, (), request.settings, request.deadline)]
        return _report(request, prepared, parts)
    parts = []
    for group in prepared.groups:
        told = tuple(prepared.findings[k] for k in group.members)
        parts.append(_by_path(request, group, told))
    shares = request.deadline.shared([rest.piece.columns.size for rest in prepared.rest])
    for rest, share in zip(prepared.rest, shares, strict=True):
        if any(part.status in ("infeasible", "interrupted") for part in parts):
            break
        parts.append(_by_relaxation(replace(request, deadline=share), rest))
    return _report(request, prepared, parts)


def _by_path(request: _Request, group: Group, findings: tuple[BlockFinding, ...]) -> PartAnswer:
    """Solve what is certified: a union of unimodular blocks is one itself."""
    since = time.perf_counter()
    part = group.piece
    costs = whole_costs(part)
    start = None
    # What is trivial may have any coefficients: walks over whole vertices are not for it.
    if request.start is not None and findings[0].structure != "trivial":
        start = request.start[part.columns] * part.col_den / part.col_num
    last = group.last_walk
    result = walk_to_optimum(part, costs, request.deadline, start, group.structure, last)
    request.clock.spend("solve", since)
    if result.status == "optimal":
        return _planned(part, findings, result.x, result.proof, result)
    since = time.perf_counter()
    short_by = shortfall(part, result.farkas) if result.status == "infeasible" else None
    exact = short_by is not None
    exact |= result.status == "unbounded" and prove_unbounded(part, costs, result.ray)
    request.clock.spend("proof", since)
    answer = without_plan(
        part,
        result.status if result.status in ("infeasible", "unbounded", "time_limit") else "error",
        "path",
        findings,
        exact=exact,
        ray=result.ray,
        farkas=result.farkas,
        path=result,
    )
    return replace(answer, short_by=short_by)


def _planned(
    part: NormalForm,
    findings: tuple[BlockFinding, ...],
    x: Floats,
    proof: Proof,
    path: PathResult | None,
    pivots: int = 0,
) -> PartAnswer:
    return PartAnswer(
        normal=part,
        status="optimal",
        route="path",
        findings=findings,
        x=x,
        bound=float(part.cost @ x),
        exact=proof.exact,
        row_dual=proof.row_dual,
        reduced_cost=proof.reduced_cost,
        prices="true",
        path=path,
        pivots=pivots,
    )


def _by_relaxation(request: _Request, rest: Rest) -> PartAnswer:
    """Solve what is not certified: by its relaxation's optimum where that is whole."""
    since = time.perf_counter()
    relaxation = relax(rest.piece, rest.last, request.deadline)
    request.clock.spend("solve", since)
    try:
        return _by_optimum(request, rest, relaxation)
    finally:
        rest.last.append(relaxation)


def _by_optimum(request: _Request, rest: Rest, relaxation: Relaxation) -> PartAnswer:
    part, lp, optimum = rest.piece, relaxation.program, relaxation.optimum
    if optimum.status == "infeasible":
        finding = sampled_finding(part, 0, (lp, optimum), request.seed, Deadline(0))
        exact = finding.verdict is Verdict.PROVEN
        farkas = optimum.farkas
        return without_plan(part, "infeasible", "path", (finding,), exact=exact, farkas=farkas)
    if optimum.status != "optimal":
        finding = sampled_finding(part, 0, None, request.seed, Deadline(0))
        return _branch(request, part, finding)
    whole = is_whole(optimum.x, part.integer)
    x = np.where(part.integer, np.rint(optimum.x), optimum.x) if whole else None
    finding = _finding(request, rest, lp, optimum)
    if x is None:
        since = time.perf_counter()
        reach = attainable(part, optimum.objective)
        if reach is not False:
            most = (FACE_SHARE if reach else 1) * (relaxation.pivots + FACE_PIVOTS)
            x = whole_optimum(part, lp, optimum, request.seed, most, request.deadline)
        request.clock.spend("solve", since)
    if x is not None:
        since = time.perf_counter()
        proof = prove_optimal(part, whole_costs(part), x, optimum.row_dual)
        holds = proof.exact or _as_good_as(part, x, optimum)
        request.clock.spend("proof", since)
        if holds:
            return _planned(part, (finding,), x, proof, None, optimum.pivots)
    return _branch(request, part, finding, optimum)


def _as_good_as(part: NormalForm, x: Floats, optimum: LpResult) -> bool:
    """Whether a whole plan holds, and costs no more than the relaxation, within rounding."""
    activity = part.matrix @ x
    slack = rounding_room(abs(part.matrix) @ np.abs(x), ROUNDING)
    inside = (activity >= part.row_lower - slack) & (activity <= part.row_upper + slack)
    dearer = float(part.cost @ x) - optimum.objective
    return bool(inside.all() and dearer <= ROUNDING * (1.0 + abs(part.cost) @ np.abs(x)))


def _finding(request: _Request, rest: Rest, lp: LinearProgram, optimum: LpResult) -> BlockFinding:
    """The verdict on a block whose optimum is known, by a few more vertices."""
    since = time.perf_counter()
    part, finding = rest.piece, None
    if is_whole(optimum.x, part.integer):
        block = Block(np.arange(part.rows.size), np.arange(part.columns.size), trivial=False)
        found = rest.searched[0] if rest.searched else None
        if not rest.searched:
            budget = request.deadline.within(max(request.clock.total, LONG_SECONDS))
            found = certify(part, [block], budget, "systems", request.store)[0]
            if found is not None or not request.deadline.passed:
                rest.searched.append(found)
        finding = None if found is None else proven_finding(part, block, found)
    if finding is None:
        count, budget = request.samples, request.deadline
        if count is None:
            count, budget = MOST_SAMPLES, budget.within(SAMPLING_SHARE * request.clock.total)
        finding = sampled_finding(part, count, (lp, optimum), request.seed, budget)
    request.clock.spend("assess", since)
    return finding


def _branch(
    request: _Request, part: NormalForm, finding: BlockFinding, optimum: LpResult | None = None
) -> PartAnswer:
    since = time.perf_counter()
    implied = mostly_implied(part, request.deadline)
    request.clock.spend("assess", since)
    since = time.perf_counter()
    answer = branch_part(
        part,
        (finding,),
        request.settings,
        request.deadline,
        relaxation=optimum,
        start=None if request.start is None else request.start[part.columns],
        fixed_plan_prices=request.fixed_plan_prices,
        implied=implied,
    )
    request.clock.spend("solve", since)
    return answer


def _rounded_away(request: _Request, normal: NormalForm) -> Solution:
    """The answer where rounding sides and bounds already shows that there is no plan."""
    conflict = normal.conflict
    assert conflict is not None
    form, nan = request.form, float("nan")
    nothing = Merged(
        "infeasible",
        None,
        nan,
        nan,
        np.full(form.shape[0], nan),
        np.full(form.shape[1], nan),
        None,
        None,
    )
    broken = conflict_finding(normal)
    finding = Finding((broken,) if broken else (), normal.snapped, request.seed)
    return _solution(
        nothing,
        RouteReport(
            route="path",
            why=f"no whole plan exists: {conflict.reason}",
            finding=finding,
            walk=None,
            proof="exact",
            seconds=request.clock.seconds,
            blame=blame_conflict(form, conflict).names,
        ),
    )


def _report(request: _Request, prepared: Prepared, parts: list[PartAnswer]) -> Solution:
    """Merge the parts and say which way they went."""
    normal = prepared.normal
    merged = merge(request.form, normal, parts)
    findings = tuple(finding for part in parts for finding in part.findings)
    routes = {part.route for part in telling(parts)}
    blamed = Blame((), True)
    culprit = next((part for part in parts if part.status == "infeasible"), None)
    if culprit is not None:
        since = time.perf_counter()
        spent = request.clock.total
        certified = culprit.path is not None
        blamed = blame(culprit.normal, culprit.farkas, certified, spent, request.deadline)
        request.clock.spend("proof", since)
    prices = {part.prices for part in parts}
    finding = Finding(findings, normal.snapped, request.seed)
    since = time.perf_counter()
    violation = 0.0 if merged.x is None else largest_violation(request.form, merged.x)
    request.clock.spend("proof", since)
    exact = all(part.exact for part in parts if part.status == merged.status)
    return _solution(
        merged,
        RouteReport(
            route=routes.pop() if len(routes) == 1 else "split" if routes else "path",
            why=why(parts, merged.status) + _warning(violation),
            finding=finding,
            walk=walk_report(parts),
            proof="exact" if exact else "tolerance",
            seconds=request.clock.seconds,
            largest_violation=violation,
            prices=prices.pop() if len(prices) == 1 else "none" if not parts else "in part",
            blame=blamed.names,
            blame_is_minimal=blamed.minimal,
            declared=int(normal.integer.sum()),
            needed=sum(part.told for part in parts),
            recognition=prepared.recognition,
        ),
    )


def _warning(violation: float) -> str:
    """What must be said of a plan that branch and bound's own tolerances let pass."""
    if violation <= TOLERANCE:
        return ""
    return f"; beware: the plan misses a row, bound or declaration by {violation:g}"


def _solution(merged: Merged, report: RouteReport) -> Solution:
    return Solution(
        status=merged.status,
        x=merged.x,
        objective=merged.objective,
        bound=merged.bound,
        row_dual=merged.row_dual,
        reduced_cost=merged.reduced_cost,
        ray=merged.ray,
        farkas=merged.farkas,
        report=report,
    )

"""What a solve returns: the answer, and the report of how it came about."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from .integrality.finding import Finding

Floats = NDArray[np.float64]

#: All values of `Solution.status`; 'limit' is a limit other than time that the user set: for
#: branch and bound (on nodes, say), or on the moves from the start.
STATUSES = ("optimal", "infeasible", "unbounded", "time_limit", "limit", "interrupted", "error")


@dataclass(frozen=True)
class WalkReport:
    """How far the path solver walked, and how far it could have had to.

    Attributes
    ----------
    steps : int
        Moves to a different vertex; exact where `exact_steps`, else an upper count.
    exact_steps : bool
        Whether `steps` is exact.
    pivots : int
        Basis changes, those that found the first vertex included.
    step_bound : int or None
        Proven bound on the steps; None where the polytope has no known box, and where the
        optimum of an uncertified relaxation was whole and no walk was needed.
    rounds, scaling_phases, faces_fixed : int
        Rounds of the face-fixing walk, phases of the scaling walks in them, and rows or
        bounds shown tight at every optimum.
    dimension, box, max_entry : int
        n, k and alpha of the bound.
    engine : str
        What served as the oracle: 'network', 'conetwork', 'tableau', 'highs', or 'several'.
    note : str
        Anything out of the ordinary, one sentence; empty as a rule.
    """

    steps: int
    exact_steps: bool
    pivots: int
    step_bound: int | None
    rounds: int
    scaling_phases: int
    faces_fixed: int
    dimension: int
    box: int
    max_entry: int
    engine: str
    note: str = ""


@dataclass(frozen=True, eq=False)
class Move:
    """One change on the way from the start to the best plan.

    Moves are told in the order of their gains. Each one may be made or left out, in any order:
    every set of them leads from the start to a feasible whole plan. `before` and `after` are
    those of the order told, where several moves change the same column.

    Attributes
    ----------
    columns : ndarray, shape (k,), int64
        What changes; ascending indices into the form.
    names : tuple of str
        Of these columns.
    before, after : ndarray, shape (k,), float64
        Their values.
    gain : float
        By how much the objective gets better, in the model's own sense.
    objective_after : float
    """

    columns: NDArray[np.int64]
    names: tuple[str, ...]
    before: Floats
    after: Floats
    gain: float
    objective_after: float

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        return {
            "columns": list(self.names),
            "before": self.before.tolist(),
            "after": self.after.tolist(),
            "gain": self.gain,
            "objective_after": self.objective_after,
        }


@dataclass(frozen=True)
class RouteReport:
    """Which way a model went, why, and what that cost.

    Attributes
    ----------
    route : str
        'path', 'highs' or 'split'.
    why : str
        One sentence.
    finding : Finding
    walk : WalkReport or None
        None where nothing went to the path solver.
    proof : str
        'exact' where optimality (or infeasibility, unboundedness) was checked in exact
        arithmetic, else 'tolerance'.
    seconds : dict of str to float
        Keys 'compile', 'assess', 'solve', 'proof'.
    largest_violation : float
        Largest amount by which a row, bound or declaration is missed by `x`; 0.0 where exact.
    prices : str
        'none', 'true' (shadow prices of the model) or 'fixed plan' (of the LP that is left
        when the integer columns are held at the plan found).
    blame : tuple of str
        Names of rows (and bounds, as 'bounds of NAME') that conflict, for infeasible models.
    blame_is_minimal : bool
        Whether leaving out any one of those makes the others satisfiable; False where the time
        ran out before that was shown.
    moves : tuple of Move
        The changes that lead from the start to `x`; empty without a start.
    further_moves : tuple of Move
        Those that would lead on to the best plan known, where `max_moves` left them out.
    repair : Move or None
        The change that made the start feasible, where that was asked for and needed.
    declared, needed : int
        Integer columns that are not fixed, and how many of these declarations branch and bound
        was given: none on the path route; not those that were found implied.
    recognition : str
        'found' where recognition looked at the matrix, 'stored' where a store had proofs of it,
        'remembered' where an earlier solve of the same matrix had left them.
    """

    route: str
    why: str
    finding: Finding
    walk: WalkReport | None
    proof: str
    seconds: dict[str, float]
    largest_violation: float = 0.0
    prices: str = "none"
    blame: tuple[str, ...] = ()
    blame_is_minimal: bool = True
    moves: tuple[Move, ...] = ()
    further_moves: tuple[Move, ...] = ()
    repair: Move | None = None
    declared: int = 0
    needed: int = 0
    recognition: str = "found"

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON; certificates are left to `finding.to_dict()`."""
        walk = None if self.walk is None else dict(vars(self.walk))
        return {
            "route": self.route,
            "why": self.why,
            "verdict": self.finding.verdict.value,
            "structures": list(self.finding.structures),
            "blocks": [
                {
                    "rows": int(block.rows.size),
                    "columns": int(block.columns.size),
                    "verdict": block.verdict.value,
                    "structure": block.structure,
                    "samples": block.samples,
                    "reason": block.reason,
                }
                for block in self.finding.blocks
            ],
            "snapped": self.finding.snapped,
            "walk": walk,
            "proof": self.proof,
            "seconds": dict(self.seconds),
            "largest_violation": self.largest_violation,
            "prices": self.prices,
            "blame": list(self.blame),
            "blame_is_minimal": self.blame_is_minimal,
            "moves": [move.to_dict() for move in self.moves],
            "further_moves": [move.to_dict() for move in self.further_moves],
            "repair": None if self.repair is None else self.repair.to_dict(),
            "declared": self.declared,
            "needed": self.needed,
            "recognition": self.recognition,
        }


@dataclass(frozen=True, eq=False)
class Solution:
    """The answer to a model.

    Attributes
    ----------
    status : str
        One of `STATUSES`.
    x : ndarray, shape (n,), float64, or None
        The best plan, or the one reached after `max_moves` moves from the start; None without
        one. Integer columns hold exact whole numbers on the path route.
    objective, bound : float
        Value of `x` and the best bound proven, in the model's own sense; NaN without one.
    row_dual : ndarray, shape (m,), float64
        d(objective)/d(side) at the best plan; NaN where a block has no prices.
    reduced_cost : ndarray, shape (n,), float64
        The same for columns.
    ray : ndarray, shape (n,), float64, or None
        For 'unbounded': a direction of endless improvement.
    farkas : ndarray, shape (m,), float64, or None
        For 'infeasible', where known: multipliers of the rows that prove it.
    report : RouteReport
    """

    status: str
    x: Floats | None
    objective: float
    bound: float
    row_dual: Floats
    reduced_cost: Floats
    ray: Floats | None
    farkas: Floats | None
    report: RouteReport = field(repr=False)

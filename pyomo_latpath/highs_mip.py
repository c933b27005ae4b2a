"""HiGHS as branch and bound."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import highspy
import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from .deadline import Deadline
from .highs import Floats, SilentHighs, ok, outcome, pass_model, set_option

Log = Callable[[str], None]


@dataclass(frozen=True, eq=False)
class MipResult:
    """Outcome of branch and bound.

    Attributes
    ----------
    status : str
        'optimal', 'infeasible', 'unbounded', 'time_limit', 'limit', 'interrupted' or 'error'.
    x : ndarray, shape (n,), float64, or None
        Best plan found.
    bound : float
        Best bound on the minimum; -inf without one.
    nodes : int
    """

    status: str
    x: Floats | None
    bound: float
    nodes: int


@dataclass(frozen=True)
class MipSettings:
    """What the user asks of branch and bound; None leaves HiGHS's own default.

    Attributes
    ----------
    rel_gap, abs_gap : float or None
    threads : int or None
    options : mapping of str to value
        Further HiGHS options, by HiGHS's names.
    log : callable or None
        Called with each line that HiGHS prints.
    """

    rel_gap: float | None = None
    abs_gap: float | None = None
    threads: int | None = None
    options: Mapping[str, Any] | None = None
    log: Log | None = None


def check_settings(settings: MipSettings) -> None:
    """Try all options on an empty instance.

    Raises
    ------
    OptionError
        Names the option that HiGHS does not take.
    """
    if settings != MipSettings(log=settings.log):
        _apply(SilentHighs(), settings)


def branch_and_bound(
    matrix: sp.csc_array,
    row_lower: Floats,
    row_upper: Floats,
    col_lower: Floats,
    col_upper: Floats,
    cost: Floats,
    kinds: NDArray[np.int32],
    settings: MipSettings,
    deadline: Deadline,
    start: Floats | None = None,
) -> MipResult:
    """Minimise over whole-number plans.

    Parameters
    ----------
    matrix, row_lower, row_upper, col_lower, col_upper, cost
        As in `LinearProgram`.
    kinds : ndarray, shape (n,), int32
        0 continuous, 1 integer, 2 semicontinuous, 3 semi-integer.
    settings : MipSettings
    deadline : Deadline
    start : ndarray, shape (n,), optional
        A plan to begin with.

    Returns
    -------
    MipResult
        Infeasible and unbounded are told apart by a run with a zero objective.
    """
    highs = SilentHighs()
    _apply(highs, settings)
    pass_model(highs, matrix, row_lower, row_upper, col_lower, col_upper, cost, kinds)
    if start is not None:
        index = np.arange(start.size, dtype=np.int32)
        ok(highs.setSolution(start.size, index, start), "take a start plan")
    status = _run_mip(highs, settings, deadline)
    if status in ("unbounded", "unsettled"):
        index = np.arange(cost.size, dtype=np.int32)
        ok(highs.changeColsCost(cost.size, index, np.zeros(cost.size)), "set costs")
        settled = _run_mip(highs, settings, deadline)
        settled = "unbounded" if settled in ("optimal", "limit") else settled
        x = np.array(highs.getSolution().col_value) if settled == "unbounded" else None
        return MipResult(settled, x, -math.inf, 0)
    info = highs.getInfo()
    feasible = info.primal_solution_status == highspy.SolutionStatus.kSolutionStatusFeasible
    x = np.array(highs.getSolution().col_value, dtype=np.float64) if feasible else None
    is_mip = bool(kinds.any())
    bound = info.mip_dual_bound if is_mip else info.objective_function_value
    bound = float(bound) if is_mip or status == "optimal" else -math.inf
    return MipResult(status, x, bound, max(0, int(info.mip_node_count)))


def _run_mip(highs: Any, settings: MipSettings, deadline: Deadline) -> str:
    asked = (settings.options or {}).get("time_limit", math.inf)
    limit = min(float(asked), deadline.left)
    set_option(highs, "time_limit", highs.getRunTime() + limit)
    highs.HandleKeyboardInterrupt = True  # `solve` then runs in a thread of its own
    # HiGHS keeps one set of threads for all instances and refuses another number of them.
    fixed = settings.threads is not None or "threads" in (settings.options or {})
    if fixed:
        highs.resetGlobalScheduler(True)
    highs.solve()
    if fixed:
        highs.resetGlobalScheduler(True)
    if highs.cancelled:
        return "interrupted"
    status = outcome(highs)
    return "limit" if status == "pivot_limit" else status


def _apply(highs: Any, settings: MipSettings) -> None:
    chosen: dict[str, Any] = {}
    if settings.rel_gap is not None:
        chosen["mip_rel_gap"] = float(settings.rel_gap)
    if settings.abs_gap is not None:
        chosen["mip_abs_gap"] = float(settings.abs_gap)
    if settings.threads is not None:
        chosen["threads"] = int(settings.threads)
    for name, value in (chosen | dict(settings.options or {})).items():
        set_option(highs, name, value)
    if settings.log is not None:
        highs.log_to(settings.log)

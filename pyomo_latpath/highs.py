"""HiGHS as a basis engine for linear programs.

This module and `highs_mip` are all that talks to HiGHS. Each option set is checked, each outcome
mapped once.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import highspy
import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from .deadline import Deadline

Floats = NDArray[np.float64]
Codes = NDArray[np.int8]

#: Our word for each of HiGHS's, by name: not every version knows all of them.
_OUTCOME = {
    "kOptimal": "optimal",
    "kModelEmpty": "optimal",
    "kInfeasible": "infeasible",
    "kUnbounded": "unbounded",
    "kUnboundedOrInfeasible": "unsettled",
    "kTimeLimit": "time_limit",
    "kIterationLimit": "pivot_limit",
    "kSolutionLimit": "limit",
    "kObjectiveBound": "limit",
    "kObjectiveTarget": "limit",
    "kInterrupt": "interrupted",
    "kHighsInterrupt": "interrupted",
    "kMemoryLimit": "error",
    "kUnknown": "error",
    "kNotset": "error",
    "kLoadError": "error",
    "kModelError": "error",
    "kPresolveError": "error",
    "kSolveError": "error",
    "kPostsolveError": "error",
}
#: HiGHS takes no coefficients of this size.
TOO_LARGE = 1e15
_CODE_OF = (
    highspy.HighsBasisStatus.kLower,
    highspy.HighsBasisStatus.kBasic,
    highspy.HighsBasisStatus.kUpper,
    highspy.HighsBasisStatus.kZero,
    highspy.HighsBasisStatus.kNonbasic,
)


class SilentHighs(highspy.Highs):  # type: ignore[misc]
    """A HiGHS instance that prints nothing of itself.

    Attributes
    ----------
    cancelled : bool
        Whether Ctrl-C ended the last `solve`. HiGHS's own status does not always tell.
    """

    cancelled = False
    _failure: Exception | None = None

    def enableCallbacks(self) -> None:
        set_option(self, "output_flag", False)
        super().enableCallbacks()

    def log_to(self, log: Callable[[str], None]) -> None:
        """Hand each line that HiGHS prints to `log`; an error there ends the run, and is raised."""

        def relay(event: Any) -> None:
            try:
                log(event.message.rstrip("\n"))
            except Exception as error:  # in HiGHS's thread: raised where `solve` was called
                self._failure = self._failure or error
                self.cancelSolve()

        set_option(self, "output_flag", True)
        set_option(self, "log_to_console", False)
        self.cbLogging += relay

    def joinSolve(self, solver_thread: Any = None, interrupt_limit: int = 1) -> Any:
        """Wait for the end; Ctrl-C asks HiGHS to stop, a second one waits no longer."""
        self.cancelled = False
        try:
            status = self._joined()
        except KeyboardInterrupt:
            self.cancelled = True
            self.cancelSolve()
            status = self._joined()
        if self._failure is not None:
            raise self._failure
        return status

    def _joined(self) -> Any:
        ended, status = False, None
        while not ended:
            ended, status = self.wait(0.1)
        return status


class OptionError(ValueError):
    """HiGHS does not take an option or its value."""


@dataclass(frozen=True, eq=False)
class Basis:
    """Which columns and rows are basic, and where the others sit.

    Attributes
    ----------
    col_status, row_status : ndarray, shape (n,), (m,), int8
        0 at the lower limit, 1 basic, 2 at the upper limit, 3 free and nonbasic at zero,
        4 nonbasic.
    """

    col_status: Codes
    row_status: Codes


@dataclass(frozen=True, eq=False)
class LpResult:
    """Outcome of one linear program; its arrays are meaningful for status 'optimal'.

    Attributes
    ----------
    status : str
        'optimal', 'infeasible', 'unbounded', 'time_limit', 'pivot_limit', 'interrupted' or
        'error'.
    x, reduced_cost : ndarray, shape (n,), float64
    row_dual : ndarray, shape (m,), float64
    objective : float
    pivots : int
        Simplex iterations of this call.
    farkas : ndarray, shape (m,), float64, or None
        For 'infeasible': multipliers y of the rows with y A x below what the sides ask, over
        all x within bounds (up to HiGHS's tolerance, and up to sign).
    ray : ndarray, shape (n,), float64, or None
        For 'unbounded': a direction.
    """

    status: str
    x: Floats
    row_dual: Floats
    reduced_cost: Floats
    objective: float
    pivots: int
    farkas: Floats | None = None
    ray: Floats | None = None


class LinearProgram:
    """A linear program held by HiGHS, warm-started from one solve to the next.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), float64
    row_lower, row_upper, col_lower, col_upper, cost : ndarray, float64
        The objective is minimised.

    Examples
    --------
    >>> lp = LinearProgram(sp.csc_array([[1.0, 1.0]]), np.array([1.0]), np.array([1.0]),
    ...                    np.zeros(2), np.ones(2), np.array([2.0, 3.0]))
    >>> result = lp.solve()
    >>> result.status, result.x
    ('optimal', array([1., 0.]))
    """

    def __init__(
        self,
        matrix: sp.csc_array,
        row_lower: Floats,
        row_upper: Floats,
        col_lower: Floats,
        col_upper: Floats,
        cost: Floats,
    ) -> None:
        self.m, self.n = matrix.shape
        self._highs = SilentHighs()
        for name, value in (("presolve", "off"), ("solver", "simplex")):
            set_option(self._highs, name, value)
        kinds = np.zeros(self.n, np.int32)
        pass_model(self._highs, matrix, row_lower, row_upper, col_lower, col_upper, cost, kinds)
        self._all = np.arange(self.n, dtype=np.int32)
        self._all_rows = np.arange(self.m, dtype=np.int32)
        self._cost = cost

    def set_cost(self, cost: Floats) -> None:
        """Minimise another objective from now on."""
        self._cost = cost
        ok(self._highs.changeColsCost(self.n, self._all, cost), "set costs")

    def set_col_bounds(self, lower: Floats, upper: Floats) -> None:
        """Put other bounds on all columns."""
        ok(self._highs.changeColsBounds(self.n, self._all, lower, upper), "set column bounds")

    def set_row_bounds(self, lower: Floats, upper: Floats) -> None:
        """Put other sides on all rows."""
        if self.m:
            status = self._highs.changeRowsBounds(self.m, self._all_rows, lower, upper)
            ok(status, "set row sides")

    def basis(self) -> Basis:
        """Return the current basis."""
        held = self._highs.getBasis()
        return Basis(_codes(held.col_status), _codes(held.row_status))

    def set_basis(self, basis: Basis) -> None:
        """Start the next solve from this basis."""
        held = highspy.HighsBasis()
        held.col_status = [_CODE_OF[code] for code in basis.col_status.tolist()]
        held.row_status = [_CODE_OF[code] for code in basis.row_status.tolist()]
        held.valid = True
        ok(self._highs.setBasis(held), "set a basis")

    def standing(self) -> Any:
        """Return the current basis as HiGHS holds it, for `stand_at`."""
        return self._highs.getBasis()

    def stand_at(self, basis: Any) -> None:
        """Start the next solve from what `standing` returned."""
        ok(self._highs.setBasis(basis), "set a basis")

    def forget_basis(self) -> None:
        """Start the next solve from nothing."""
        ok(self._highs.clearSolver(), "start afresh")

    def basic_variables(self) -> NDArray[np.int32]:
        """Return what is basic in each row: a column j as j, row i's activity as -1 - i."""
        status, basic = self._highs.getBasicVariables()
        ok(status, "tell its basis")
        return np.asarray(basic, dtype=np.int32)

    def solve_transposed(self, right: Floats) -> Floats:
        """Solve y B = right for the current basis B, in floating point."""
        status, y = self._highs.getBasisTransposeSolve(right)
        ok(status, "solve with its basis")
        return np.asarray(y, dtype=np.float64)

    def solve(
        self,
        *,
        method: str = "dual",
        deadline: Deadline | None = None,
        max_pivots: int | None = None,
    ) -> LpResult:
        """Optimise from the current basis.

        Parameters
        ----------
        method : 'dual' or 'primal'
            Which simplex method.
        deadline : Deadline, optional
        max_pivots : int, optional

        Returns
        -------
        LpResult
            Never 'unbounded' where infeasible: a zero objective settles which of the two.
        """
        deadline = deadline or Deadline(None)
        set_option(self._highs, "simplex_strategy", 1 if method == "dual" else 4)
        limit = 2**31 - 1 if max_pivots is None else max_pivots
        set_option(self._highs, "simplex_iteration_limit", limit)
        status = self._run(deadline)
        if status == "error":  # seldom, on unbounded programs; a fresh start settles it
            self.forget_basis()
            set_option(self._highs, "presolve", "on")
            status = self._run(deadline)
            set_option(self._highs, "presolve", "off")
        pivots = self._highs.getInfo().simplex_iteration_count
        farkas = ray = None
        if status == "unsettled":
            self._forget_cost_once(deadline)
            status = "infeasible" if outcome(self._highs) == "infeasible" else "unbounded"
        if status == "infeasible":
            _, found, vector = self._highs.getDualRay()
            farkas = np.array(vector) if found else None
        elif status == "unbounded":
            _, found, vector = self._highs.getPrimalRay()
            ray = np.array(vector) if found else None
        answer = self._highs.getSolution()
        return LpResult(
            status=status,
            x=np.array(answer.col_value, dtype=np.float64),
            row_dual=np.array(answer.row_dual, dtype=np.float64),
            reduced_cost=np.array(answer.col_dual, dtype=np.float64),
            objective=float(self._highs.getInfo().objective_function_value),
            pivots=max(0, int(pivots)),
            farkas=farkas,
            ray=ray,
        )

    def _forget_cost_once(self, deadline: Deadline) -> None:
        """Run once with a zero objective, which tells infeasible from unbounded."""
        kept = self._cost
        self.set_cost(np.zeros(self.n))
        self._run(deadline)
        ok(self._highs.changeColsCost(self.n, self._all, kept), "set costs")
        self._cost = kept

    def _run(self, deadline: Deadline) -> str:
        # HiGHS adds up the time of all runs of an instance and holds the sum against the limit.
        set_option(self._highs, "time_limit", self._highs.getRunTime() + deadline.left)
        self._highs.run()
        return outcome(self._highs)


def conflicting_set(
    matrix: sp.csc_array,
    row_lower: Floats,
    row_upper: Floats,
    col_lower: Floats,
    col_upper: Floats,
    deadline: Deadline,
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Find rows and column bounds that conflict, none of them needlessly (an IIS).

    Returns
    -------
    rows, columns : ndarray, int64
        Empty where HiGHS finds none in time, or where the relaxation is feasible.
    """
    n = col_lower.size
    highs = SilentHighs()
    for name, value in (("presolve", "off"), ("iis_strategy", 6)):
        set_option(highs, name, value)
    if deadline.left < math.inf:
        set_option(highs, "iis_time_limit", deadline.left)
        set_option(highs, "time_limit", deadline.left)
    kinds = np.zeros(n, np.int32)
    pass_model(highs, matrix, row_lower, row_upper, col_lower, col_upper, np.zeros(n), kinds)
    highs.run()
    if outcome(highs) != "infeasible":
        return np.empty(0, np.int64), np.empty(0, np.int64)
    status, found = highs.getIis()
    if status == highspy.HighsStatus.kError or not found.valid_:
        return np.empty(0, np.int64), np.empty(0, np.int64)
    columns = np.array(found.col_index_, dtype=np.int64)
    free = highspy.IisBoundStatus.kIisBoundStatusFree
    bounded = np.array([status != int(free) for status in found.col_bound_], dtype=np.bool_)
    return np.array(found.row_index_, dtype=np.int64), columns[bounded]


def set_option(highs: Any, name: str, value: Any) -> None:
    """Set one HiGHS option.

    Raises
    ------
    OptionError
        If HiGHS does not know the option or refuses the value.
    """
    try:
        status = highs.setOptionValue(name, value)
    except TypeError as error:
        raise OptionError(f"HiGHS option {name!r} does not take {value!r}") from error
    if status == highspy.HighsStatus.kOk:
        return
    known, _ = highs.getOptionType(name)
    if known != highspy.HighsStatus.kOk:
        raise OptionError(f"HiGHS has no option {name!r}; see HiGHS's list of options")
    raise OptionError(f"HiGHS option {name!r} does not take {value!r}")


def outcome(highs: Any) -> str:
    return _OUTCOME[highs.getModelStatus().name]


def ok(status: Any, what: str) -> None:
    if status == highspy.HighsStatus.kError:
        raise RuntimeError(f"HiGHS refused to {what}")


def _codes(statuses: Any) -> Codes:
    return np.fromiter(map(int, statuses), dtype=np.int8, count=len(statuses))


def pass_model(
    highs: Any,
    matrix: sp.csc_array,
    row_lower: Floats,
    row_upper: Floats,
    col_lower: Floats,
    col_upper: Floats,
    cost: Floats,
    kinds: NDArray[np.int32],
) -> None:
    m, n = matrix.shape
    largest = float(np.abs(matrix.data).max(initial=0.0))
    if largest >= TOO_LARGE:
        raise ValueError(
            f"a row has the coefficient {largest:g}, and HiGHS takes none from {TOO_LARGE:g} on: "
            "scale the row"
        )
    status = highs.passModel(
        n,
        m,
        matrix.nnz,
        int(highspy.MatrixFormat.kColwise),
        int(highspy.ObjSense.kMinimize),
        0.0,
        cost,
        col_lower,
        col_upper,
        row_lower,
        row_upper,
        matrix.indptr.astype(np.int32),
        matrix.indices.astype(np.int32),
        matrix.data,
        kinds,
    )
    ok(status, "take the model")

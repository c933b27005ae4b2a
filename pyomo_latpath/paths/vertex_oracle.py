"""Oracles: given whole costs, walk from the current vertex to a best one of the current face.

Two engines serve. `Tableau` keeps the whole tableau of a small totally unimodular block in
64-bit integers and counts steps exactly. `HighsBasis` lets HiGHS's primal simplex walk; HiGHS
does not show its vertices, so there the pivots are an upper count of the steps.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..highs import Basis, LinearProgram
from ..proof import exact_product

Floats = NDArray[np.float64]
Whole = NDArray[Any]
Flags = NDArray[np.bool_]

#: A tableau with more entries than this is left to HiGHS.
LARGEST_TABLEAU = 250_000
#: Costs up to here keep all sums in a tableau within 64 bits: |c| * (m + n) < 2**63.
LARGEST_TABLEAU_COST = 2**40
#: Whole costs up to here are exact for HiGHS, whose reduced costs are good to 1e-7; larger
#: ones reach it scaled down, and what that loses is for the exact check to find.
LARGEST_HIGHS_COST = 2**24
#: Pivots that a walk from the last basis may take beyond those of the first one.
FEW_PIVOTS = 100


@dataclass(frozen=True, eq=False)
class Vertex:
    """Where an oracle stands.

    Attributes
    ----------
    status : str
        'optimal' for the costs asked, or why not: 'unbounded', 'infeasible', 'time_limit',
        'pivot_limit', 'error'.
    x : ndarray, shape (n,), float64
        Exact whole numbers from a tableau.
    row_dual, reduced_cost : ndarray, shape (m,), (n,), float64
        Basic optimal prices for the costs asked.
    ray, farkas : ndarray or None
        Directions that show 'unbounded' or 'infeasible'.
    """

    status: str
    x: Floats
    row_dual: Floats
    reduced_cost: Floats
    ray: Floats | None = None
    farkas: Floats | None = None


class VertexOracle(Protocol):
    """What the walks ask of an engine."""

    engine: str
    exact_steps: bool

    @property
    def steps(self) -> int:
        """Moves to another vertex so far; an upper count unless `exact_steps`."""

    @property
    def pivots(self) -> int:
        """Basis changes so far."""

    def optimise(self, cost: Whole, deadline: Deadline) -> Vertex:
        """Walk to a vertex of the current face that minimises `cost`."""

    def hold(self, rows: Flags, columns: Flags) -> None:
        """Shrink the face: rows and columns flagged stay where they are now."""

    def release(self) -> None:
        """Go back to the whole polytope, at the same vertex."""

    def basis_prices(self, costs: Whole, guess: Whole) -> Whole:
        """Whole prices of the current basis for whole costs."""


class HighsBasis:
    """HiGHS's simplex on a block, warm-started from basis to basis.

    Parameters
    ----------
    normal : NormalForm
        The block.
    start : Basis, optional
        Of a vertex to walk from; without one the first call goes by the dual simplex straight
        to an optimal vertex of its costs, since a primal walk from afar is slow.
    """

    engine = "highs"
    exact_steps = False

    def __init__(self, normal: NormalForm, start: Basis | None = None) -> None:
        self.lp = LinearProgram(
            normal.matrix,
            normal.row_lower,
            normal.row_upper,
            normal.col_lower,
            normal.col_upper,
            np.zeros(normal.matrix.shape[1]),
        )
        self._normal = normal
        self._limits = _limits(normal)
        self._walking = start is not None
        if start is not None:
            self.lp.set_basis(start)
        self._from_nothing = 0
        self._again: int | None = None
        self._was_lost = self._held = False
        self.steps = 0
        self.pivots = 0
        self._x = np.zeros(normal.matrix.shape[1])

    def resume(self, normal: NormalForm, same_limits: bool) -> None:
        """Begin another walk from the last basis: for other costs, or for other limits.

        Should it take more pivots than the first vertex took from nothing, it was no good idea:
        then this walk and those to come begin with nothing, too.

        Parameters
        ----------
        normal : NormalForm
            A block with the same matrix.
        same_limits : bool
            Whether it differs in costs only.
        """
        if not same_limits or self._held:
            self._set_limits(_limits(normal))
        self._normal, self._held = normal, False
        self.steps = self.pivots = 0
        if self._was_lost:
            self.lp.forget_basis()
        else:
            self._again = self._from_nothing + FEW_PIVOTS
        self._walking = same_limits and not self._was_lost

    def optimise(self, cost: Whole, deadline: Deadline) -> Vertex:
        """Walk by the primal simplex; the very first vertex comes from the dual simplex."""
        scale = max(1.0, float(np.abs(cost).max(initial=0)) / LARGEST_HIGHS_COST)
        self.lp.set_cost((cost / scale).astype(np.float64))
        # A primal walk that takes this long is lost among degenerate pivots.
        most = 20 * (self.lp.m + self.lp.n) + 1000 if self._walking else None
        method = "primal" if self._walking else "dual"
        result = self.lp.solve(method=method, deadline=deadline, max_pivots=self._again or most)
        self.pivots += result.pivots
        if self._again is not None and result.status == "pivot_limit":
            self._was_lost, self._walking = True, False
            self.lp.forget_basis()
            result = self.lp.solve(method="dual", deadline=deadline)
            self.pivots += result.pivots
        self.steps += result.pivots if self._walking else 0
        self._from_nothing = self._from_nothing or result.pivots
        self._again, self._walking = None, True
        whole = np.rint(result.x)
        x = np.where(np.abs(result.x - whole) <= 1e-6, whole, result.x)
        self._x = x
        return Vertex(
            result.status,
            x,
            result.row_dual * scale,
            result.reduced_cost * scale,
            result.ray,
            result.farkas,
        )

    def hold(self, rows: Flags, columns: Flags) -> None:
        """Fix rows at their activity and columns at their value."""
        activity = np.rint(self._normal.matrix @ self._x)
        row_low, row_up, col_low, col_up = self._limits
        self._held = True
        self._set_limits(
            [
                np.where(rows, activity, row_low),
                np.where(rows, activity, row_up),
                np.where(columns, self._x, col_low),
                np.where(columns, self._x, col_up),
            ]
        )

    def release(self) -> None:
        """Give rows and columns their limits back; what is nonbasic rests at one of them."""
        held = self.lp.basis()
        normal = self._normal
        self._set_limits(_limits(normal))
        self._held = False
        activity = np.rint(normal.matrix @ self._x)
        rows = resting(held.row_status, activity, normal.row_lower, normal.row_upper)
        columns = resting(held.col_status, self._x, normal.col_lower, normal.col_upper)
        self.lp.set_basis(Basis(columns, rows))

    def _set_limits(self, limits: list[Floats]) -> None:
        self._limits = limits
        self.lp.set_row_bounds(*limits[:2])
        self.lp.set_col_bounds(*limits[2:])

    def basis_prices(self, costs: Whole, guess: Whole) -> Whole:
        """Sharpen whole prices until they fit the basis exactly, by iterative refinement.

        Prices y of a basis B solve y B = c_B; with det B = +-1 and whole costs they are whole,
        so a residual taken in whole numbers and solved in floating point closes in on them.
        """
        basic = self.lp.basic_variables()
        prices = guess.astype(object)
        structural = basic >= 0
        columns = self._normal.matrix[:, basic[structural]].T.tocsr()
        rows = -1 - basic[~structural]
        wanted = costs.astype(object)[basic[structural]]
        for _ in range(12):
            residual = np.zeros(self.lp.m, dtype=object)
            residual[structural] = wanted - exact_product(columns, prices)
            residual[~structural] = -prices[rows]
            if not residual.any():
                break
            size = max(abs(value) for value in residual.tolist())
            shift = max(0, size.bit_length() - 900)
            step = self.lp.solve_transposed((residual // (1 << shift)).astype(np.float64))
            if not np.isfinite(step).all():
                break
            prices = prices + np.array([round(value) << shift for value in step.tolist()], object)
        return prices


def resting(
    status: NDArray[np.int8], value: Floats, lower: Floats, upper: Floats
) -> NDArray[np.int8]:
    """Basis codes in the whole polytope for what was nonbasic on a face of it."""
    where = np.where(value == lower, 0, np.where(value == upper, 2, 3))
    return np.where(status == 1, 1, where).astype(np.int8)


def _limits(normal: NormalForm) -> list[Floats]:
    return [normal.row_lower, normal.row_upper, normal.col_lower, normal.col_upper]


class Tableau:
    """The whole tableau of a small totally unimodular block, in 64-bit integers.

    Columns 0..n-1 are the block's columns, n..n+m-1 the activities of its rows, tied by
    A x - s = 0. Every tableau B^-1 [A, -I] of a totally unimodular system has entries in
    {0, 1, -1} (Schrijver 1986, section 19.1), so nothing is ever rounded. Entering by the
    largest reduced cost; by smallest index after a degenerate pivot until the walk moves again
    (Bland 1977), which rules out cycling.

    Parameters
    ----------
    normal : NormalForm
        A certified block with whole sides and bounds.
    start : Basis
        Of a vertex.
    x : ndarray, shape (n,), float64
        That vertex.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> normal = normalise(LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1,
    ...                                           col_lower=0, col_upper=1, cost=0))
    >>> start = Basis(np.array([1, 0], np.int8), np.array([0], np.int8))
    >>> tableau = Tableau(normal, start, np.array([1.0, 0.0]))
    >>> tableau.optimise(np.array([5, 3]), Deadline(None)).x, tableau.steps
    (array([0., 1.]), 1)
    """

    engine = "tableau"
    exact_steps = True

    def __init__(self, normal: NormalForm, start: Basis, x: Floats) -> None:
        m, n = normal.matrix.shape
        dense = normal.matrix.toarray()
        system = np.hstack([dense, -np.eye(m)])
        self._n = n
        self._whole_box = (
            np.concatenate([normal.col_lower, normal.row_lower]),
            np.concatenate([normal.col_upper, normal.row_upper]),
        )
        self.low, self.high = self._whole_box
        self.basic = np.flatnonzero(np.concatenate([start.col_status, start.row_status]) == 1)
        solved = np.linalg.solve(system[:, self.basic], system) if m else system
        self.table = np.rint(solved).astype(np.int64)
        if m and not np.array_equal(system[:, self.basic] @ self.table, system):
            raise ValueError("the block's tableau is not whole; it is not unimodular")
        self.value = np.concatenate([np.rint(x), np.rint(dense @ x)])
        self.steps = 0
        self.pivots = 0

    @staticmethod
    def fits(normal: NormalForm) -> bool:
        """Whether the block is small enough."""
        m, n = normal.matrix.shape
        return m * (m + n) <= LARGEST_TABLEAU and bool(normal.certifiable)

    def optimise(self, cost: Whole, deadline: Deadline) -> Vertex:
        """Walk by the primal simplex, step by counted step."""
        small = np.abs(cost).max(initial=0) <= LARGEST_TABLEAU_COST
        costs = np.zeros(self.table.shape[1], np.int64 if small else object)
        costs[: self._n] = cost
        bland = False
        status = "optimal"
        while True:
            reduced = costs - costs[self.basic] @ self.table
            entering, up = self._entering(reduced, bland)
            if entering < 0:
                break
            if deadline.passed:
                status = "time_limit"
                break
            length = self._pivot(entering, up)
            if length is None:
                status = "unbounded"
                break
            self.pivots += 1
            self.steps += length > 0
            bland = length == 0
        ray = self._direction(entering, up)[: self._n] if status == "unbounded" else None
        return Vertex(
            status,
            self.value[: self._n].copy(),
            reduced[self._n :].astype(np.float64),
            reduced[: self._n].astype(np.float64),
            ray,
        )

    def hold(self, rows: Flags, columns: Flags) -> None:
        """Fix rows at their activity and columns at their value."""
        held = np.concatenate([columns, rows])
        self.low = np.where(held, self.value, self.low)
        self.high = np.where(held, self.value, self.high)

    def release(self) -> None:
        """Give rows and columns their limits back."""
        self.low, self.high = self._whole_box

    def reduced_costs(self, cost: Whole) -> Whole:
        """Reduced costs of all columns and row activities for any whole costs, exact."""
        costs = np.zeros(self.table.shape[1], dtype=object)
        costs[: self._n] = cost
        return costs - costs[self.basic] @ self.table.astype(object)

    def basis_prices(self, costs: Whole, guess: Whole) -> Whole:
        """Exact prices of the rows for whole costs; the guess is not needed."""
        del guess
        return self.reduced_costs(costs)[self._n :]

    def _entering(self, reduced: Whole, bland: bool) -> tuple[int, bool]:
        """Column to move and whether up; -1 at an optimum."""
        may_rise = (reduced < 0) & (self.value < self.high)
        may_fall = (reduced > 0) & (self.value > self.low)
        may = may_rise | may_fall
        may[self.basic] = False
        if not may.any():
            return -1, False
        chosen = int(np.argmax(may) if bland else np.argmax(np.where(may, np.abs(reduced), -1)))
        return chosen, bool(may_rise[chosen])

    def _direction(self, entering: int, up: bool) -> Floats:
        """How all values change per unit of the entering one."""
        direction = np.zeros(self.value.size)
        sign = 1.0 if up else -1.0
        direction[self.basic] = -sign * self.table[:, entering]
        direction[entering] = sign
        return direction

    def _pivot(self, entering: int, up: bool) -> float | None:
        """Move along an edge; return its length, None where it never ends."""
        direction = self._direction(entering, up)
        moving = np.flatnonzero(direction)
        rises = direction[moving] > 0
        room = np.where(
            rises, self.high[moving] - self.value[moving], self.value[moving] - self.low[moving]
        )
        length = float(room.min())
        if length == np.inf:
            return None
        tied = moving[room == length]
        self.value = self.value + length * direction
        if entering in tied:
            return length  # it went from one of its bounds to the other; the basis stays
        leaving = int(tied[0])
        row = int(np.flatnonzero(self.basic == leaving)[0])
        pivot_row = self.table[row] * self.table[row, entering]
        self.table -= np.outer(self.table[:, entering], pivot_row)
        self.table[row] = pivot_row
        self.basic[row] = entering
        return length

"""A network matrix with sides and bounds, solved as a minimum-cost flow.

Every row of a network matrix is an arc of a directed tree, every column a further arc whose
entries are the tree path from its tail to its head (Tutte 1965; Schrijver 1986, section 19.3).
So A x = s says that x on the columns' arcs, and s on the rows' arcs turned round, is a
circulation: each unit that runs along a column's arc comes back over the tree. Bounds on x and
sides on s limit the flows, and the problem

    minimise c x   subject to   row_lower <= A x <= row_upper,   col_lower <= x <= col_upper

is a minimum-cost circulation. With potentials p, the price of row i with tree arc (u, v) is
y_i = p_v - p_u, which is at once the reduced cost of its arc; then c - y A is that of the
columns' arcs. Signs are those of a minimisation: y_i >= 0 where a row is held up at its lower
side, y_i <= 0 at its upper side.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .network_problem import NO_LIMIT, Cut, Flags, FlowProblem, FlowResult, FlowStart, Whole

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class TreeFlow:
    """A flow problem behind a network matrix, and the way back.

    Attributes
    ----------
    problem : FlowProblem
        Arcs 0..n-1 carry the columns, arcs n..n+m-1 the row activities.
    columns : int
        The number n.
    """

    problem: FlowProblem
    columns: int

    def x(self, result: FlowResult) -> Whole:
        """Values of the columns, shape (n,)."""
        return result.flow[: self.columns]

    def prices(self, result: FlowResult) -> tuple[Whole, Whole]:
        """Row duals y and reduced costs c - y A, shapes (m,) and (n,)."""
        reduced = self.problem.reduced_cost(result.potential)
        return reduced[self.columns :], reduced[: self.columns]

    def basic(self, result: FlowResult) -> tuple[Flags, Flags]:
        """Which rows and which columns are basic, shapes (m,) and (n,)."""
        return result.tree[self.columns :], result.tree[: self.columns]

    def ray(self, result: FlowResult) -> NDArray[np.int8] | None:
        """The direction of an unbounded problem, shape (n,)."""
        return None if result.ray is None else result.ray[: self.columns]

    def farkas(self, cut: Cut) -> Whole:
        """Multipliers y of the rows that a cut violates, 1, -1 or 0, shape (m,).

        For every x within its bounds y A x is above what the sides of the rows let y s be.
        """
        inside = cut.nodes.astype(np.int64) * (1 if cut.outward else -1)
        rows = slice(self.columns, None)
        return inside[self.problem.tail[rows]] - inside[self.problem.head[rows]]

    def start(self, x: Whole, activity: Whole, basic: Flags | None = None) -> FlowStart:
        """Start from values of columns and rows; `basic` flags both in this order."""
        start = FlowStart.at(self.problem, np.concatenate([x, activity]))
        return start if basic is None else FlowStart(start.flow, basic, start.roots)


def network_from_tree(
    tree: Whole,
    arcs: Whole,
    *,
    row_lower: Floats,
    row_upper: Floats,
    col_lower: Floats,
    col_upper: Floats,
    cost: Whole,
) -> TreeFlow:
    """Turn a network matrix with sides and bounds into a flow problem.

    Parameters
    ----------
    tree : ndarray, shape (m, 2), int64
        Tail and head of each row's arc; together a tree on the nodes 0..m.
    arcs : ndarray, shape (n, 2), int64
        Tail and head of each column's arc.
    row_lower, row_upper : ndarray, shape (m,), float64
        Whole numbers, or infinite.
    col_lower, col_upper : ndarray, shape (n,), float64
        Whole numbers, or infinite.
    cost : ndarray, shape (n,), int64

    Raises
    ------
    ValueError
        For a side or bound that is not whole, or a lower one above the upper one.

    Examples
    --------
    Three weeks of ripening need 2, 3 and 2 keepers; a contract covers two weeks or all three:

    >>> flow = network_from_tree(
    ...     np.array([[0, 1], [1, 2], [2, 3]]), np.array([[0, 2], [1, 3], [0, 3]]),
    ...     row_lower=np.array([2.0, 3.0, 2.0]), row_upper=np.full(3, np.inf),
    ...     col_lower=np.zeros(3), col_upper=np.full(3, 5.0), cost=np.array([3, 2, 4]))
    >>> from pyomo_latpath.paths.network_simplex import solve_flow
    >>> result = solve_flow(flow.problem, compiled=False)
    >>> flow.x(result), flow.prices(result)
    (array([1, 1, 1]), (array([2, 1, 1]), array([0, 0, 0])))
    """
    lower = np.concatenate([whole_limits(col_lower, "column"), whole_limits(row_lower, "row")])
    upper = np.concatenate([whole_limits(col_upper, "column"), whole_limits(row_upper, "row")])
    problem = FlowProblem.of(
        np.concatenate([arcs[:, 0], tree[:, 1]]),
        np.concatenate([arcs[:, 1], tree[:, 0]]),
        lower=lower,
        capacity=upper,
        cost=np.concatenate([cost, np.zeros(tree.shape[0], np.int64)]),
        supply=np.zeros(tree.shape[0] + 1, np.int64),
    )
    return TreeFlow(problem, arcs.shape[0])


def whole_limits(values: Floats, what: str) -> Whole:
    """Whole numbers as int64, infinite ones as NO_LIMIT."""
    endless = np.isinf(values)
    whole = np.where(endless, 0.0, values)
    wrong = np.flatnonzero((whole != np.rint(whole)) | ~(np.abs(whole) < 2.0**62))
    if wrong.size:
        raise ValueError(f"{what} {wrong[0]} has the limit {values[wrong[0]]}, not a whole number")
    return np.where(endless, np.where(values > 0, NO_LIMIT, -NO_LIMIT), whole.astype(np.int64))

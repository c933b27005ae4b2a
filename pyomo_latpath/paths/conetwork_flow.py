"""Blocks whose transpose is a network matrix, solved through the flow that is their dual.

Every column j of such a block is an arc (u, v) of a directed tree, every row i a further arc
(s, t) whose entries are the tree path from s to t (Schrijver 1986, section 19.3). Give the
nodes potentials p with x_j = p_v - p_u along the tree; then row i has the activity p_t - p_s,
and the problem

    minimise c x   subject to   row_lower <= A x <= row_upper,   col_lower <= x <= col_upper

limits differences of potentials. Its dual is a minimum-cost flow without capacities (Ahuja,
Magnanti, Orlin 1993, section 9.4): for low <= p_t - p_s <= high one arc from s to t at the cost
-low and one from t to s at the cost high; for column j a supply of c_j at u and a demand of c_j
at v. Flow forward less flow backward is the price of a row, or the reduced cost of a column.
The flow's own node prices are -p, and those of a spanning tree make x a vertex. A cycle of
negative cost is a contradiction among the limits (Farkas); supplies that cannot be met show a
direction in which x improves for ever.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from .network_from_tree import whole_limits
from .network_kernel import UNLIMITED
from .network_oracle import NetworkStructure
from .network_problem import NO_LIMIT, Flags, FlowProblem, FlowResult, FlowStart
from .network_simplex import NetworkSimplex
from .network_standard import MOST_COST
from .vertex_oracle import Vertex

Floats = NDArray[np.float64]
Whole = NDArray[Any]


@dataclass(frozen=True, eq=False)
class ConetworkStructure:
    """What a conetwork certificate says of a block.

    Attributes
    ----------
    transpose : NetworkStructure
        The network behind the block's transpose: an arc of the tree for each of the block's
        columns, a further arc for each of its rows.
    """

    transpose: NetworkStructure

    @property
    def largest_cost(self) -> int:
        """Largest cost of a column with which no flow can leave 64 bits.

        Examples
        --------
        >>> ends = np.zeros((4, 2), np.int64)
        >>> ConetworkStructure(NetworkStructure(ends, ends)).largest_cost
        144115188075855871
        """
        return UNLIMITED // (2 * max(1, self.transpose.tree.shape[0])) - 1

    def fits(self, normal: NormalForm) -> bool:
        """Whether no potential can leave 64 bits, given the block's sides and bounds."""
        rows, columns = (normal.row_lower, normal.row_upper), (normal.col_lower, normal.col_upper)
        sizes = np.abs(np.concatenate([*rows, *columns]))
        largest = float(sizes[np.isfinite(sizes)].max(initial=0.0))
        return (largest + 1) * (self.transpose.tree.shape[0] + 2) < MOST_COST


class ConetworkOracle:
    """A network simplex on the dual flow of a certified block.

    It comes to each optimum from the side of the prices: vertices of the block are not walked.

    Parameters
    ----------
    normal : NormalForm
        The block, with whole sides and bounds.
    structure : ConetworkStructure
    compiled : bool
        False runs plain Python.

    Raises
    ------
    ValueError
        For a side or bound that is not whole.

    Examples
    --------
    Wheels are turned at least 3 days after salting and packed at least 5 days after turning;
    the time from salting to packing is to be short:

    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> normal = normalise(LinearForm.from_arrays(
    ...     [[-1, 1, 0], [0, -1, 1]], row_lower=[3, 5], row_upper=np.inf,
    ...     col_lower=0, col_upper=20, cost=0))
    >>> star = NetworkStructure(np.array([[0, 1], [0, 2], [0, 3]]), np.array([[1, 2], [2, 3]]))
    >>> oracle = ConetworkOracle(normal, ConetworkStructure(star), compiled=False)
    >>> end = oracle.optimise(np.array([-1, 0, 1]), Deadline(None))
    >>> end.x, end.row_dual
    (array([0., 3., 8.]), array([1., 1.]))
    """

    engine = "conetwork"
    exact_steps = False

    def __init__(
        self, normal: NormalForm, structure: ConetworkStructure, compiled: bool = True
    ) -> None:
        self._columns = normal.matrix.shape[1]
        self._still = np.zeros(self._columns, np.int64)
        self._ends = np.concatenate([structure.transpose.tree, structure.transpose.arcs])
        self._largest = structure.largest_cost
        self._compiled = compiled
        self._result: FlowResult | None = None
        self._tree: FlowStart | None = None
        self.pivots = self.steps = 0
        self._take_limits(normal)

    def resume(self, normal: NormalForm, same_limits: bool) -> None:
        """Begin again at the tree of the last optimum.

        Parameters
        ----------
        normal : NormalForm
            A block with the same matrix.
        same_limits : bool
            Whether it differs in costs only; where not, the tree is given up.
        """
        assert self._result is not None
        tree, self._result = self._result.start, None
        self.pivots = self.steps = 0
        if same_limits:
            self.release()
        else:
            self._take_limits(normal)
        # Other limits may have laid out other arcs.
        fits = same_limits and tree.flow.size == self._problem.tail.size
        self._tree = tree if fits else None

    def _take_limits(self, normal: NormalForm) -> None:
        columns = (whole_limits(v, "column") for v in (normal.col_lower, normal.col_upper))
        rows = (whole_limits(v, "row") for v in (normal.row_lower, normal.row_upper))
        self._whole_box = tuple(map(np.concatenate, zip(columns, rows, strict=True)))
        self.release()

    def optimise(self, cost: Whole, deadline: Deadline) -> Vertex:
        """Go to a vertex of the current face that minimises `cost`.

        Costs beyond `ConetworkStructure.largest_cost` are met digit by digit (Edmonds and Karp
        1972). A cut found on the way may mislead where the block is unbounded.
        """
        size = max(int(cost.max()), -int(cost.min()))
        shift = max(0, (size // self._largest).bit_length())
        first, before = self._result is None, self.pivots
        self._result = self._run((cost >> shift).astype(np.int64), deadline, tree=self._tree)
        self._tree = None
        flow: Whole = self._result.flow
        digit = 56 - (self._columns * flow.size).bit_length()
        while shift and self._result.status == "optimal":
            step = min(shift, max(1, digit))
            rest = (cost >> (shift - step)) - ((cost >> shift) << step)
            flow, shift = flow.astype(object) << step, shift - step
            # Paths that bring the rest change no arc by more than the rest together.
            reach = 1 + int(np.abs(self._supply(rest)).sum())
            lower = -np.minimum(flow, reach).astype(np.int64)
            self._result = self._run(rest.astype(np.int64), deadline, lower)
            flow = flow + self._result.flow
        self._priced = cost, flow
        self.steps += 0 if first else self.pivots - before
        return self._vertex(self._result, flow, deadline)

    def hold(self, rows: Flags, columns: Flags) -> None:
        """Leave rows and columns where they are."""
        held = np.concatenate([columns, rows])
        self._limit(*(np.where(held, self._value, limit) for limit in self._box))

    def release(self) -> None:
        """Give all rows and columns their limits back."""
        self._limit(*self._whole_box)

    def basis_prices(self, costs: Whole, guess: Whole) -> Whole:
        """Exact prices of the rows for whole costs; the guess is not needed."""
        del guess
        known, flow = self._priced
        same = np.array_equal(known, costs)
        return self._net(flow if same else self._tree_flow(costs))[self._columns :]

    def _limit(self, low: Whole, high: Whole) -> None:
        """Lay out the arcs for these limits."""
        self._box = low, high
        self._below, self._above = np.flatnonzero(low > -NO_LIMIT), np.flatnonzero(high < NO_LIMIT)
        forward, backward = self._ends[self._below], self._ends[self._above]
        self._problem = FlowProblem.of(
            np.concatenate([forward[:, 0], backward[:, 1]]),
            np.concatenate([forward[:, 1], backward[:, 0]]),
            cost=np.concatenate([-low[self._below], high[self._above]]),
            supply=self._supply(self._still),
        )

    def _supply(self, cost: Whole) -> Whole:
        """What the nodes put in: each column's cost where its arc begins, out where it ends."""
        supply = np.zeros(self._columns + 1, cost.dtype)
        np.add.at(supply, self._ends[: self._columns, 0], cost)
        np.subtract.at(supply, self._ends[: self._columns, 1], cost)
        return supply

    def _run(
        self,
        cost: Whole,
        deadline: Deadline,
        lower: Whole | None = None,
        tree: FlowStart | None = None,
    ) -> FlowResult:
        problem = replace(self._problem, supply=self._supply(cost))
        problem = problem if lower is None else replace(problem, lower=lower)
        engine = NetworkSimplex(problem, tree, compiled=self._compiled)
        result = engine.run(deadline)
        self.pivots += engine.pivots
        return result

    def _along(self, node: Whole) -> Whole:
        """Differences of values at the nodes, columns first, then rows."""
        return node[self._ends[:, 1]] - node[self._ends[:, 0]]

    def _net(self, flow: Whole) -> Whole:
        """Flow forward less flow backward, columns first, then rows."""
        net = np.zeros(self._ends.shape[0], flow.dtype)
        net[self._below] += flow[: self._below.size]
        net[self._above] -= flow[self._below.size :]
        return net

    def _vertex(self, result: FlowResult, flow: Whole, deadline: Deadline) -> Vertex:
        """The answer in the block's terms; without an optimum of the flow, told which and why."""
        n = self._columns
        self._value = -self._along(result.potential)
        status, ray, farkas, cut = result.status, None, None, result.cut
        if cut is not None:
            # Prices that do not exist: the block is unbounded, if it has a plan at all.
            result = self._run(self._still, deadline)
            # Raising the potentials of all nodes that have too much to send is what improves.
            inside = cut.nodes.astype(np.float64) * (1 if cut.outward else -1)
            ray = self._along(inside)[:n]
            status = "unbounded" if result.status == "optimal" else result.status
        if result.ray is not None:
            status, ray, farkas = "infeasible", None, self._net(result.ray)[n:].astype(np.float64)
        net, x = self._net(flow).astype(np.float64), self._value[:n].astype(np.float64)
        return Vertex(status, x, net[n:], net[:n], ray, farkas)

    def _tree_flow(self, cost: Whole) -> Whole:
        """Flow on the last run's tree for whole costs of any size, from the leaves to the roots."""
        tail, head, result = self._problem.tail.tolist(), self._problem.head.tolist(), self._result
        assert result is not None
        left = self._supply(cost.astype(object))
        beside: list[list[int]] = [[] for _ in left]
        for j in np.flatnonzero(result.tree).tolist():
            beside[tail[j]].append(j)
            beside[head[j]].append(j)
        above: dict[int, int | None] = dict.fromkeys(np.flatnonzero(result.roots).tolist())
        order = list(above)
        for node in order:
            for j in beside[node]:
                if (other := tail[j] + head[j] - node) not in above:
                    above[other] = j
                    order.append(other)
        flow = np.zeros(len(tail), dtype=object)
        for node in reversed(order):
            if (up := above[node]) is not None:
                flow[up] = left[node] if tail[up] == node else -left[node]
                left[tail[up] + head[up] - node] += left[node]
        return flow

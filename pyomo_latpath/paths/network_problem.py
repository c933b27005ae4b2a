"""Minimum-cost flow problems, their answers, and what proves an answer.

A flow x on arcs j = (tail, head) with lower_j <= x_j <= capacity_j meets the supplies when at
every node v what leaves on arcs less what enters equals supply_v. Wanted is one that minimises
the sum of cost_j x_j. Ahuja, Magnanti, Orlin (1993), chapters 1 and 11.

Potentials p price the nodes: the reduced cost of arc j is cost_j + p_tail - p_head. A flow is
optimal when arcs with a positive reduced cost run at their lower limit and those with a
negative one at their capacity (the same book, section 9.3).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Whole = NDArray[np.int64]
Flags = NDArray[np.bool_]

#: A capacity of NO_LIMIT, or a lower limit of -NO_LIMIT, is no limit.
NO_LIMIT = 2**63 - 1


class TooLargeError(ArithmeticError):
    """The numbers of a problem might not fit 64 bits on the way; nothing was computed."""


@dataclass(frozen=True, eq=False)
class FlowProblem:
    """A minimum-cost flow problem; `of` builds one from anything like arrays.

    Attributes
    ----------
    tail, head : ndarray, shape (m,), int64
        Nodes 0..n-1; parallel arcs and loops are fine.
    lower, capacity : ndarray, shape (m,), int64
        Limits of the flow; -NO_LIMIT and NO_LIMIT for none.
    cost : ndarray, shape (m,), int64
    supply : ndarray, shape (n,), int64
        What a node puts in (negative: takes out).
    """

    tail: Whole
    head: Whole
    lower: Whole
    capacity: Whole
    cost: Whole
    supply: Whole

    @classmethod
    def of(
        cls,
        tail: ArrayLike,
        head: ArrayLike,
        *,
        capacity: ArrayLike = NO_LIMIT,
        cost: ArrayLike = 0,
        supply: ArrayLike,
        lower: ArrayLike = 0,
    ) -> FlowProblem:
        """Build a problem; a single number stands for all arcs.

        Raises
        ------
        ValueError
            For numbers that are not whole, shapes that do not fit, unknown nodes, or a lower
            limit above the capacity.

        Examples
        --------
        >>> FlowProblem.of([0, 0], [1, 1], capacity=[3, 9], cost=[1, 2], supply=[5, -5])
        FlowProblem(2 nodes, 2 arcs)
        """
        tails = np.atleast_1d(_whole(tail, "tail"))

        def per_arc(values: ArrayLike, name: str) -> Whole:
            return np.broadcast_to(_whole(values, name), tails.shape)

        problem = cls(
            tail=tails,
            head=np.atleast_1d(_whole(head, "head")),
            lower=per_arc(lower, "lower"),
            capacity=per_arc(capacity, "capacity"),
            cost=per_arc(cost, "cost"),
            supply=np.atleast_1d(_whole(supply, "supply")),
        )
        problem._check()
        return problem

    def __repr__(self) -> str:
        """Sizes only."""
        return f"FlowProblem({self.supply.size} nodes, {self.tail.size} arcs)"

    def value(self, flow: Whole) -> int:
        """Cost of a flow, exact."""
        largest = max(abs(int(self.cost.max(initial=0))), abs(int(self.cost.min(initial=0))))
        if largest * float(np.abs(flow.astype(np.float64)).sum()) < 2.0**62:
            return int(self.cost @ flow)
        return int(self.cost.astype(object) @ flow.astype(object))

    def imbalance(self, flow: Whole) -> Whole:
        """Supply less what leaves plus what enters, per node; 0 for a flow that meets it."""
        left = self.supply.copy()
        np.subtract.at(left, self.tail, flow)
        np.add.at(left, self.head, flow)
        return left

    def reduced_cost(self, potential: Whole) -> Whole:
        """Reduced cost of every arc, shape (m,)."""
        return self.cost + potential[self.tail] - potential[self.head]

    def _check(self) -> None:
        nodes = self.supply.size
        if self.head.shape != self.tail.shape:
            raise ValueError(f"{self.tail.size} tails but {self.head.size} heads")
        for ends in (self.tail, self.head):
            wrong = np.flatnonzero((ends < 0) | (ends >= nodes))
            if wrong.size:
                raise ValueError(f"arc {wrong[0]} meets node {ends[wrong[0]]} of {nodes} nodes")
        crossed = np.flatnonzero(self.lower > self.capacity)
        if crossed.size:
            j = crossed[0]
            raise ValueError(
                f"arc {j} has lower limit {self.lower[j]} above its capacity {self.capacity[j]}"
            )


@dataclass(frozen=True, eq=False)
class FlowStart:
    """Where to start from: any flow, and what is known of the tree behind it.

    Attributes
    ----------
    flow : ndarray, shape (m,), int64
        Need not meet the supplies, nor be a vertex; it is clipped to the limits.
    tree : ndarray, shape (m,), bool
        Arcs wanted in the basis; their flow follows from that of the others.
    roots : ndarray, shape (n,), bool
        Nodes from which the trees are hung.
    """

    flow: Whole
    tree: Flags
    roots: Flags

    @classmethod
    def at(cls, problem: FlowProblem, flow: Whole) -> FlowStart:
        """Start from a flow alone."""
        return cls(flow, np.zeros(flow.size, np.bool_), np.zeros(problem.supply.size, np.bool_))


@dataclass(frozen=True, eq=False)
class Cut:
    """A set of nodes that has more to send (or to take in) than its cut allows.

    Attributes
    ----------
    nodes : ndarray, shape (n,), bool
    outward : bool
        True: supply + lower limits in - capacities out = shortfall > 0.
        False: demand + lower limits out - capacities in = shortfall > 0.
    shortfall : int
    """

    nodes: Flags
    outward: bool
    shortfall: int


def shortfall(problem: FlowProblem, nodes: Flags, outward: bool) -> int | None:
    """Work out the shortfall of a cut in exact integers; None where some limit is missing.

    Positive: no flow can meet the supplies (Gale 1957; Hoffman 1960).

    Examples
    --------
    >>> problem = FlowProblem.of([0], [1], capacity=3, supply=[5, -5])
    >>> shortfall(problem, np.array([True, False]), outward=True)
    2
    """
    leaves = nodes[problem.tail] & ~nodes[problem.head]
    enters = nodes[problem.head] & ~nodes[problem.tail]
    if not outward:
        leaves, enters = enters, leaves
    most, least = problem.capacity[leaves], problem.lower[enters]
    if (most == NO_LIMIT).any() or (least == -NO_LIMIT).any():
        return None
    supply = sum(problem.supply[nodes].tolist())
    return (supply if outward else -supply) + sum(least.tolist()) - sum(most.tolist())


@dataclass(frozen=True, eq=False)
class FlowResult:
    """Outcome of a solve.

    Attributes
    ----------
    status : str
        'optimal', 'infeasible' (`cut` proves it), 'unbounded' (`flow` meets the supplies and
        `ray` proves it), 'time_limit' or 'pivot_limit' (the flow reached so far).
    flow : ndarray, shape (m,), int64
    potential : ndarray, shape (n,), int64
        Prices of the basis: reduced costs are 0 on `tree`. Optimal ones are 0 at the roots;
        where the walk stopped early they hold the cost of artificial arcs, too.
    tree, roots : ndarray, shape (m,) and (n,), bool
        The basis. At an optimum a spanning tree of each connected part of the network.
    unmet : int
        What of the supplies the flow leaves unmet; 0 unless stopped early or infeasible.
    pivots, steps : int
        Basis changes, and those of them that changed the flow.
    cut : Cut or None
    ray : ndarray, shape (m,), int8, or None
        A circulation without limit and with a negative cost.
    """

    status: str
    flow: Whole
    potential: Whole
    tree: Flags
    roots: Flags
    unmet: int
    pivots: int
    steps: int
    cut: Cut | None = None
    ray: NDArray[np.int8] | None = None

    @property
    def start(self) -> FlowStart:
        """Where the next solve can start from."""
        return FlowStart(self.flow, self.tree, self.roots)


def _whole(values: ArrayLike, name: str) -> Whole:
    """Whole numbers as int64, or ValueError."""
    given = np.asarray(values)
    if given.size == 0:
        return np.zeros(given.shape, np.int64)
    if given.dtype.kind not in "iu" or (given.dtype.kind == "u" and given.max() > NO_LIMIT):
        raise ValueError(f"{name} must hold whole 64-bit numbers, not {given.dtype}")
    return given.astype(np.int64, copy=False)

"""The primal network simplex: a walk from vertex to vertex of a minimum-cost flow problem.

After Dantzig (1951) and Cunningham (1976); Ahuja, Magnanti, Orlin (1993), chapter 11. Whole
numbers throughout: supplies, limits and costs in, flows and potentials out. What the first tree
cannot carry goes over artificial arcs to a root, at a cost M with 2 M above the cost of any
path, so that unmet supplies go first. All loops over pivots are in `network_kernel`.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from ..deadline import Deadline
from .network_answer import cut_of, ray_of, result_of
from .network_compile import compiled as compiled_kernels
from .network_compile import plain as plain_kernels
from .network_first_tree import plant
from .network_kernel import OPTIMAL, PIVOTS, RUNNING, STEPS, UNBOUNDED
from .network_problem import Flags, FlowProblem, FlowResult, FlowStart, Whole
from .network_standard import standard_form
from .network_state import State

#: From this size on, nodes are renumbered in preorder now and then: subtrees are walked far
#: oftener than anything else, and then lie side by side in memory.
MANY_NODES = 4096
#: Arcs priced and nodes visited between two looks at the clock.
SLICE, PLAIN_SLICE = 1_000_000, 100_000


def solve_flow(
    problem: FlowProblem,
    start: FlowStart | None = None,
    *,
    deadline: Deadline | None = None,
    compiled: bool = True,
) -> FlowResult:
    """Find a cheapest flow, or prove that there is none.

    Parameters
    ----------
    problem : FlowProblem
    start : FlowStart, optional
        A flow and tree to walk from: a result's `start`, or any other.
    deadline : Deadline, optional
    compiled : bool
        False runs plain Python: about a hundred times slower, but without the seconds that
        compiling takes in an environment where it is new.

    Returns
    -------
    FlowResult

    Raises
    ------
    TooLargeError
        Where the numbers might not fit 64 bits on the way; nothing has been computed then.

    Examples
    --------
    Two ripening caves with 4 and 2 wheels of cheese serve two market towns that want 3 each:

    >>> problem = FlowProblem.of([0, 0, 1, 1], [2, 3, 2, 3], cost=[1, 4, 2, 3],
    ...                          supply=[4, 2, -3, -3])
    >>> result = solve_flow(problem, compiled=False)
    >>> result.status, result.flow, problem.value(result.flow)
    ('optimal', array([3, 1, 0, 2]), 13)
    >>> problem.reduced_cost(result.potential)
    array([0, 0, 2, 0])
    """
    return NetworkSimplex(problem, start, compiled=compiled).run(deadline)


class NetworkSimplex:
    """A network simplex that keeps its tree between runs, for walks with changing costs.

    Parameters
    ----------
    problem : FlowProblem
    start : FlowStart, optional
    compiled : bool
        See `solve_flow`.
    block : int, optional
        Arcs priced in one go; the root of their number if not given. All of them is Dantzig's
        rule, 1 takes the first improving arc.

    Attributes
    ----------
    problem : FlowProblem
        With the costs set last.

    Raises
    ------
    TooLargeError

    Examples
    --------
    >>> problem = FlowProblem.of([0, 0], [1, 1], capacity=[3, 9], cost=[1, 2], supply=[5, -5])
    >>> engine = NetworkSimplex(problem, compiled=False)
    >>> engine.run().flow
    array([3, 2])
    >>> engine.set_cost(np.array([2, 1]))
    >>> engine.run().flow
    array([0, 5])
    """

    def __init__(
        self,
        problem: FlowProblem,
        start: FlowStart | None = None,
        *,
        compiled: bool = True,
        block: int | None = None,
    ) -> None:
        self.problem = problem
        self._compiled = compiled
        self._block = block
        form = standard_form(problem)
        costs = form.costs(problem.cost)
        self._state = State.empty(form, compiled_kernels() if compiled else plain_kernels())
        self._state.place_costs(costs)
        plant(self._state, start)
        self._last: FlowResult | None = None

    @property
    def pivots(self) -> int:
        """Basis changes so far."""
        return int(self._state.tally[PIVOTS])

    @property
    def steps(self) -> int:
        """Pivots that changed the flow, so far."""
        return int(self._state.tally[STEPS])

    @property
    def end(self) -> FlowStart | None:
        """Where the last run ended, for another engine to start from."""
        return None if self._last is None else self._last.start

    def set_cost(self, cost: Whole) -> None:
        """Take other costs, at the same vertex; raises TooLargeError and then changes nothing."""
        self._state.place_costs(self._state.form.costs(cost))
        self.problem = replace(self.problem, cost=cost)

    def hold(self, arcs: Flags) -> None:
        """Leave arcs where they are, in addition to those held before: they are not priced.

        Raises
        ------
        ValueError
            For an arc of the tree, whose flow may well have to change, and where the flow does
            not meet the supplies yet.
        """
        state = self._state
        m = state.order.size
        held = arcs[state.form.origin[state.order]]
        inside = state.tree.arc[:-1][state.tree.arc[:-1] < m]
        caught = inside[held[inside]]
        if caught.size:
            arc = state.form.origin[state.order[caught[0]]]
            raise ValueError(f"arc {arc} is part of the tree and cannot be held")
        if state.unmet():
            raise ValueError("arcs cannot be held before the flow meets the supplies")
        state.prefer(~held & (np.arange(m) < state.active))

    def release(self) -> None:
        """Let all held arcs move again, from the same vertex."""
        state = self._state
        state.prefer(state.form.capacity[state.order] > 0)

    def run(self, deadline: Deadline | None = None, max_pivots: int | None = None) -> FlowResult:
        """Walk to an optimum of the current costs over the arcs that are not held.

        Parameters
        ----------
        deadline : Deadline, optional
        max_pivots : int, optional
            Stop after so many pivots of this run.
        """
        clock = deadline or Deadline(None)
        most = 2**62 if max_pivots is None else self.pivots + max_pivots
        self._last = self._result(clock, most)
        return self._last

    def tree_potentials(self, cost: NDArray[np.object_]) -> NDArray[np.object_]:
        """Price the nodes at the last run's basis for whole costs of any size, exactly.

        Examples
        --------
        >>> engine = NetworkSimplex(FlowProblem.of([0], [1], supply=[1, -1]), compiled=False)
        >>> engine.run().status, engine.tree_potentials(np.array([2**70], dtype=object))
        ('optimal', array([0, 1180591620717411303424], dtype=object))
        """
        last = self._last or result_of(self._state, "pivot_limit")
        tail, head = self.problem.tail.tolist(), self.problem.head.tolist()
        beside: list[list[tuple[int, int]]] = [[] for _ in self.problem.supply]
        for j in np.flatnonzero(last.tree).tolist():
            beside[tail[j]].append((head[j], cost[j]))
            beside[head[j]].append((tail[j], -cost[j]))
        price = np.zeros(len(beside), dtype=object)
        reached = last.roots.tolist()
        waiting = np.flatnonzero(last.roots).tolist()
        while waiting:
            node = waiting.pop()
            for other, step in beside[node]:
                if not reached[other]:
                    reached[other] = True
                    price[other] = price[node] + step
                    waiting.append(other)
        return price

    def _result(self, clock: Deadline, most: int) -> FlowResult:
        """Walk, and tell where the walk ended and why."""
        state = self._state
        code = self._walk(clock, most)
        ray = None
        if code == UNBOUNDED:
            ray = ray_of(state)
            code = self._meet_supplies(clock, most)
        if code == RUNNING:
            return result_of(state, "time_limit" if clock.passed else "pivot_limit")
        if state.unmet():
            return result_of(state, "infeasible", cut=cut_of(state))
        return result_of(state, "optimal" if ray is None else "unbounded", ray=ray)

    def _walk(self, deadline: Deadline, most: int) -> int:
        """Pivot in slices, so that the clock is heard and the memory kept in order."""
        state = self._state
        block = self._block or max(10, math.isqrt(state.active))
        budget = max(SLICE, 32 * state.arcs.tail.size) if self._compiled else PLAIN_SLICE
        while True:
            code = state.kernels.walk(
                state.arcs, state.tree, state.active, block, budget, most, state.tally
            )
            if code != RUNNING or self.pivots >= most or deadline.passed:
                return int(code)
            if self._compiled and state.node.size > MANY_NODES:
                state.renumber()

    def _meet_supplies(self, deadline: Deadline, most: int) -> int:
        """Meet the supplies at no matter what cost, to tell unbounded from infeasible."""
        state = self._state
        if state.unmet() == 0:
            return OPTIMAL
        state.place_costs(np.zeros(state.order.size, np.int64))
        code = self._walk(deadline, most)
        if state.unmet() == 0:
            state.place_costs(state.form.costs(self.problem.cost))
        return code

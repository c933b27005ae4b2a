"""From where a network simplex walk stands to what its caller asked for, proofs included."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from .network_kernel import ENTERING, PIVOTS, STEPS
from .network_problem import Cut, Flags, FlowResult, Whole
from .network_state import State

#: Beyond any limit of a shift.
FAR = 2**63 - 1


def result_of(
    state: State, status: str, cut: Cut | None = None, ray: NDArray[np.int8] | None = None
) -> FlowResult:
    """Flow, prices and basis where the state stands."""
    m = state.order.size
    flow = state.flow()
    tree = np.zeros(m, np.bool_)
    tree[state.tree.arc[:-1][state.tree.arc[:-1] < m]] = True
    roots = state.tree.parent[:-1] == state.node.size - 1
    potential = state.tree.potential[:-1]
    if status == "optimal":
        tree, roots, potential = _spanning(state, tree, roots)
    return FlowResult(
        status,
        state.form.offset + state.form.original(_by_arc(state, flow[:m])),
        _by_node(state, potential),
        state.form.original_flags(_by_arc(state, tree)),
        _by_node(state, roots),
        int(flow[m:].sum()),
        int(state.tally[PIVOTS]),
        int(state.tally[STEPS]),
        cut,
        ray,
    )


def cut_of(state: State) -> Cut:
    """The violated cut where the least possible flow over artificial arcs is not zero.

    Nodes that send to the root over artificial arcs differ by 2 M in potential from those that
    receive from it, so every arc between the two sides is full one way and empty the other.
    """
    m = state.order.size
    _, hung, sequence = state.trees()
    tops = sequence[:-1][state.tree.parent[sequence[:-1]] == state.node.size - 1]
    sends = state.arcs.tail[state.tree.arc[tops]] == tops
    nodes = sends[hung[:-1]]
    flow = state.flow()
    surplus = int(flow[m:][state.arcs.head[m:] == state.node.size - 1].sum())
    if surplus > 0:
        return Cut(_by_node(state, nodes), True, surplus)
    return Cut(_by_node(state, ~nodes), False, int(flow[m:].sum()))


def ray_of(state: State) -> NDArray[np.int8]:
    """The circulation without limit that the last entering arc closes."""
    arcs, tree = state.arcs, state.tree
    ray = np.zeros(state.order.size, np.int8)
    entering = state.tally[ENTERING]
    ray[entering] = 1
    first, second = arcs.tail[entering], arcs.head[entering]
    while first != second:
        if tree.size[first] < tree.size[second]:
            ray[tree.arc[first]] = -1 if arcs.tail[tree.arc[first]] == first else 1
            first = tree.parent[first]
        else:
            ray[tree.arc[second]] = 1 if arcs.tail[tree.arc[second]] == second else -1
            second = tree.parent[second]
    return state.form.original(_by_arc(state, ray)).astype(np.int8)


def _spanning(state: State, tree: Flags, roots: Flags) -> tuple[Flags, Flags, Whole]:
    """Join trees that only empty artificial arcs tie together, by arcs of reduced cost 0.

    An optimum then has prices of a basis of the problem itself, free of artificial costs.
    """
    arcs, m = state.arcs, state.order.size
    count, hung, sequence = state.trees()
    tops = sequence[:-1][roots[sequence[:-1]]]
    cost = arcs.cost[:m]
    potential = state.tree.potential[:-1] - state.tree.potential[tops][hung[:-1]]
    ends = hung[arcs.tail[:m]], hung[arcs.head[:m]]
    crossing = np.flatnonzero(ends[0] != ends[1])
    shift = np.zeros(count, np.int64)
    joins = np.zeros(crossing.size, np.bool_)
    base = np.ones(count, np.bool_)
    if crossing.size:
        tail, head = arcs.tail[crossing], arcs.head[crossing]
        slack = cost[crossing] + potential[tail] - potential[head]
        full = arcs.state[crossing] < 0
        idle = crossing >= state.active
        # An empty arc lets its head's tree rise by its slack; a full one its tail's.
        lows, highs = np.where(full, (hung[head], hung[tail]), (hung[tail], hung[head]))
        slack = np.where(full, -slack, slack)
        both = np.concatenate([lows, highs])
        begin = np.concatenate([[0], np.cumsum(np.bincount(both, minlength=count))])
        incident = np.argsort(both, kind="stable") % crossing.size
        chosen = np.zeros(crossing.size, np.int8)
        reached = np.zeros(count, np.int8)
        limits = np.full(count, -FAR), np.full(count, FAR)
        state.kernels.join(
            lows, highs, slack, idle, begin, incident, shift, *limits, reached, chosen
        )
        joins = chosen > 0
        base = reached == 2
    tree = tree.copy()
    tree[crossing[joins]] = True
    roots = np.zeros(roots.size, np.bool_)
    roots[tops[base]] = True
    return tree, roots, potential + shift[hung[:-1]]


def _by_arc(state: State, values: NDArray[Any]) -> NDArray[Any]:
    """From places to standard arcs."""
    result = np.empty_like(values)
    result[state.order] = values
    return result


def _by_node(state: State, values: NDArray[Any]) -> NDArray[Any]:
    """From node numbers to the problem's nodes."""
    result = np.empty_like(values)
    result[state.node[:-1]] = values
    return result

"""First trees of the network simplex: from nothing, from cheapest paths, or from any flow."""

from __future__ import annotations

import numpy as np

from .network_problem import Flags, FlowStart
from .network_state import State, by_node

#: Share of nodes without supply from which on cheapest paths make the better first tree.
MANY_TRANSIT = 0.75


def plant(state: State, start: FlowStart | None) -> None:
    """Give an empty state its first tree, strongly feasible whatever the start.

    Without a start: a star of artificial arcs, or, where most nodes only pass flow on,
    cheapest paths to the nodes that want it. A start's flow is clipped to the limits and moved
    to a vertex that is no dearer; what it leaves unmet goes over artificial arcs.
    """
    arcs, tree, kernels = state.arcs, state.tree, state.kernels
    m, n = state.order.size, state.node.size - 1
    flow = np.zeros(m, np.int64)
    wanted = np.zeros(m, np.bool_)
    roots = np.zeros(n, np.bool_)
    if start is not None:
        flow = state.form.flow(start.flow)[state.order]
        roots = start.roots
        wanted = state.form.part(start.tree, start.flow)[state.order]
    elif np.count_nonzero(state.form.excess == 0) >= MANY_TRANSIT * n:
        roots = state.form.excess < 0
        wanted = _cheapest_paths(state, roots)
    between = (flow > 0) & (flow < arcs.capacity[:m])
    forest = np.flatnonzero(between | wanted).astype(np.int32)
    order = np.zeros(n, np.int32)
    links = np.full(n, -1, np.int32), np.zeros(2 * forest.size, np.int32)
    kernels.grow(arcs, forest, roots, *links, tree, order)
    inside = tree.arc[:n][tree.arc[:n] >= 0]
    outside = np.ones(m, np.bool_)
    outside[inside] = False
    arcs.state[:m] = np.where((flow > 0) & (flow == arcs.capacity[:m]), -1, 1)
    loose = np.flatnonzero(between & outside).astype(np.int32)
    arcs.state[loose] = 0
    net = state.form.excess.copy()
    carrying = np.flatnonzero((flow > 0) & outside)
    np.subtract.at(net, arcs.tail[carrying], flow[carrying])
    np.add.at(net, arcs.head[carrying], flow[carrying])
    kernels.hang(arcs, tree, order, net)
    kernels.string(tree, order, np.zeros(n + 1, np.int32), np.zeros(n + 1, np.int32))
    kernels.set_potentials(arcs, tree)
    kernels.settle(arcs, tree, loose, flow[loose], state.tally)


def _cheapest_paths(state: State, sinks: Flags) -> Flags:
    """Places of arcs on cheapest paths to the sinks, as a forest."""
    m, n = state.order.size, sinks.size
    movable = np.arange(m) < state.active
    heads = state.arcs.head[:m]
    entering = by_node(heads, movable)[: state.active].astype(np.int32)
    begin = np.zeros(n + 1, np.int64)
    begin[1:] = np.cumsum(np.bincount(heads[movable], minlength=n))
    distance = np.where(sinks, 0, np.int64(2**62))
    arc = np.full(n, -1, np.int32)
    cost = np.maximum(state.arcs.cost, 0)
    state.kernels.cheapest_paths(state.arcs.tail, cost, begin, entering, distance, arc)
    wanted = np.zeros(m, np.bool_)
    wanted[arc[arc >= 0]] = True
    return wanted

"""Loops that build, price and join the trees of a network simplex, on bare arrays.

Like `network_kernel`, one text that runs as plain Python on lists and compiled on arrays.
"""

from __future__ import annotations

from heapq import heappop, heappush
from typing import Any

from .network_kernel import UNCAPACITATED, Arcs, Tree


def grow(
    arcs: Arcs, forest: Any, roots: Any, first: Any, following: Any, tree: Tree, order: Any
) -> None:
    """Span the forest breadth first, from the flagged roots and then from what is left.

    Fills parents, arcs and `order`; a parent of -1 says not seen. Arcs that would close a cycle
    are passed over. `first` (n) starts as -1 and `following` (2 k) is scratch.
    """
    tail, head, parent, arc = arcs.tail, arcs.head, tree.parent, tree.arc
    n = len(order)
    for k in range(len(forest)):
        e = forest[k]
        following[2 * k] = first[tail[e]]
        first[tail[e]] = 2 * k
        following[2 * k + 1] = first[head[e]]
        first[head[e]] = 2 * k + 1
    done = 0
    count = 0
    for k in range(2 * n):
        root = k % n
        if parent[root] >= 0 or (k < n and not roots[root]):
            continue
        parent[root] = n
        arc[root] = -1
        order[count] = root
        count += 1
        while done < count:
            node = order[done]
            done += 1
            link = first[node]
            while link >= 0:
                e = forest[link // 2]
                other = head[e] if link % 2 == 0 else tail[e]
                if parent[other] < 0:
                    parent[other] = node
                    arc[other] = e
                    order[count] = other
                    count += 1
                link = following[link]


def hang(arcs: Arcs, tree: Tree, order: Any, net: Any) -> None:
    """Give the tree arcs the flow that the nodes' net supplies ask for, from the leaves up.

    An arc that cannot carry it, or has no room towards the root after it, is cut at its limit,
    and an artificial arc takes the rest: so the tree is strongly feasible.
    """
    tail, head, _, capacity, state = arcs
    parent, arc, up, down = tree.parent, tree.arc, tree.up, tree.down
    n = len(order)
    artificial = len(tail) - n
    for k in range(n - 1, -1, -1):
        node = order[k]
        e = arc[node]
        if e >= 0:
            upward = tail[e] == node
            wanted = net[node] if upward else -net[node]
            flow = min(max(wanted, 0), capacity[e])
            rising = capacity[e] - flow
            net[parent[node]] += flow if upward else -flow
            if flow == wanted and (rising if upward else flow) > 0:
                up[node], down[node] = (rising, flow) if upward else (flow, rising)
                state[e] = 0
                continue
            net[node] -= flow if upward else -flow
            state[e] = 1 if flow == 0 else -1
        e = artificial + node
        parent[node], arc[node], state[e] = n, e, 0
        if net[node] >= 0:
            tail[e], head[e] = node, n
            up[node], down[node] = UNCAPACITATED - net[node], net[node]
        else:
            tail[e], head[e] = n, node
            up[node], down[node] = -net[node], UNCAPACITATED + net[node]


def string(tree: Tree, order: Any, place: Any, sequence: Any) -> None:
    """Lay the thread through a tree whose parents stand before their children in `order`."""
    parent, thread, back, size = tree.parent, tree.thread, tree.back, tree.size
    n = len(order)
    for k in range(n - 1, -1, -1):
        node = order[k]
        size[parent[node]] += size[node]
    place[n] = 1
    sequence[0] = n
    for k in range(n):
        node = order[k]
        at = place[parent[node]]
        place[parent[node]] = at + size[node]
        place[node] = at + 1
        sequence[at] = node
    for k in range(n + 1):
        thread[sequence[k - 1]] = sequence[k]
        back[sequence[k]] = sequence[k - 1]


def set_potentials(arcs: Arcs, tree: Tree) -> None:
    """Price the nodes so that every tree arc has reduced cost 0; the root has potential 0."""
    tail, cost = arcs.tail, arcs.cost
    parent, arc, thread, potential = tree.parent, tree.arc, tree.thread, tree.potential
    n = len(parent) - 1
    potential[n] = 0
    node = thread[n]
    while node != n:
        e = arc[node]
        step = -cost[e] if tail[e] == node else cost[e]
        potential[node] = potential[parent[node]] + step
        node = thread[node]


def label(tree: Tree, hung: Any, sequence: Any) -> int:
    """Number the trees that hang on the root, per node; return how many there are.

    Fills `hung` (n + 1, meaningless for the root) and the nodes in preorder, the root last.
    """
    parent, thread = tree.parent, tree.thread
    n = len(parent) - 1
    count = 0
    node = thread[n]
    for k in range(n):
        if parent[node] == n:
            count += 1
        hung[node] = count - 1
        sequence[k] = node
        node = thread[node]
    sequence[n] = n
    return count


def cheapest_paths(
    tail: Any, cost: Any, begin: Any, entering: Any, distance: Any, arc: Any
) -> None:
    """Find cheapest paths to the nodes of distance 0 (Dijkstra 1959): `arc` leaves each node.

    Arcs into node v are entering[begin[v]:begin[v + 1]]; costs are nonnegative.
    """
    heap = [(distance[v], v) for v in range(len(arc)) if distance[v] == 0]
    while len(heap) > 0:
        reached, node = heappop(heap)
        if reached > distance[node]:
            continue
        for k in range(begin[node], begin[node + 1]):
            e = entering[k]
            source = tail[e] + 0
            if reached + cost[e] < distance[source]:
                distance[source] = reached + cost[e]
                arc[source] = e
                heappush(heap, (distance[source], source))


def join(
    tail: Any,
    head: Any,
    slack: Any,
    idle: Any,
    begin: Any,
    incident: Any,
    shift: Any,
    lowest: Any,
    highest: Any,
    reached: Any,
    chosen: Any,
) -> None:
    """Shift the potentials of trees against each other until arcs of reduced cost 0 join them.

    Nodes are trees here. Arc i allows head's shift less tail's up to slack[i] >= 0, or any at
    all where it is `idle` (such arcs join where no other does). From one tree on, all that is
    not joined moves together, up or else down, until the nearest arc is tight (Prim 1957, with
    a moving measure). Fills `shift` and flags `chosen` arcs; a tree begun from is `reached` as 2.
    `lowest` and `highest` keep the nearest limit of each tree, from far outside on.
    """
    for base in range(len(reached)):
        if reached[base]:
            continue
        rise, fall, rest = [(0, 0)], [(0, 0)], [(0, 0)]
        rise.pop()
        fall.pop()
        rest.pop()
        theta = 0
        node = base
        while node >= 0:
            reached[node] = 1
            shift[node] = theta
            for k in range(begin[node], begin[node + 1]):
                i = incident[k] + 0
                out = tail[i] == node
                other = head[i] + 0 if out else tail[i] + 0
                if reached[other]:
                    continue
                limit = theta + slack[i] if out else theta - slack[i]
                if idle[i]:
                    rest.append((limit, i))
                elif out and limit < highest[other]:
                    highest[other] = limit
                    heappush(rise, (limit, i))
                elif not out and limit > lowest[other]:
                    lowest[other] = limit
                    heappush(fall, (-limit, i))
            drop_joined(rise, tail, head, reached)
            drop_joined(fall, tail, head, reached)
            i = -1
            if len(rise) > 0:
                theta, i = heappop(rise)
            elif len(fall) > 0:
                falling, i = heappop(fall)
                theta = -falling
            while i < 0 and len(rest) > 0:
                limit, arc = rest.pop()
                if not (reached[tail[arc]] and reached[head[arc]]):
                    theta, i = limit, arc
            node = -1
            if i >= 0:
                chosen[i] = 1
                node = head[i] + 0 if reached[tail[i]] else tail[i] + 0
        reached[base] = 2


def drop_joined(heap: Any, tail: Any, head: Any, reached: Any) -> None:
    """Drop arcs from the top of a heap that join nothing new."""
    while len(heap) > 0 and reached[tail[heap[0][1]]] and reached[head[heap[0][1]]]:
        heappop(heap)

"""The inner loops of the primal network simplex, on bare arrays.

Written so that one text serves twice: as plain Python on lists and compiled on arrays
(`network_compile`). Arrays are changed in place; nothing is returned but numbers.

A basis is a tree over the nodes 0..n-1 and a root n. Each node knows its parent, the arc to
it, the room left on that arc for flow up to the parent and down from it, its place in the
tree's preorder (a doubly linked list, the thread) and the size of its subtree (Glover, Klingman,
Stutz 1974). An artificial arc per node can tie it to the root. Trees are kept strongly
feasible: every node has room towards the root. The leaving arc is the last blocking one of the
cycle, seen from its apex in the direction of the flow, which keeps them so and rules out
cycling (Cunningham 1976). Arcs enter by the best of a block, blocks in turn.

Arc states: 1 at zero flow, -1 at capacity, 0 in the tree or never to enter.
"""

from __future__ import annotations

from typing import Any, NamedTuple

#: Room on an arc without capacity. Flows stay below half of it, so room above UNLIMITED
#: tells such arcs from all others, and sums of room and flow fit 64 bits.
UNCAPACITATED = 2**61
UNLIMITED = 2**60

OPTIMAL, RUNNING, UNBOUNDED = 0, 1, 2
#: Places in the tally that the kernels keep: pivots, those that moved flow, arcs priced, nodes
#: visited, where pricing goes on, and the arc that entered last without limit.
PIVOTS, STEPS, PRICED, VISITED, POSITION, ENTERING = range(6)
#: Which part of the cycle blocks first.
ON_ENTERING, ON_FIRST, ON_SECOND = 0, 1, 2


class Arcs(NamedTuple):
    """Arcs with zero lower limits: those of the problem, then one artificial arc per node."""

    tail: Any  # (m + n,) int32
    head: Any  # (m + n,) int32
    cost: Any  # (m + n,) int64
    capacity: Any  # (m + n,) int64
    state: Any  # (m + n,) int8


class Tree(NamedTuple):
    """A basis; index n is the root."""

    parent: Any  # (n + 1,) int32; -1 for the root
    arc: Any  # (n + 1,) int32; the arc to the parent
    thread: Any  # (n + 1,) int32; next in preorder, from the last back to the root
    back: Any  # (n + 1,) int32; previous in preorder
    size: Any  # (n + 1,) int32; nodes in the subtree
    up: Any  # (n + 1,) int64; room for flow to the parent
    down: Any  # (n + 1,) int64; room for flow from the parent
    potential: Any  # (n + 1,) int64


def walk(
    arcs: Arcs, tree: Tree, active: int, block: int, budget: int, most: int, tally: Any
) -> int:
    """Pivot until optimal, until `budget` arcs and nodes are seen, or `most` pivots made."""
    stop = tally[PRICED] + tally[VISITED] + budget
    while tally[PRICED] + tally[VISITED] < stop and tally[PIVOTS] < most:
        entering, reduced = price(arcs, tree.potential, active, block, tally)
        if entering < 0:
            return OPTIMAL
        forward = arcs.state[entering] > 0
        room = arcs.capacity[entering]
        if not pivot(arcs, tree, entering, forward, room, 0, reduced, tally):
            tally[ENTERING] = entering
            return UNBOUNDED
    return RUNNING


def price(arcs: Arcs, potential: Any, active: int, block: int, tally: Any) -> tuple[int, int]:
    """Find the most negative gain in the next block that has one; -1 at an optimum."""
    tail, head, cost, _, state = arcs
    best = 0
    entering = -1
    position = tally[POSITION]
    left = active
    while left > 0 and entering < 0:
        if position >= active:
            position = 0
        stop = min(position + min(block, left), active)
        for i in range(position, stop):
            gain = state[i] * (cost[i] + potential[tail[i]] - potential[head[i]])
            if gain < best:
                best = gain
                entering = i
        left -= stop - position
        position = stop
    tally[POSITION] = position
    tally[PRICED] += active - left
    return entering, best


def pivot(
    arcs: Arcs,
    tree: Tree,
    entering: int,
    forward: bool,
    room: int,
    used: int,
    reduced: int,
    tally: Any,
) -> bool:
    """Push flow round the cycle that an arc closes; False where nothing limits it.

    `room` is what the arc can take in the direction of the push, `used` what it could give
    back; `reduced` its reduced cost in that direction.
    """
    tail, head, _, _, state = arcs
    first, second = tail[entering], head[entering]
    if not forward:
        first, second = second, first
    length, place, top, apex = blocking(tree, first, second, room, tally)
    if length > UNLIMITED:
        return False
    tally[PIVOTS] += 1
    if length > 0:
        tally[STEPS] += 1
        push(tree, first, second, apex, length)
    if place == ON_ENTERING:
        state[entering] = -1 if forward else 1
        return True
    leaving = tree.arc[top]
    upward = tail[leaving] == top
    if place == ON_FIRST:
        state[leaving] = 1 if upward else -1
        resize(tree, first, second, top, apex)
        rehang(tree, entering, first, second, top, room - length, used + length, -reduced)
    else:
        state[leaving] = -1 if upward else 1
        resize(tree, second, first, top, apex)
        rehang(tree, entering, second, first, top, used + length, room - length, reduced)
    state[entering] = 0
    tally[VISITED] += tree.size[second if place == ON_SECOND else first]
    return True


def blocking(
    tree: Tree, first: int, second: int, room: int, tally: Any
) -> tuple[int, int, int, int]:
    """Find how much the cycle first -> second -> apex -> first takes, and what blocks it last.

    Returns the amount, the part of the cycle, the node below the blocking arc, and the apex.
    """
    size, parent, up, down = tree.size, tree.parent, tree.up, tree.down
    length = room
    place = ON_ENTERING
    top = -1
    second_length = 2 * UNCAPACITATED
    second_top = -1
    visited = 1
    while first != second:
        visited += 1
        if size[first] < size[second]:
            if down[first] < length:
                length = down[first]
                place = ON_FIRST
                top = first
            first = parent[first]
        else:
            if up[second] <= second_length:
                second_length = up[second]
                second_top = second
            second = parent[second]
    if second_top >= 0 and second_length <= length:
        length = second_length
        place = ON_SECOND
        top = second_top
    tally[VISITED] += visited
    return length, place, top, first


def push(tree: Tree, first: int, second: int, apex: int, length: int) -> None:
    """Send `length` down from the apex to `first` and up from `second` to the apex."""
    parent, up, down = tree.parent, tree.up, tree.down
    while first != apex:
        down[first] -= length
        up[first] += length
        first = parent[first]
    while second != apex:
        up[second] -= length
        down[second] += length
        second = parent[second]


def resize(tree: Tree, inner: int, outer: int, top: int, apex: int) -> None:
    """Move the size of the subtree at `top` from its old ancestors to its new ones."""
    parent, size = tree.parent, tree.size
    moved = size[top]
    node = parent[top]
    while node != apex:
        size[node] -= moved
        node = parent[node]
    node = outer
    while node != apex:
        size[node] += moved
        node = parent[node]


def rehang(
    tree: Tree,
    entering: int,
    inner: int,
    outer: int,
    top: int,
    up_room: int,
    down_room: int,
    shift: int,
) -> None:
    """Cut the subtree at `top` off and hang it below `outer` by its node `inner`.

    The path from `inner` to `top` turns round. In the new preorder the subtree of `inner`
    comes first, as it is, then each node of the path with what it has beside the node before.
    Potentials of the subtree change by `shift`.
    """
    parent, arc, thread, back, size, up, down, potential = tree
    moved = size[top]
    before = back[top]
    last = shift_run(thread, potential, inner, size[inner], shift)
    after = thread[last]
    adopter, adopter_arc = outer, entering
    done = 0
    node = inner
    while True:
        old_parent, old_arc = parent[node], arc[node]
        old_up, old_down, old_size = up[node], down[node], size[node]
        parent[node], arc[node] = adopter, adopter_arc
        up[node], down[node] = up_room, down_room
        size[node] = moved - done
        if node == top:
            break
        adopter, adopter_arc = node, old_arc
        up_room, down_room = old_down, old_up
        done = old_size
        thread[last] = old_parent
        back[old_parent] = last
        last = old_parent
        potential[last] += shift
        seen = old_size + 1
        while thread[last] != node:
            last = thread[last]
            potential[last] += shift
            seen += 1
        rest = size[old_parent] - seen
        if rest > 0:
            thread[last] = after
            back[after] = last
            last = shift_run(thread, potential, after, rest, shift)
            after = thread[last]
        node = old_parent
    thread[before] = after
    back[after] = before
    following = thread[outer]
    thread[outer] = inner
    back[inner] = outer
    thread[last] = following
    back[following] = last


def shift_run(thread: Any, potential: Any, node: int, count: int, shift: int) -> int:
    """Shift the potentials of `count` nodes from `node` on in preorder; return the last."""
    potential[node] += shift
    for _ in range(count - 1):
        node = thread[node]
        potential[node] += shift
    return node


def settle(arcs: Arcs, tree: Tree, loose: Any, flow: Any, tally: Any) -> None:
    """Bring arcs outside the tree with flow between their limits to one of them, or into it.

    Each is pushed in the direction that makes the flow no dearer, unless that has no end: then
    back to zero flow, and the walk will find the ray.
    """
    tail, head, cost, capacity, _ = arcs
    for k in range(len(loose)):
        e = loose[k] + 0
        reduced = cost[e] + tree.potential[tail[e]] - tree.potential[head[e]]
        rising, falling = capacity[e] - flow[k], flow[k]
        forward = reduced < 0
        if forward and not pivot(arcs, tree, e, forward, rising, falling, reduced, tally):
            forward = False
        if not forward:
            pivot(arcs, tree, e, forward, falling, rising, -reduced, tally)

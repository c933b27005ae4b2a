"""Graph realisation: a tree whose edges are the rows, in which every column is a path.

Columns come one by one, each connected to those before it. A column is a path in one of the
graphs that have the cycles found so far if and only if an edge f can be added that closes it;
f then ties its new rows to the old ones, and its ends restrict what can still be turned (Bixby
and Wagner 1988, An almost linear-time algorithm for graph realization, whose bookkeeping
differs).

All tests are about ends modulo 2: a part of the tree is a path if and only if exactly two nodes
meet an odd number of its edges. Where the part of a column beyond a marker is a path between
the marker's ends, the marker stands for it. What is left then must be a chain of members, f's
ends in the first and the last; chain and f become one rigid member. Each step takes time in
proportion to the column and to what is joined for good, but for slowly growing factors.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterator

import numpy as np
import scipy.sparse as sp

from ..deadline import Deadline
from ..forms.numbers import Integers
from .cycle_decomposition import BOND, NONE, POLYGON, RIGID, Decomposition

#: Columns between two looks at the clock.
PAUSE = 256
#: The edges of a column by member.
Marked = dict[int, list[int]]
#: Member, marker to the one before, marker to the next, of a chain of members.
Link = tuple[int, int, int]


def realise(
    matrix: sp.csc_array, deadline: Deadline | None = None
) -> tuple[Integers, Integers] | None:
    """Find a tree in which the nonzeros of every column are a path.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n)
        Only the places of the nonzeros count.
    deadline : Deadline, optional

    Returns
    -------
    (ndarray, shape (m, 2), ndarray, shape (n, 2)) of int64, or None
        The ends of the tree edges and those of each column's path; nodes are 0 to m. None if
        there is no such tree, or if the time ran out.

    Examples
    --------
    >>> tree, paths = realise(sp.csc_array([[1, 0, 1], [1, 1, 0], [0, 1, 1]]))
    >>> len(np.unique(tree)), len(np.unique(tree[:2]))
    (4, 3)
    >>> fano = sp.csc_array([[1, 1, 0, 1], [1, 0, 1, 1], [0, 1, 1, 1]])
    >>> realise(fano) is None
    True
    """
    found = _decomposed(matrix, deadline or Deadline(None))
    if found is None:
        return None
    graph, firsts = found
    m, n = matrix.shape
    zero_rows = np.flatnonzero(np.bincount(matrix.indices, minlength=m) == 0)
    zero_columns = m + np.flatnonzero(np.diff(matrix.indptr) == 0)
    ends = _hang_together(graph.graph()[: m + n], firsts, zero_rows, zero_columns)
    return ends[:m], ends[m:]


def is_graphic(matrix: sp.csc_array, deadline: Deadline | None = None) -> bool:
    """Whether there is a tree in which the nonzeros of every column are a path.

    False, too, if the time ran out.

    Examples
    --------
    >>> is_graphic(sp.csc_array([[1, 0, 1], [1, 1, 0], [0, 1, 1]]))
    True
    """
    return _decomposed(matrix, deadline or Deadline(None)) is not None


def _decomposed(matrix: sp.csc_array, deadline: Deadline) -> tuple[Decomposition, list[int]] | None:
    """All graphs with these cycles, and the first row of each block, if there is such a graph."""
    m, n = matrix.shape
    start, rows = matrix.indptr.tolist(), matrix.indices
    graph = Decomposition(m + n)
    placed = bytearray(m)
    firsts: list[int] = []
    for count, column in enumerate(_connected_order(matrix)):
        if count % PAUSE == 0 and deadline.passed:
            return None
        here = rows[start[column] : start[column + 1]].tolist()
        old = [row for row in here if placed[row]]
        new = [row for row in here if not placed[row]]
        for row in new:
            placed[row] = 1
        edge = m + column
        if not old:
            graph.new_member(POLYGON if len(new) > 1 else BOND, {edge, *new})
            firsts.append(new[0])
            continue
        if new:
            f, inner = graph.new_markers()
            graph.new_member(POLYGON, {inner, edge, *new}, inner)
            edge = f
        if not _close(graph, old, edge):
            return None
    return graph, firsts


def _connected_order(matrix: sp.csc_array) -> Iterator[int]:
    """Nonzero columns, block by block, each but a block's first meeting some before it."""
    by_row = matrix.tocsr()
    start, rows = matrix.indptr.tolist(), matrix.indices
    row_start, columns = by_row.indptr.tolist(), by_row.indices
    waiting = bytearray(np.diff(matrix.indptr) > 0)
    fresh = bytearray(b"\1" * matrix.shape[0])
    for first in range(matrix.shape[1]):
        front = deque([first] if waiting[first] else [])
        waiting[first] = 0
        while front:
            column = front.popleft()
            yield column
            for row in rows[start[column] : start[column + 1]].tolist():
                if fresh[row]:
                    fresh[row] = 0
                    for other in columns[row_start[row] : row_start[row + 1]].tolist():
                        if waiting[other]:
                            waiting[other] = 0
                            front.append(other)


def _hang_together(
    ends: Integers, firsts: list[int], zero_rows: Integers, zero_columns: Integers
) -> Integers:
    """Let the graphs of all blocks, zero rows and zero columns share one node; number the nodes."""
    shared = np.full(int(ends.max(initial=0)) + 1, False)
    shared[ends[firsts, 0]] = True
    ends = np.where(shared[ends], NONE, ends)
    ends[zero_rows, 0] = NONE
    ends[zero_columns] = NONE
    return np.unique(ends, return_inverse=True)[1].reshape(-1, 2).astype(np.int64)


def _close(graph: Decomposition, rows: list[int], edge: int) -> bool:
    """Add an edge that closes these rows to a cycle, if that is possible."""
    marked: Marked = {}
    for row in rows:
        marked.setdefault(graph.member(row), []).append(row)
    order = _spanned(graph, marked)
    left = _shorten(graph, order, marked)
    if left is None:
        return False
    if len(left) == 1:
        return _close_within(graph, left[0][0], marked[left[0][0]], edge)
    return _close_across(graph, left, marked, edge)


def _spanned(graph: Decomposition, marked: Marked) -> list[int]:
    """The members between those marked, each after the one above it.

    All climb at once, so that none gets further beyond the place where they meet than the
    longest climb to it.
    """
    below: dict[int, list[int]] = {member: [] for member in marked}
    front = list(marked)
    while len(front) > 1:
        tops = []
        for member in front:
            up = graph.up[member]
            if up == NONE:
                tops.append(member)
                continue
            above = graph.member(graph.twin[up])
            if above in below:
                below[above].append(member)
            else:
                below[above] = [member]
                tops.append(above)
        front = tops
    (top,) = front
    while top not in marked and len(below[top]) == 1:
        (top,) = below[top]
    order = [top]
    for member in order:  # which grows meanwhile
        order += below[member]
    return order


def _shorten(graph: Decomposition, order: list[int], marked: Marked) -> list[Link] | None:
    """Let markers stand for paths between their ends; what is left must be a chain."""
    open_below: dict[int, list[int]] = {member: [] for member in order}
    for member in reversed(order[1:]):
        up = graph.up[member]
        above = graph.member(graph.twin[up])
        if not open_below[member] and _spans(graph, member, marked[member], up):
            marked.setdefault(above, []).append(graph.twin[up])
        else:
            open_below[above].append(member)
    root = order[0]
    while len(open_below[root]) == 1:
        below = open_below[root][0]
        up = graph.up[below]
        if not _spans(graph, root, marked.get(root, []), graph.twin[up]):
            break
        marked.setdefault(below, []).append(up)
        root = below
    arms: list[list[int]] = []
    for member in open_below[root]:
        arms.append([member])
        while len(open_below[arms[-1][-1]]) == 1:
            arms[-1] += open_below[arms[-1][-1]]
        if open_below[arms[-1][-1]]:
            return None
    if len(arms) > 2:
        return None
    one, other = (*arms, [], [])[:2]
    ups = [graph.up[member] for member in one[::-1]]
    downs = [graph.up[member] for member in other]
    before = [NONE, *(graph.twin[up] for up in ups), *downs]
    after = [*ups, *(graph.twin[up] for up in downs), NONE]
    return list(zip([*one[::-1], root, *other], before, after, strict=True))


def _boundary(graph: Decomposition, edges: list[int]) -> set[int]:
    """The nodes that meet an odd number of these edges of a rigid member."""
    odd: set[int] = set()
    for edge in edges:
        odd.symmetric_difference_update(graph.ends[edge])
    return odd


def _spans(graph: Decomposition, member: int, edges: list[int], marker: int) -> bool:
    """Whether these edges can be a path between the ends of a marker that is none of them."""
    kind = graph.kind[member]
    if kind == RIGID:
        return _boundary(graph, edges) == set(graph.ends[marker])
    return len(edges) == (1 if kind == BOND else len(graph.edges[member]) - 1)


def _close_within(graph: Decomposition, member: int, path: list[int], edge: int) -> bool:
    """Add an edge that closes a path within one member."""
    kind = graph.kind[member]
    if kind == RIGID:
        odd = _boundary(graph, path)
        if len(odd) != 2:
            return False
        one, other = odd
        beside = graph.beside[one].get(other)
        if beside is None:
            graph.lay(edge, member, one, other)
        else:
            graph.add_parallel(beside, edge)
        return True
    if kind == BOND or len(path) == 1:
        graph.add_parallel(path[0], edge)
    elif len(path) == len(graph.edges[member]) - 1:
        (rest,) = graph.edges[member].difference(path)
        graph.add_parallel(rest, edge)
    else:
        graph.add_parallel(graph.split(member, path)[1], edge)
    return True


def _close_across(graph: Decomposition, chain: list[Link], marked: Marked, edge: int) -> bool:
    """Add an edge from the first to the last member of a chain, and join them all."""
    cores = []
    for member, before, after in chain:
        path = marked.get(member, [])
        if graph.kind[member] == RIGID:
            nodes = _crossing(graph, path, before, after)
            if nodes is None:
                return False
            for marker in (before, after):
                if marker != NONE:
                    graph.lift(marker)
            cores.append((member, *nodes))
        else:
            cores.append(_core(graph, member, path, before, after))
    gone: dict[int, int] = {}

    def now(node: int) -> int:
        while node in gone:
            node = gone[node]
        return node

    for k in range(1, len(chain)):
        one, other = chain[k - 1][2], chain[k][1]
        leaves, enters = cores[k - 1][2], cores[k][1]
        pairs = (leaves, enters), (sum(graph.ends[one]) - leaves, sum(graph.ends[other]) - enters)
        for pair in pairs:
            kept, lost = graph.unite(now(pair[0]), now(pair[1]))
            gone[lost] = kept
        graph.drop(one)
        graph.drop(other)
    glued = {marker for link in chain[1:] for marker in (link[1], graph.twin[link[1]])}
    (up,) = (graph.up[core] for core, _, _ in cores if graph.up[core] not in glued)
    joined = graph.join([core for core, _, _ in cores], up)
    graph.lay(edge, joined, now(cores[0][1]), now(cores[-1][2]))
    return True


def _crossing(
    graph: Decomposition, path: list[int], before: int, after: int
) -> tuple[int, int] | None:
    """Where a path enters and leaves a rigid member: at the markers, or at an end of its own."""
    odd = _boundary(graph, path)
    if NONE in (before, after):
        turn = odd.intersection(graph.ends[max(before, after)])
        if len(odd) != 2 or len(turn) != 1:
            return None
        (end,), (at,) = odd - turn, turn
        return (end, at) if before == NONE else (at, end)
    for enters in graph.ends[before]:
        for leaves in graph.ends[after]:
            if odd == {enters} ^ {leaves}:
                return enters, leaves
    return None


def _core(
    graph: Decomposition, member: int, path: list[int], before: int, after: int
) -> tuple[int, int, int]:
    """Cut out of a polygon or bond what a path fixes, as a rigid member.

    Path and rest are one edge each in it, markers of members of their own if need be. In a
    polygon the path lies between the markers. Returns the member, and where the path enters
    and leaves it.
    """
    bond = graph.kind[member] == BOND
    along = path[0] if path else NONE
    if len(path) > 1:
        along = graph.split(member, path)[1]
    ring = [edge for edge in (before, NONE if bond else along, after) if edge != NONE]
    core = member
    if len(graph.edges[member]) > len(ring) + 1:
        core, _ = graph.split(member, ring)
    ring += graph.edges[core].difference(ring)
    graph.kind[core], graph.edges[core] = RIGID, set()
    nodes = [graph.new_node() for _ in range(2 if bond else len(ring))]
    for k, edge in enumerate(ring):
        if bond:
            one, other = nodes
        else:
            one, other = nodes[k], nodes[(k + 1) % len(ring)]
        graph.lay(edge, core, one, other)
        if edge in (before, after):
            graph.lift(edge)
    enters = 0 if bond or before == NONE else 1
    leaves = enters + (1 if path else 0)
    return core, nodes[enters], nodes[leaves % len(nodes)]

"""The arrays of a network simplex walk and their upkeep between runs of the kernels."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .network_compile import Kernels
from .network_kernel import POSITION, UNCAPACITATED, Arcs, Tree
from .network_problem import Flags, Whole
from .network_standard import StandardForm

Index = NDArray[np.int32]


@dataclass(eq=False)
class State:
    """A basis over arcs that are kept in an order of their own.

    A *place* is a position in the arrays of arcs: m places of standard arcs, those that may
    enter first, then n of artificial arcs. Nodes have numbers of their own, too.

    Attributes
    ----------
    form : StandardForm
    kernels : Kernels
    arcs : Arcs
    tree : Tree
    order : ndarray, shape (m,), int64
        The standard arc at each place.
    node : ndarray, shape (n + 1,), int64
        The problem's node behind each number; the root is n in both.
    active : int
        Places up to here are priced.
    tally : ndarray, shape (6,), int64
        Counters of the kernels.
    """

    form: StandardForm
    kernels: Kernels
    arcs: Arcs
    tree: Tree
    order: NDArray[np.intp]
    node: NDArray[np.intp]
    active: int
    tally: Whole

    @classmethod
    def empty(cls, form: StandardForm, kernels: Kernels) -> State:
        """Lay out the arcs by their tails, all at zero flow, without a tree yet."""
        m, n = form.tail.size, form.excess.size
        movable = form.capacity > 0
        order = by_node(form.tail, movable)
        arcs = Arcs(
            np.append(form.tail[order], np.full(n, n, np.int32)),
            np.append(form.head[order], np.full(n, n, np.int32)),
            np.zeros(m + n, np.int64),
            np.append(form.capacity[order], np.full(n, UNCAPACITATED)),
            np.append(np.ones(m, np.int8), np.zeros(n, np.int8)),
        )
        links = np.full((4, n + 1), -1, np.int32)
        room = np.zeros((3, n + 1), np.int64)
        tree = Tree(
            links[0],
            links[1],
            links[2],
            links[3],
            np.ones(n + 1, np.int32),
            room[0],
            room[1],
            room[2],
        )
        active = int(np.count_nonzero(movable))
        return cls(
            form, kernels, arcs, tree, order, np.arange(n + 1), active, np.zeros(6, np.int64)
        )

    def place_costs(self, costs: Whole) -> None:
        """Set costs; an artificial arc costs M, with 2 M above any path's cost."""
        m = self.order.size
        self.arcs.cost[:m] = costs[self.order]
        self.arcs.cost[m:] = int(np.abs(costs).max(initial=0)) * self.node.size // 2 + 1
        if self.tree.thread[-1] >= 0:
            self.kernels.set_potentials(self.arcs, self.tree)

    def flow(self) -> Whole:
        """Flow at every place, artificial arcs included."""
        arcs, tree = self.arcs, self.tree
        flow = np.where(arcs.state < 0, arcs.capacity, 0)
        below = np.arange(self.node.size - 1)
        inside = tree.arc[:-1]
        flow[inside] = np.where(arcs.tail[inside] == below, tree.down[:-1], tree.up[:-1])
        return flow

    def unmet(self) -> int:
        """Flow that still goes over artificial arcs, all of which are in the tree or empty."""
        arcs, tree = self.arcs, self.tree
        below = np.flatnonzero(tree.arc[:-1] >= self.order.size)
        leaves = arcs.tail[tree.arc[below]] == below
        return int(np.where(leaves, tree.down[below], tree.up[below]).sum())

    def prefer(self, movable: Flags) -> None:
        """Price these places only, by their tails."""
        m = self.order.size
        order = by_node(self.form.tail[self.order], movable)
        new = np.arange(self.arcs.tail.size, dtype=np.int32)
        new[order] = np.arange(m)
        for column in self.arcs:
            column[:m] = column[:m][order]
        self.order = self.order[order]
        self.tree.arc[:-1] = new[self.tree.arc[:-1]]
        self.active = int(np.count_nonzero(movable))
        self.tally[POSITION] = 0

    def trees(self) -> tuple[int, Index, Index]:
        """Return how many trees hang on the root, which one holds each number, and the preorder."""
        hung = np.empty(self.node.size, np.int32)
        sequence = np.empty(self.node.size, np.int32)
        return int(self.kernels.label(self.tree, hung, sequence)), hung, sequence

    def renumber(self) -> None:
        """Number the nodes in preorder, so that subtrees lie side by side in memory."""
        _, _, sequence = self.trees()
        n = sequence.size - 1
        new = np.empty(n + 1, np.int32)
        new[sequence] = np.arange(n + 1)
        self.node = self.node[sequence]
        for column in self.tree:
            column[:] = column[sequence]
        self.tree.parent[:n] = new[self.tree.parent[:n]]
        self.tree.thread[:] = np.roll(np.arange(n + 1), -1)
        self.tree.back[:] = np.roll(np.arange(n + 1), 1)
        self.arcs.tail[:] = new[self.arcs.tail]
        self.arcs.head[:] = new[self.arcs.head]


def by_node(ends: Index, first: Flags) -> NDArray[np.intp]:
    """Order places by node, those flagged before all others; near-linear in time."""
    last = int(ends.max(initial=0)) + 1
    key = np.where(first, ends, last)
    # NumPy sorts 16-bit keys by counting.
    return np.argsort(key.astype(np.uint16 if last < 2**16 else np.int32), kind="stable")

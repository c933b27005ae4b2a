"""A graph up to 2-isomorphism: the tree of its polygons, bonds and rigid parts.

Two graphs have the same cycles if and only if one becomes the other by splitting and joining at
cut nodes and by turning parts over at pairs of nodes (Whitney 1933). Cut at all such pairs, a
2-connected graph falls apart into members: polygons (cycles), bonds (parallel edges) and rigid
(3-connected) graphs, glued to a tree along pairs of twin markers (Tutte 1966). What the cycles
leave open is the order of the edges in each polygon and which way round twins are glued. So a
polygon or bond is only a set of edges here; edges of rigid members have ends.
"""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
import scipy.sparse as sp
from scipy.sparse.csgraph import connected_components

from ..forms.numbers import Integers

POLYGON, BOND, RIGID = range(3)
#: No edge, member or node.
NONE = -1


class Decomposition:
    """Members and their edges, all by index.

    Attributes
    ----------
    twin : list of int
        Per edge: the marker it is glued to, or NONE for an edge of the graph itself.
    ends : list of (int, int)
        Per edge: its nodes, if it lies in a rigid member.
    kind, edges, up : list
        Per member: POLYGON, BOND or RIGID; the set of edges of a polygon or bond; the marker
        towards the root of the tree of members, or NONE.
    beside : list of dict
        Per node of a rigid member: the edge to each neighbour.

    Examples
    --------
    >>> triangle = Decomposition(3)
    >>> _ = triangle.new_member(POLYGON, {0, 1, 2})
    >>> len(np.unique(triangle.graph()))
    3
    """

    def __init__(self, size: int) -> None:
        self.twin = [NONE] * size
        self.ends = [(NONE, NONE)] * size
        self._member = [NONE] * size
        self.kind: list[int] = []
        self.edges: list[set[int]] = []
        self.up: list[int] = []
        self._joined: list[int] = []
        self.beside: list[dict[int, int]] = []

    def member(self, edge: int) -> int:
        """The member of an edge, after all that members were joined to others."""
        joined, place = self._joined, self._member[edge]
        while joined[place] != place:
            joined[place] = joined[joined[place]]
            place = joined[place]
        return place

    def new_member(self, kind: int, edges: set[int], up: int = NONE) -> int:
        """Make a polygon or bond of these edges."""
        place = len(self.kind)
        self.kind.append(kind)
        self.edges.append(edges)
        self.up.append(up)
        self._joined.append(place)
        for edge in edges:
            self._member[edge] = place
        return place

    def new_markers(self) -> tuple[int, int]:
        """Make two twins that lie nowhere yet."""
        first = len(self.twin)
        self.twin += [first + 1, first]
        self.ends += [(NONE, NONE)] * 2
        self._member += [NONE] * 2
        return first, first + 1

    def new_node(self) -> int:
        """Make a node for rigid members."""
        self.beside.append({})
        return len(self.beside) - 1

    def lay(self, edge: int, member: int, one: int, other: int) -> None:
        """Put an edge between two nodes of a rigid member."""
        self._member[edge], self.ends[edge] = member, (one, other)
        self.beside[one][other] = self.beside[other][one] = edge

    def lift(self, edge: int) -> None:
        """Take an edge of a rigid member away from between its ends."""
        one, other = self.ends[edge]
        del self.beside[one][other], self.beside[other][one]

    def split(self, member: int, moved: Iterable[int]) -> tuple[int, int]:
        """Move some edges of a polygon or bond to a member of their own.

        Returns the new member, and the marker that takes their place.
        """
        here, there = self.new_markers()
        moved = set(moved)
        self.edges[member] -= moved
        self.edges[member].add(here)
        self._member[here] = member
        up = self.up[member]
        carries = up in moved
        if carries:
            self.up[member] = here
        return self.new_member(self.kind[member], moved | {there}, up if carries else there), here

    def add_parallel(self, edge: int, new: int) -> None:
        """Put a new edge beside one that is there: into its bond, or one made for both."""
        for beside in (edge, self.twin[edge]):
            if beside != NONE and self.kind[self.member(beside)] == BOND:
                self._add(self.member(beside), new)
                return
        member = self.member(edge)
        here, there = self.new_markers()
        if self.kind[member] == RIGID:
            self.lift(edge)
            self.lay(here, member, *self.ends[edge])
        else:
            self.edges[member].remove(edge)
            self._add(member, here)
        above = self.up[member] == edge
        if above:
            self.up[member] = here
        self.new_member(BOND, {edge, there, new}, edge if above else there)

    def _add(self, member: int, edge: int) -> None:
        self.edges[member].add(edge)
        self._member[edge] = member

    def unite(self, one: int, other: int) -> tuple[int, int]:
        """Make one node of two; returns the one that is left and the one that is gone."""
        beside = self.beside
        if len(beside[one]) < len(beside[other]):
            one, other = other, one
        for across, edge in beside[other].items():
            del beside[across][other]
            beside[across][one] = beside[one][across] = edge
            self.ends[edge] = (one, across)
        beside[other] = {}
        return one, other

    def join(self, members: list[int], up: int) -> int:
        """Make one rigid member of several, whose nodes are united already."""
        for member in members[1:]:
            self._joined[member] = members[0]
        self.up[members[0]] = up
        return members[0]

    def drop(self, marker: int) -> None:
        """Forget a marker along which members were joined."""
        self._member[marker] = NONE

    def graph(self) -> Integers:
        """One graph of those meant, as the two nodes of each edge, shape (edges, 2).

        Node numbers leave gaps; each tree of members is a component, edges without a member
        have nodes of their own.
        """
        ends = np.array(self.ends, dtype=np.int64).reshape(-1, 2)
        count = len(self.beside)
        for member, edges in enumerate(self.edges):
            if self.kind[member] == RIGID:
                continue
            place = np.array(list(edges), dtype=np.int64)
            ring = np.arange(place.size)
            if self.kind[member] == BOND:
                ends[place] = (count, count + 1)
                count += 2
            else:
                ends[place] = count + np.column_stack((ring, (ring + 1) % place.size))
                count += place.size
        there = np.array(self._member, dtype=np.int64) != NONE
        bare = np.flatnonzero(~there)
        ends[bare] = count + np.arange(2 * bare.size).reshape(-1, 2)
        count += 2 * bare.size
        twin = np.array(self.twin, dtype=np.int64)
        glued = np.flatnonzero(there & (twin > np.arange(twin.size)))
        one, other = ends[glued].ravel(), ends[twin[glued]].ravel()
        links = sp.coo_array((np.ones(one.size), (one, other)), shape=(count, count))
        return np.asarray(connected_components(links.tocsr(), directed=False)[1][ends])

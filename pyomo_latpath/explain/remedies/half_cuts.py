"""The search for {0, 1/2} cuts that a point violates, by elimination over GF(2).

Halving a sum of rows gains 1/2 if its right side is odd, and loses half of the slack that its
rows and bounds have at the point (Caprara and Fischetti 1996). So wanted are sets of rows whose
sum is even in every column, odd on the right, with a total slack below 1. Columns at a bound
cost nothing to make even; each other column is a generator of its own, at the cost of its
distance to the nearer bound. Over GF(2) the generators are vectors: those that turn out
dependent, taken cheapest first, close circuits with a cheapest basis, and the circuits with an
odd right side are the candidates. Where rows have two odd columns the circuits are the odd
cycles of a graph; eliminated in the order of a breadth-first search they are short.
"""

from __future__ import annotations

import math
from collections import deque
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from ...deadline import Deadline
from ...forms.linear_form import Floats
from .cuts import Cut, System, excess, halved

#: What counts as no slack, and by how much a point must exceed a cut.
NEAR = 1e-6
#: Orders of elimination, each a breadth-first search from another column.
MOST_ORDERS = 8
#: Share of the time for the search; the rest is for the cuts.
SEARCH_SHARE = 0.6
#: Odd circuits of one order that are looked at, and even ones that may shorten them.
MOST_ODD, MOST_EVEN = 200, 50


@dataclass(frozen=True, eq=False)
class _Generators:
    """Vectors over GF(2), as Python integers: bit 0 the right side, then one bit a column.

    The first generators are row sides, (row, sign) each; one follows for each column that is
    off its bounds. Rows that are cuts themselves are used with reluctance: what follows from the
    model's own rows is easier to read, and as a rule stronger.
    """

    sides: list[tuple[int, int]]
    vectors: list[int]
    costs: list[float]
    reluctant: list[bool]
    neighbours: list[list[int]]


def half_cuts(
    system: System, x: Floats, *, most: int = 10, deadline: Deadline | None = None
) -> list[Cut]:
    """Find {0, 1/2} cuts that cut a point off.

    Parameters
    ----------
    system : System
    x : ndarray, shape (n,), float64
        A point within all rows and bounds, as a rule a fractional vertex.
    most : int
        So many cuts at most.
    deadline : Deadline, optional
        When it passes, what was found until then is returned.

    Returns
    -------
    list of Cut
        Smallest total slack first, then fewest rows that are cuts, then fewest rows; each has a
        row that those before it do without. One is found wherever there is one without any
        slack; otherwise an empty list proves nothing.

    Examples
    --------
    >>> import scipy.sparse as sp
    >>> system = System(sp.csr_array([[1.0, 1, 0], [0, 1, 1], [1, 0, 1]]), np.full(3, -np.inf),
    ...                 np.ones(3), np.zeros(3), np.ones(3), np.full(3, True))
    >>> [(cut.coefficients, cut.side) for cut in half_cuts(system, np.full(3, 0.5))]
    [((1, 1, 1), 1)]
    """
    deadline = deadline or Deadline(None)
    generators = _generators(system, x)
    candidates: dict[int, tuple[float, int, int]] = {}
    search = deadline.within(SEARCH_SHARE * deadline.left)
    for order in _orders(generators):
        if search.passed:
            break
        for members in _odd_circuits(generators, order, search):
            candidates[members] = _weight(generators, members)
    found: list[Cut] = []
    used: set[int] = set()
    for members in sorted(candidates, key=lambda each: (candidates[each], each)):
        if len(found) == most or deadline.passed:
            break
        sides = [generators.sides[k] for k in _bits(members) if k < len(generators.sides)]
        if used.issuperset(row for row, _ in sides):
            continue
        cut = halved(system, sides, x)
        if cut is not None and excess(cut, x) > NEAR:
            found.append(cut)
            used.update(cut.rows)
    return found


def _generators(system: System, x: Floats) -> _Generators:
    """Gather the row sides with a slack below 1, and the columns off their bounds."""
    below, above = x - system.col_lower, system.col_upper - x
    distance = np.where(system.integer, np.minimum(below, above), np.inf)
    nearer = np.where(below <= above, system.col_lower, system.col_upper)
    nearer = np.where(np.isfinite(nearer), nearer, 0.0)
    off = np.flatnonzero(distance > NEAR)
    bit_of = {j: k for k, j in enumerate(off.tolist())}
    activity = system.matrix @ x
    sides: list[tuple[int, int]] = []
    vectors: list[int] = []
    costs: list[float] = []
    reluctant: list[bool] = []
    neighbours: list[list[int]] = []
    for sign, limit in ((1, system.row_upper), (-1, system.row_lower)):
        slack = np.maximum(sign * (limit - activity), 0.0)
        for row in np.flatnonzero(slack < 1 - NEAR).tolist():
            if sign < 0 and system.row_lower[row] == system.row_upper[row]:
                continue  # an equation is the same over GF(2) from either side
            odd = [(j, a) for j, a in system.terms(row) if a % 2]
            right = int(limit[row]) + sum(int(nearer[j]) for j, _ in odd)
            bits = [bit_of[j] for j, _ in odd if j in bit_of]
            sides.append((row, sign))
            vectors.append((right & 1) | sum(2 << k for k in bits))
            costs.append(float(slack[row]) if slack[row] > NEAR else 0.0)
            reluctant.append(row >= slack.size - system.cuts)
            neighbours.append(bits)
    for j, k in bit_of.items():
        if distance[j] < 1 - NEAR:
            vectors.append(2 << k)
            costs.append(float(distance[j]))
            reluctant.append(False)
            neighbours.append([k])
    return _Generators(sides, vectors, costs, reluctant, neighbours)


def _orders(generators: _Generators) -> Iterable[list[int]]:
    """Orders of elimination: cheap generators first, equally cheap ones from near to far."""
    holders: dict[int, list[int]] = {}
    for g, bits in enumerate(generators.neighbours):
        for k in bits:
            holders.setdefault(k, []).append(g)
    columns = sorted(holders)
    step = max(1, math.ceil(len(columns) / MOST_ORDERS))
    for start in columns[::step] or [0]:
        rank = _ranks(generators, holders, start)
        places = zip(generators.costs, generators.reluctant, rank, range(len(rank)), strict=True)
        yield [g for *_, g in sorted(places)]


def _ranks(generators: _Generators, holders: dict[int, list[int]], start: int) -> list[int]:
    """Place of each generator in a breadth-first search over columns, one part after another."""
    rank = [-1] * len(generators.vectors)
    seen: set[int] = set()
    place = 0
    for root in (start, *holders):
        if root in seen:
            continue
        front = deque([root])
        seen.add(root)
        while front:
            for g in holders.get(front.popleft(), ()):
                if rank[g] >= 0:
                    continue
                rank[g], place = place, place + 1
                fresh = [k for k in generators.neighbours[g] if k not in seen]
                seen.update(fresh)
                front.extend(fresh)
    return rank


def _odd_circuits(generators: _Generators, order: list[int], deadline: Deadline) -> list[int]:
    """Eliminate, and return the circuits with an odd right side, as sets of bits."""
    basis: dict[int, tuple[int, int]] = {}
    odd: list[int] = []
    even: list[int] = []
    for g in order:
        if deadline.passed:
            break
        vector, members = generators.vectors[g], 1 << g
        while vector > 1:
            pivot = vector.bit_length()
            held = basis.get(pivot)
            if held is None:
                basis[pivot] = vector, members
                break
            vector ^= held[0]
            members ^= held[1]
        else:
            (odd if vector else even).append(members)
    weights = sorted((_weight(generators, members), members) for members in odd)
    cheap = [members for weight, members in weights[:MOST_ODD] if weight[0] < 1 - NEAR]
    even = sorted(even, key=int.bit_count)[:MOST_EVEN]
    return [_shortened(generators, members, even) for members in cheap if not deadline.passed]


def _shortened(generators: _Generators, members: int, even: list[int]) -> int:
    """Add even circuits as long as that makes an odd one cheaper or smaller."""
    weight = _weight(generators, members)
    for circuit in even:
        if circuit & members:
            other = _weight(generators, members ^ circuit)
            if other < weight:
                members, weight = members ^ circuit, other
    return members


def _weight(generators: _Generators, members: int) -> tuple[float, int, int]:
    """Total slack, then the number of cuts, then the number of all generators."""
    total, cuts = 0.0, 0
    for g in _bits(members):
        total += generators.costs[g]
        cuts += generators.reluctant[g]
    return round(total, 9), cuts, members.bit_count()


def _bits(members: int) -> Iterable[int]:
    while members:
        low = members & -members
        yield low.bit_length() - 1
        members ^= low

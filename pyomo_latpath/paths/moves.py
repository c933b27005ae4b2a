"""The way from one whole plan to another in elementary moves.

Let M = [A, -I] tie plans x to the activities A x of the rows. The difference d of two feasible
plans and their activities lies in the kernel of M, and is a sum of elementary vectors of that
kernel (those of least support) that agree with d in sign wherever they are not 0 (Rockafellar
1969, The elementary vectors of a subspace of R^N; Schrijver 1986, section 19.1, for flows). As
none of them undoes what another does, every part of the sum leads to a plan between the two.

If A is totally unimodular, or [A, slacks] of its equality system unimodular, elementary vectors
have entries in {0, 1, -1}, so whole plans stay whole. Each one that is taken off as often as it
fits ends a column or activity of d and lowers the dimension of the kernel on what is left: n
vectors suffice.

Two ways to find them. They are vertices of the program

    maximise gain . z   subject to   M z = 0,  z agrees with d in sign,  |z_columns|_1 = 1,

so that the best gain per unit of change comes first. What is found is held against A in whole
numbers, so nothing rests on a certificate: where no whole vector fits, the rest is one move. On
network matrices d is a circulation of the tree's and the columns' arcs, and elementary vectors
are its cycles: walking these takes time in proportion to their length, where programs take too
long, but does not look for the best.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.numbers import common_scale, nearby_fraction
from ..highs import LinearProgram
from .network_oracle import NetworkStructure

Floats = NDArray[np.float64]
Whole = NDArray[np.int64]

#: Entries of a vertex below this are HiGHS's zeros; how near their ratios come to fractions, and
#: the largest common denominator of these.
NOISE, NEAR, LARGEST_SCALE = 1e-9, 1e-6, 1000
#: Differing columns from which on cycles are walked where there are any.
MANY = 500
#: Programs times their columns at most; it bounds the time, to about ten seconds.
MOST_EFFORT = 3 * 10**6


@dataclass(frozen=True, eq=False)
class Change:
    """Part of the difference of two plans.

    Attributes
    ----------
    columns : ndarray, shape (k,), int64
        Ascending.
    amounts : ndarray, shape (k,), float64
        By how much each of them changes; never 0.
    """

    columns: Whole
    amounts: Floats


def elementary_changes(
    matrix: sp.csc_array,
    difference: Floats,
    cost: Floats,
    structure: NetworkStructure | None = None,
    deadline: Deadline | None = None,
) -> list[Change]:
    """Split the difference of two whole plans into elementary changes.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), float64
        Whole numbers.
    difference : ndarray, shape (n,), float64
        Whole; the later plan less the earlier one.
    cost : ndarray, shape (n,), float64
        To be minimised; it only decides which of several ways to split is taken.
    structure : NetworkStructure, optional
        Of a network matrix; used where many columns differ.
    deadline : Deadline, optional
        What is not split by then stays together.

    Returns
    -------
    list of Change
        Their sum is the difference. For any set of them, from the earlier plan or backwards
        from the later one, all columns and activities stay between those of the two plans.

    Examples
    --------
    >>> changes = elementary_changes(sp.csc_array([[1.0, 1, 1, 1]]), np.array([-2.0, 2, -1, 1]),
    ...                              np.array([5.0, 1, 2, 4]))
    >>> [(change.columns.tolist(), change.amounts.tolist()) for change in changes]
    [([0, 1], [-2.0, 2.0]), ([2, 3], [-1.0, 1.0])]
    """
    if structure is not None and difference.size > MANY:
        return _by_cycles(matrix, difference, structure)
    return _by_programs(matrix, difference, cost, deadline or Deadline(None))


def _by_cycles(
    matrix: sp.csc_array, difference: Floats, structure: NetworkStructure
) -> list[Change]:
    """Walk the cycles: a column's arc is taken by its change, and its tree path gives way."""
    n = difference.size
    arcs = np.concatenate([structure.arcs, structure.tree])
    flow = np.concatenate([difference, -(matrix @ difference)])
    used = np.flatnonzero(flow)
    ends = np.where(flow[used, None] > 0, arcs[used], arcs[used, ::-1])
    amounts = np.abs(flow[used]).astype(np.int64).tolist()
    changes = []
    for places, amount in cycles(ends[:, 0].tolist(), ends[:, 1].tolist(), amounts):
        around = used[places]
        columns = np.sort(around[around < n])
        changes.append(Change(columns, amount * np.sign(difference[columns])))
    return changes


def cycles(
    tails: list[int], heads: list[int], amounts: list[int]
) -> Iterator[tuple[list[int], int]]:
    """Split a circulation on arcs into flows around simple cycles.

    Walk on along arcs that still carry flow; where the walk meets itself, a cycle is closed and
    its least flow taken off, which empties an arc. Ahuja, Magnanti, Orlin (1993), theorem 3.5.

    Parameters
    ----------
    tails, heads, amounts : list of int
        Of each arc, with a positive flow; what enters a node also leaves it.

    Yields
    ------
    arcs : list of int
    amount : int

    Raises
    ------
    ValueError
        For a node that takes in more than it gives out.

    Examples
    --------
    >>> list(cycles([0, 1, 1], [1, 0, 0], [3, 2, 1]))
    [([0, 2], 1), ([0, 1], 2)]
    """
    left = list(amounts)
    outgoing: dict[int, list[int]] = {}
    for arc, tail in enumerate(tails):
        outgoing.setdefault(tail, []).append(arc)
    for start in outgoing:
        walk: list[int] = []
        place = {start: 0}
        node = start
        while True:
            ahead = outgoing.get(node, [])
            while ahead and not left[ahead[-1]]:
                ahead.pop()
            if not ahead:
                break
            walk.append(ahead[-1])
            node = heads[walk[-1]]
            if node not in place:
                place[node] = len(walk)
                continue
            cycle = walk[place[node] :]
            del walk[place[node] :]
            for arc in cycle[:-1]:
                del place[heads[arc]]
            amount = min(left[arc] for arc in cycle)
            for arc in cycle:
                left[arc] -= amount
            yield cycle, amount
        if walk:
            raise ValueError(f"node {node} takes in more than it gives out")


def _by_programs(
    matrix: sp.csc_array, difference: Floats, cost: Floats, deadline: Deadline
) -> list[Change]:
    """Take vertex after vertex of the program above, each as often as it fits."""
    n = difference.size
    sign, activity = np.sign(difference), matrix @ difference
    system, program = _program(matrix, sign, activity, cost)
    left = np.abs(np.concatenate([difference, activity[activity != 0]]))
    changes = []
    for _ in range(MOST_EFFORT // max(1, left.size)):
        if deadline.passed or not left[:n].any():
            break
        program.set_col_bounds(np.zeros(left.size), np.where(left > 0, np.inf, 0.0))
        result = program.solve(deadline=deadline)
        vector = _whole_multiple(result.x) if result.status == "optimal" else None
        if vector is None or (system @ vector).any():
            break
        times = np.floor((left[vector > 0] / vector[vector > 0]).min())
        if times < 1:
            break
        left -= times * vector
        columns = np.flatnonzero(vector[:n])
        changes.append(Change(columns, (times * sign * vector[:n])[columns]))
    rest = np.flatnonzero(left[:n])
    if rest.size:
        changes.append(Change(rest, (sign * left[:n])[rest]))
    return changes


def _program(
    matrix: sp.csc_array, sign: Floats, activity: Floats, cost: Floats
) -> tuple[sp.csc_array, LinearProgram]:
    """The system M z = 0 in absolute values, and the program over it."""
    m, n = matrix.shape
    moving = np.flatnonzero(activity)
    slacks = sp.csc_array(
        (-np.sign(activity[moving]), (moving, np.arange(moving.size))), shape=(m, moving.size)
    )
    system = sp.hstack([matrix @ sp.diags_array(sign), slacks], format="csc")
    counted = np.concatenate([np.ones(n), np.zeros(moving.size)])
    sides = np.concatenate([np.zeros(m), [1.0]])
    gain = np.concatenate([cost * sign, np.zeros(moving.size)])
    program = LinearProgram(
        sp.vstack([system, sp.csr_array(counted[None, :])], format="csc"),
        sides,
        sides,
        np.zeros(n + moving.size),
        np.full(n + moving.size, np.inf),
        gain / max(1.0, float(np.abs(gain).max(initial=0.0))),
    )
    return system, program


def _whole_multiple(x: Floats) -> Floats | None:
    """The least whole multiple of a vertex, unless its numbers are large."""
    entries = np.where(x > NOISE, x, 0.0)
    if not entries.any():
        return None
    ratio = entries / entries[entries > 0].min()
    scale = common_scale([nearby_fraction(value, NEAR) for value in np.unique(ratio).tolist()])
    if scale > LARGEST_SCALE:
        return None
    vector = np.rint(ratio * scale)
    return vector / np.gcd.reduce(vector.astype(np.int64))

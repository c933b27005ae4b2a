"""Any minimum-cost flow problem as one with zero lower limits, and the way back.

An arc with a lower limit is shifted to it; one with a capacity only is turned round and
measured from there; one with neither is split into two, one each way (Ahuja, Magnanti, Orlin
1993, section 2.4). Here also the numbers are held against 64 bits, before any of them is used.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from .network_kernel import UNCAPACITATED, UNLIMITED
from .network_problem import NO_LIMIT, Flags, FlowProblem, TooLargeError, Whole

#: Nodes and arcs are counted in 32 bits.
MOST_INDEX = 2**31 - 2
#: Costs along any cycle, artificial arcs included, stay below four times this.
MOST_COST = 2**60


@dataclass(frozen=True, eq=False)
class StandardForm:
    """Arcs with flow f in 0..capacity behind a problem's x: x = offset + sum of sign * f.

    Attributes
    ----------
    tail, head : ndarray, shape (k,), int32
    capacity : ndarray, shape (k,), int64
        UNCAPACITATED for no limit.
    origin : ndarray, shape (k,), int64
        The problem's arc behind each arc.
    sign : ndarray, shape (k,), int64
        1 or -1.
    offset : ndarray, shape (m,), int64
    excess : ndarray, shape (n,), int64
        Supply left when all f are 0.
    """

    tail: NDArray[np.int32]
    head: NDArray[np.int32]
    capacity: Whole
    origin: Whole
    sign: Whole
    offset: Whole
    excess: Whole

    def costs(self, cost: Whole) -> Whole:
        """Costs of the standard arcs.

        Raises
        ------
        TooLargeError
            Where potentials might leave 64 bits.
        """
        if (_size(cost).max(initial=0.0) + 1) * (self.excess.size + 1) >= MOST_COST:
            raise TooLargeError("costs times nodes exceed what 64-bit potentials hold")
        return self.sign * cost[self.origin]

    def flow(self, x: Whole) -> Whole:
        """Flows of the standard arcs for x, clipped to their limits."""
        far = np.clip(x, -UNLIMITED, UNLIMITED)[self.origin] - self.offset[self.origin]
        return np.clip(self.sign * far, 0, self.capacity)

    def original(self, flow: Any) -> Whole:
        """Flow of the problem's arcs (a circulation without `offset` goes the same way)."""
        x = np.zeros(self.offset.size, np.int64)
        np.add.at(x, self.origin, self.sign * flow)
        return x

    def original_flags(self, flags: Flags) -> Flags:
        """Whether any standard arc of a problem's arc is flagged."""
        return np.bincount(self.origin, weights=flags, minlength=self.offset.size) > 0

    def part(self, flags: Flags, x: Whole) -> Flags:
        """Flags of the problem's arcs as flags of standard arcs; of two halves, x's side."""
        halves = np.bincount(self.origin, minlength=self.offset.size) == 2
        away = halves & (x < 0)
        chosen = np.ones(self.origin.size, np.bool_)
        chosen[: x.size] = ~away
        chosen[x.size :] = away[self.origin[x.size :]]
        return flags[self.origin] & chosen


def standard_form(problem: FlowProblem) -> StandardForm:
    """Bring a problem to standard form.

    Raises
    ------
    TooLargeError
        Where flows might leave 64 bits, or there are too many nodes or arcs.
    """
    lower, capacity = problem.lower, problem.capacity
    no_lower, no_upper = lower == -NO_LIMIT, capacity == NO_LIMIT
    offset = np.where(no_lower, np.where(no_upper, 0, capacity), lower)
    total = _size(problem.supply).sum() + 2 * _size(offset).sum()
    width = np.where(no_lower | no_upper, 0.0, capacity.astype(float) - lower.astype(float))
    if total + width.sum() >= UNLIMITED:
        raise TooLargeError("supplies and limits add up to more than 64-bit flows hold")
    origin = np.arange(lower.size)
    sign = np.where(no_lower & ~no_upper, -1, 1)
    free = np.flatnonzero(no_lower & no_upper)
    origin, sign = np.concatenate([origin, free]), np.concatenate([sign, np.full(free.size, -1)])
    if origin.size + problem.supply.size > MOST_INDEX:
        raise TooLargeError("more nodes and arcs than 32 bits count")
    room = np.where(no_lower | no_upper, UNCAPACITATED, np.where(no_lower, 0, capacity) - offset)
    excess = problem.supply.copy()
    np.subtract.at(excess, problem.tail, offset)
    np.add.at(excess, problem.head, offset)
    tail, head = problem.tail[origin], problem.head[origin]
    return StandardForm(
        np.where(sign > 0, tail, head).astype(np.int32),
        np.where(sign > 0, head, tail).astype(np.int32),
        room[origin],
        origin,
        sign,
        offset,
        excess,
    )


def _size(values: Whole) -> NDArray[np.float64]:
    """Absolute values, safe from overflow."""
    return np.abs(values.astype(np.float64))

"""Any minimum-cost flow problem as one with zero lower limits, and the way back.

An arc with a lower limit is shifted to it; one with a capacity only is turned round and
measured from there; one with neither is split into two, one each way (Ahuja, Magnanti, Orlin
1993, section 2.4). Here also the numbers are held against 64 bits, before any of them is used.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
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
        largest = max(abs(int(cost.max(initial=0))), abs(int(cost.min(initial=0))))
        if (largest + 1) * (self.excess.size + 1) >= MOST_COST:
            raise TooLargeError("costs times nodes exceed what 64-bit potentials hold")
        return cost if self._same else self.sign * cost[self.origin]

    def flow(self, x: Whole) -> Whole:
        """Flows of the standard arcs for x, clipped to their limits."""
        far = np.clip(x, -UNLIMITED, UNLIMITED) - self.offset
        return np.clip(self.sign * far[self.origin], 0, self.capacity)

    def original(self, flow: Any) -> Whole:
        """Flow of the problem's arcs, without `offset` (so it serves circulations, too)."""
        if self._same:
            return flow.astype(np.int64)
        x = np.zeros(self.offset.size, np.int64)
        np.add.at(x, self.origin, self.sign * flow)
        return x

    def original_flags(self, flags: Flags) -> Flags:
        """Whether any standard arc of a problem's arc is flagged."""
        if self._same:
            return flags
        return np.bincount(self.origin, weights=flags, minlength=self.offset.size) > 0

    def part(self, flags: Flags, x: Whole) -> Flags:
        """Flags of the problem's arcs as flags of standard arcs; of two halves, x's side."""
        m = self.offset.size
        away = (np.bincount(self.origin, minlength=m) == 2) & (x < 0)
        chosen = np.append(~away, away[self.origin[m:]])
        return flags[self.origin] & chosen

    @property
    def _same(self) -> bool:
        """Whether the arcs are the problem's, none turned round or split."""
        return self.sign.size == self.offset.size and self.sign.min(initial=1) > 0


def standard_form(problem: FlowProblem) -> StandardForm:
    """Bring a problem to standard form.

    Raises
    ------
    TooLargeError
        Where flows might leave 64 bits, or there are too many nodes or arcs.
    """
    no_lower, no_upper = problem.lower == -NO_LIMIT, problem.capacity == NO_LIMIT
    turned, free = no_lower & ~no_upper, np.flatnonzero(no_lower & no_upper)
    offset = np.where(no_lower, np.where(turned, problem.capacity, 0), problem.lower)
    far = no_lower | no_upper
    width = np.where(far, 0.0, problem.capacity.astype(np.float64) - problem.lower)
    total = np.abs(problem.supply.astype(np.float64)).sum() + width.sum()
    if total + 2 * np.abs(offset.astype(np.float64)).sum() >= UNLIMITED:
        raise TooLargeError("supplies and limits add up to more than 64-bit flows hold")
    if offset.size + free.size + problem.supply.size > MOST_INDEX:
        raise TooLargeError("more nodes and arcs than 32 bits count")
    room = np.where(far, UNCAPACITATED, problem.capacity - np.where(far, 0, offset))
    excess = problem.supply.copy()
    shifted = np.flatnonzero(offset)
    np.subtract.at(excess, problem.tail[shifted], offset[shifted])
    np.add.at(excess, problem.head[shifted], offset[shifted])
    tail, head = problem.tail.astype(np.int32), problem.head.astype(np.int32)
    if turned.any():
        tail, head = np.where(turned, head, tail), np.where(turned, tail, head)
    form = StandardForm(
        tail, head, room, np.arange(offset.size), np.where(turned, -1, 1), offset, excess
    )
    return _with_halves(form, free) if free.size else form


def _with_halves(form: StandardForm, free: NDArray[np.intp]) -> StandardForm:
    """Add the backward halves of arcs without limits."""
    return replace(
        form,
        tail=np.append(form.tail, form.head[free]),
        head=np.append(form.head, form.tail[free]),
        capacity=np.append(form.capacity, form.capacity[free]),
        origin=np.append(form.origin, free),
        sign=np.append(form.sign, np.full(free.size, -1)),
    )

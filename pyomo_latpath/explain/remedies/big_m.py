"""Big-M rows made tight: the smallest coefficient of a binary column that keeps every whole plan.

A row sum a x + a_y y <= b says sum a x <= b where y = 0 and sum a x <= b - a_y where y = 1. The
larger of these sides, M, may shrink to the most that sum a x can be in that state anyway
(Savelsbergh 1994, Preprocessing and probing techniques for mixed integer programming problems,
section 1.2). The most is found from the columns' bounds alone, or from a linear program over the
other rows, whose bound is computed again in exact arithmetic from its prices (weak duality).
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np
import scipy.sparse as sp

from ...deadline import Deadline
from ...forms.linear_form import Floats
from ...forms.normalise import NormalForm
from ...forms.numbers import nearby_fraction, simplest_fraction
from ...highs import Basis, LinearProgram
from .lines import Columns, Exact, Line, size

#: Relative size of what is no change but noise.
NOISE = 1e-9


def tightened(line: Line, columns: Columns) -> Line:
    """Shrink the coefficients of binary columns as far as the columns' bounds allow.

    Parameters
    ----------
    line : Line
    columns : Columns

    Returns
    -------
    Line
        The same line where nothing shrinks. Largest coefficients come first.

    Examples
    --------
    >>> columns = Columns([0, 0], [4, 1], np.full(2, True), np.array([False, True]))
    >>> tightened(Line(0, 1, {0: 1, 1: -1000}, 0), columns).terms
    {0: 1, 1: -4}
    """
    total: Exact = 0
    for j, a in line.terms.items():
        most = columns.most(j, a)
        if most is None:
            return line
        total += most
    for y in sorted(line.terms, key=lambda j: -size(line.terms[j])):
        if columns.binary[y]:
            total -= max(line.terms[y], 0)
            line = shrunk(line, y, total)
            total += max(line.terms[y], 0)
    return line


def shrunk(line: Line, switch: int, most: Exact) -> Line:
    """Replace the larger side of a switched row by the most that the other terms can be.

    Parameters
    ----------
    line : Line
    switch : int
        A binary column of it.
    most : int or Fraction
        No whole plan in the state with the larger side has other terms that sum to more.
    """
    a = line.terms[switch]
    off, on = line.side, line.side - a
    new = max(most, min(off, on))
    if new >= max(off, on) - NOISE * max(1, size(off), size(on)):
        return line
    if off > on:
        off = new
    else:
        on = new
    return replace(line, terms=line.terms | {switch: off - on}, side=off)


def loose_state(line: Line, switch: int) -> int:
    """The value of the switch at which the row says less."""
    return 1 if line.terms[switch] < 0 else 0


@dataclass(frozen=True, eq=False)
class _Target:
    """What is to be maximised: terms of a line over a normalised form's columns."""

    terms: dict[int, Exact]
    constant: Exact
    whole: bool


class Prober:
    """Linear programs over a normalised relaxation, with one binary column held.

    Parameters
    ----------
    normal : NormalForm
    deadline : Deadline
    near : Basis, optional
        Of the relaxation, to start from.
    """

    def __init__(self, normal: NormalForm, deadline: Deadline, near: Basis | None = None) -> None:
        self.normal, self.deadline = normal, deadline
        self._by_row = sp.csr_array(normal.matrix)
        self._place = {j: k for k, j in enumerate(normal.columns.tolist())}
        self._program = LinearProgram(
            normal.matrix,
            normal.row_lower,
            normal.row_upper,
            normal.col_lower,
            normal.col_upper,
            np.zeros(normal.columns.size),
        )
        if near is not None:
            self._program.set_basis(near)

    def most(self, line: Line, switch: int) -> Fraction | None:
        """Return a proven limit on the other terms of a line while it is switched loose.

        Parameters
        ----------
        line : Line
        switch : int

        Returns
        -------
        Fraction or None
            None where there is no limit, no plan in that state, or no time.
        """
        if switch not in self._place:
            return None
        held = self._place[switch], loose_state(line, switch)
        target = self._target(line, switch)
        cost = np.zeros(self.normal.columns.size)
        for k, a in target.terms.items():
            cost[k] = -float(a)
        lower, upper = self.normal.col_lower.copy(), self.normal.col_upper.copy()
        lower[held[0]] = upper[held[0]] = held[1]
        self._program.set_cost(cost)
        self._program.set_col_bounds(lower, upper)
        result = self._program.solve(deadline=self.deadline)
        if result.status != "optimal":
            return None
        limits = [
            value
            for prices in _readings(-result.row_dual)
            if (value := self._limit(target.terms, prices, lower, upper)) is not None
        ]
        if not limits:
            return None
        least = min(limits) + target.constant
        return Fraction(math.floor(least)) if target.whole else least

    def _target(self, line: Line, switch: int) -> _Target:
        """Write the other terms of a line in the units of the normalised columns."""
        normal = self.normal
        terms: dict[int, Exact] = {}
        constant: Exact = 0
        whole = True
        for j, a in line.terms.items():
            k = self._place.get(j)
            if j == switch:
                continue
            if k is None:
                constant += a * simplest_fraction(float(normal.fixed_value[j]))
            else:
                terms[k] = a * Fraction(int(normal.col_num[k]), int(normal.col_den[k]))
                whole &= bool(normal.integer[k]) and terms[k].denominator == 1
        return _Target(terms, constant, whole and constant.denominator == 1)

    def _limit(
        self, objective: dict[int, Exact], prices: list[Fraction], lower: Floats, upper: Floats
    ) -> Fraction | None:
        """Bound an objective from above by any row prices: weak duality, exact."""
        normal, bound = self.normal, Fraction(0)
        rest = {j: Fraction(a) for j, a in objective.items()}
        for i, price in enumerate(prices):
            if not price:
                continue
            side = float((normal.row_upper if price > 0 else normal.row_lower)[i])
            if not math.isfinite(side):
                continue
            bound += price * simplest_fraction(side)
            here = slice(self._by_row.indptr[i], self._by_row.indptr[i + 1])
            entries = self._by_row.data[here].tolist()
            for j, a in zip(self._by_row.indices[here].tolist(), entries, strict=True):
                rest[j] = rest.get(j, Fraction(0)) - price * simplest_fraction(a)
        for j, a in rest.items():
            if a:
                limit = float(upper[j] if a > 0 else lower[j])
                if not math.isfinite(limit):
                    return None
                bound += a * simplest_fraction(limit)
        return bound


def _readings(prices: Floats) -> Iterator[list[Fraction]]:
    """Prices as simple fractions nearby."""
    largest = max(1.0, float(np.abs(prices).max(initial=0.0)))
    for tolerance in (1e-6 * largest, 1e-10 * largest):
        known = {v: nearby_fraction(v, tolerance) for v in np.unique(prices).tolist()}
        yield [known[v] for v in prices.tolist()]

"""On/off rows split: x1 + ... + xn <= n y says less of a fractional y than x1 <= y, ..., xn <= y.

A binary column switches a row on and off if one of its two values leaves the other columns no
choice. Then each of them alone has an exact limit in either state, and the line through the two
limits, x <= at_0 + (at_1 - at_0) y, holds at every whole plan: it is the hull of what the row
allows to x and y (Nemhauser and Wolsey 1988, Integer and Combinatorial Optimization, section
I.1.6). Where the limits together satisfy the row, it can go; else it stays beside them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

from .lines import Columns, Exact, Line, size


@dataclass(frozen=True)
class Split:
    """The parts of one on/off row.

    Attributes
    ----------
    row : int
        Index into the form.
    switch : int
        The binary column y.
    columns : tuple of int
    at_0, at_1 : tuple of int or Fraction
        The limit of each column where y = 0 and where y = 1.
    upper : tuple of bool
        Whether it is an upper limit.
    replaces : bool
        Whether the parts imply the row.
    """

    row: int
    switch: int
    columns: tuple[int, ...]
    at_0: tuple[Exact, ...]
    at_1: tuple[Exact, ...]
    upper: tuple[bool, ...]
    replaces: bool


def split(line: Line, columns: Columns) -> Split | None:
    """Split an on/off row.

    Parameters
    ----------
    line : Line
    columns : Columns

    Returns
    -------
    Split or None
        None where no binary column switches all others on and off, or where no part says more
        than the row does.

    Examples
    --------
    A cave may ripen three lots once it is open:

    >>> import numpy as np
    >>> columns = Columns([0] * 4, [1] * 4, np.full(4, True), np.full(4, True))
    >>> found = split(Line(0, 1, {0: 1, 1: 1, 2: 1, 3: -3}, 0), columns)
    >>> found.columns, found.at_0, found.at_1, found.replaces
    ((0, 1, 2), (0, 0, 0), (1, 1, 1), True)
    """
    switch = _switch_of(line, columns)
    others = [j for j in line.terms if j != switch]
    least = [columns.least(j, line.terms[j]) for j in others]
    if switch is None or len(others) < 2 or None in least:
        return None
    floor = sum(value for value in least if value is not None)
    sides = line.side, line.side - line.terms[switch]
    off = 0 if sides[0] < sides[1] else 1
    limits: list[tuple[Exact, Exact]] = []
    sharper: list[bool] = []
    for j, smallest in zip(others, least, strict=True):
        a, rest = line.terms[j], floor - (smallest or 0)
        exact = _quotient(sides[0] - rest, a), _quotient(sides[1] - rest, a)
        pair = _limit(j, a, exact[0], columns), _limit(j, a, exact[1], columns)
        if pair[off] * a != smallest:
            return None
        limits.append(pair)
        sharper.append(pair != exact)
    if not any(sharper):
        return None
    on_total = sum(line.terms[j] * pair[1 - off] for j, pair in zip(others, limits, strict=True))
    replaces = on_total <= sides[1 - off]
    kept = [k for k in range(len(others)) if replaces or sharper[k]]
    return Split(
        row=line.row,
        switch=switch,
        columns=tuple(others[k] for k in kept),
        at_0=tuple(limits[k][0] for k in kept),
        at_1=tuple(limits[k][1] for k in kept),
        upper=tuple(line.terms[others[k]] > 0 for k in kept),
        replaces=replaces,
    )


def _switch_of(line: Line, columns: Columns) -> int | None:
    """The one binary column whose coefficient is the largest."""
    largest = size(line.terms[line.largest])
    alone = sum(size(a) == largest for a in line.terms.values()) == 1
    return line.largest if alone and columns.binary[line.largest] else None


def _limit(column: int, a: Exact, exact: Exact, columns: Columns) -> Exact:
    """The limit that the row sets, within the column's bounds, whole for an integer column."""
    whole = bool(columns.integer[column])
    if a > 0:
        upper, value = columns.upper[column], math.floor(exact) if whole else exact
        return value if upper is None else min(value, upper)
    lower, value = columns.lower[column], math.ceil(exact) if whole else exact
    return value if lower is None else max(value, lower)


def _quotient(value: Exact, by: Exact) -> Exact:
    """Divide exactly."""
    if by in (1, -1):
        return value * by
    quotient = Fraction(value) / by
    return quotient.numerator if quotient.denominator == 1 else quotient

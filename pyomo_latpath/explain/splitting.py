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

from .lines import Columns, Line


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
    at_0, at_1 : tuple of Fraction
        The limit of each column where y = 0 and where y = 1.
    upper : tuple of bool
        Whether it is an upper limit.
    replaces : bool
        Whether the parts imply the row.
    """

    row: int
    switch: int
    columns: tuple[int, ...]
    at_0: tuple[Fraction, ...]
    at_1: tuple[Fraction, ...]
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
    >>> zero, one = Fraction(0), Fraction(1)
    >>> columns = Columns([zero] * 4, [one] * 4, np.full(4, True), np.full(4, True))
    >>> found = split(Line(0, 1, {0: one, 1: one, 2: one, 3: -3 * one}, zero), columns)
    >>> found.columns, found.at_0 == (0, 0, 0), found.at_1 == (1, 1, 1), found.replaces
    ((0, 1, 2), True, True, True)
    """
    switch = _switch_of(line, columns)
    if switch is None:
        return None
    others = [j for j in line.terms if j != switch]
    least = {j: columns.least(j, line.terms[j]) for j in others}
    floor = sum((v for v in least.values() if v is not None), Fraction(0))
    if len(others) < 2 or any(value is None for value in least.values()):
        return None
    sides = line.side, line.side - line.terms[switch]
    off = 0 if sides[0] < sides[1] else 1
    limits: list[tuple[Fraction, Fraction]] = []
    sharper: list[bool] = []
    for j in others:
        a, rest = line.terms[j], floor - (least[j] or 0)
        exact = [(side - rest) / a for side in sides]
        pair = _limit(j, a, exact[0], columns), _limit(j, a, exact[1], columns)
        if pair[off] * a != least[j]:
            return None
        limits.append(pair)
        sharper.append(list(pair) != exact)
    on_total = sum(line.terms[j] * pair[1 - off] for j, pair in zip(others, limits, strict=True))
    replaces = on_total <= sides[1 - off]
    kept = [k for k in range(len(others)) if (replaces or sharper[k])]
    if not any(sharper):
        return None
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
    largest = max(abs(a) for a in line.terms.values())
    found = [j for j, a in line.terms.items() if abs(a) == largest]
    return found[0] if len(found) == 1 and columns.binary[found[0]] else None


def _limit(column: int, a: Fraction, exact: Fraction, columns: Columns) -> Fraction:
    """The limit that the row sets, within the column's bounds, whole for an integer column."""
    if a > 0:
        value = Fraction(math.floor(exact)) if columns.integer[column] else exact
        bound = columns.upper[column]
        return value if bound is None else min(value, bound)
    value = Fraction(math.ceil(exact)) if columns.integer[column] else exact
    bound = columns.lower[column]
    return value if bound is None else max(value, bound)

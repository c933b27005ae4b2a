"""Where to take a binary matroid apart that is neither graphic nor cographic.

A 3-connected submatroid that is neither is found first; on the way there, a separation of order 2
either turns out to run through the whole matroid, or what contradicts it is added. A smallest
minor of it then tells the rest. Seymour (1980), Decomposition of regular matroids: in a regular
matroid a 3-connected part with a minor R10 is R10, and for a minor R12 some separation of R12
into halves runs through the whole. Lines are numbered as in `separation`.
"""

from __future__ import annotations

import numpy as np

from ...deadline import Deadline
from . import r10
from .clock import check_time
from .minors import Minor, rows_and_columns, small_core, small_minor
from .separation import (
    Bits,
    Spread,
    adjacency,
    residual,
    smallest_separation,
    spread,
    three_separations,
)
from .splitting import Contradiction


def separation(support: Bits, deadline: Deadline) -> Bits:
    """Find a separation of order 2 or 3 with summands that are smaller.

    Parameters
    ----------
    support : ndarray, shape (m, n), bool
        Connected, neither graphic nor cographic, nor R10.
    deadline : Deadline

    Returns
    -------
    ndarray, shape (m + n,), bool
        The lines on one side.

    Raises
    ------
    Contradiction
        If the matroid is not regular, with lines that are not.
    OutOfTime
    """
    m, n = support.shape
    links, core = adjacency(support), small_core(support, deadline)
    while True:
        check_time(deadline)
        rows, columns = rows_and_columns(core, m)
        part = support[np.ix_(rows, columns)]
        side = smallest_separation(part)
        if side is None:
            break
        lines = np.concatenate((rows, m + columns))
        found = _through(links, lines[side], lines[~side])
        if found.hit < 0:
            return found.reached
        core += found.way_to(found.hit)[:-1]
    minor = small_minor(Minor(part, rows, m + columns, ()), deadline)
    whole = Minor(support, np.arange(m), m + np.arange(n), ())
    for row, column in minor.pivots:
        place = np.flatnonzero(whole.rows == row), np.flatnonzero(whole.columns == column)
        whole = whole.pivoted(int(place[0][0]), int(place[1][0]))
    places = np.argsort(whole.lines)
    links = adjacency(whole.support)[np.ix_(places, places)]
    needed = {*minor.lines.tolist(), *(line for pivot in minor.pivots for line in pivot)}
    if minor.lines.size == 12:
        return _through_r12(links, minor, needed)
    if r10.find(minor.support) is None:
        raise Contradiction(needed)
    return _beside_r10(links, minor, needed)


def _through(links: Bits, inside: np.ndarray, outside: np.ndarray) -> Spread:
    """Follow a separation of some lines through all lines."""
    return spread(residual(links, inside, outside), inside, outside)


def _through_r12(links: Bits, minor: Minor, needed: set[int]) -> Bits:
    """Find a separation into halves of R12 that runs through all lines."""
    for side in three_separations(minor.support):
        found = _through(links, minor.lines[side], minor.lines[~side])
        if found.hit < 0:
            return found.reached
        needed.update(found.way_to(found.hit))
    raise Contradiction(needed)


def _beside_r10(links: Bits, minor: Minor, needed: set[int]) -> Bits:
    """Find what a line of R10 is alone in standing for: another summand."""
    found = [_through(links, np.delete(minor.lines, k), minor.lines[k : k + 1]) for k in range(10)]
    for spreading in found:
        if np.count_nonzero(~spreading.reached) > 1:
            return spreading.reached
    other = next(line for line in range(len(links)) if line not in minor.lines)
    needed.add(other)
    for spreading in found:
        needed.update(spreading.way_to(other))
    raise Contradiction(needed)

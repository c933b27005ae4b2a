"""Where to take a binary matroid apart that is neither graphic nor cographic.

A 3-connected submatroid that is neither is found first; on the way there, a separation of order 2
either turns out to run through the whole matroid, or what contradicts it is added. A small minor
of it then tells the rest. Seymour (1980), Decomposition of regular matroids: in a regular matroid
a 3-connected part with a minor R10 is R10, and for a minor R12 some separation of R12 into halves
runs through the whole. Lines are numbered as in `separation`.
"""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp

from ...deadline import Deadline
from ...forms.numbers import Integers
from . import r10
from .clock import check_time
from .minors import Minor, small_core, small_minor
from .separation import (
    Bits,
    Links,
    links_of,
    pivot,
    smallest_separation,
    spread,
    three_separations,
)
from .summand import Contradiction


def separation(matrix: sp.csc_array, deadline: Deadline) -> Bits:
    """Find a separation of order 2 or 3 with summands that are smaller.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n)
        Its nonzeros: connected, neither graphic nor cographic, nor R10.
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
    links = links_of(matrix)
    whole = Minor(links, frozenset(range(matrix.shape[0])))
    core = small_core(matrix, links, deadline)
    while True:
        check_time(deadline)
        part = whole.restricted(core)
        small, lines = part.matrix()
        side = smallest_separation(small, deadline)
        if side is None:
            break
        found = spread(links, lines[side], lines[~side])
        if found.hit < 0:
            return found.reached
        core += found.way_to(found.hit)[:-1]
    minor = small_minor(part, deadline)
    for x, y in minor.pivots:
        pivot(links, x, y)
    needed = {*minor.links, *(line for pair in minor.pivots for line in pair)}
    small, lines = minor.matrix()
    if lines.size == 12:
        return _through_r12(links, small, lines, needed)
    if r10.find(small) is None:
        raise Contradiction(needed)
    return _beside_r10(links, lines, needed)


def _through_r12(links: Links, small: sp.csc_array, lines: Integers, needed: set[int]) -> Bits:
    """Find a separation into halves of R12 that runs through all lines."""
    for side in three_separations(small):
        found = spread(links, lines[side], lines[~side])
        if found.hit < 0:
            return found.reached
        needed.update(found.way_to(found.hit))
    raise Contradiction(needed)


def _beside_r10(links: Links, lines: Integers, needed: set[int]) -> Bits:
    """Find a line of R10 that more lines can be on one side with: they are another summand."""
    found = [spread(links, np.delete(lines, k), lines[k : k + 1]) for k in range(lines.size)]
    for following in found:
        if np.count_nonzero(~following.reached) > 1:
            return following.reached
    other = next(line for line in links if line not in lines)
    for following in found:
        needed.update((other, *following.way_to(other)))
    raise Contradiction(needed)

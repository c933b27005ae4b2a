"""Models whose vertices are all whole: why, what their declarations cost, what would break it."""

from __future__ import annotations

import time
from collections import Counter
from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp

from ..certificates import Network, Part, Unimodular
from ..deadline import Deadline
from ..forms.linear_form import LinearForm
from ..forms.numbers import Integers
from ..highs_mip import MipSettings, branch_and_bound
from ..integrality.sentences import describe
from ..integrality.verdicts import BECAUSE
from .groups import oddities_of
from .naming import listed
from .remains import Certified
from .stems import Stems

#: So many blocks are told of, at most, and so many names of rows on one side.
MOST_TOLD, MOST_NAMES = 5, 2
#: What could break a structure, beside what could break any.
BREAKS = {
    "incidence": "a further row over columns that stand in two rows already, unless the structure "
    "stays that of a network",
    "interval": "a column whose rows are not consecutive, or a row between others that such a "
    "column passes over, unless the structure stays that of a network",
    "network": "a further row or column that is no path in the same network",
    "conetwork": "a further row or column that is no path in the same network",
    "unimodular": "another coefficient, or a further row: the equations make something else of it",
    "sum": "a further row or column across the parts that it is put together from",
}
COEFFICIENT = "a coefficient other than 0 and +-1 that scaling the row does not turn into one"
FOR_THESE_SIDES = "another side of an equation: the proof holds for the sides as they are"


@dataclass(frozen=True)
class Whole:
    """A model whose vertices are all whole.

    Attributes
    ----------
    sentences : tuple of str
        What its blocks are, largest first; equal ones once, with their number.
    breakers : tuple of str
        What could break it; each true of the certificates at hand.
    path_seconds : float
        One run of the path route; NaN where it was not run.
    highs_seconds : float
        One run of HiGHS's branch and bound on the same form.
    highs_ended : bool
        False where that was cut off, and would have taken longer.
    keepers : tuple of str
        What may change freely.
    """

    sentences: tuple[str, ...]
    breakers: tuple[str, ...]
    path_seconds: float
    highs_seconds: float
    highs_ended: bool
    keepers: tuple[str, ...] = ()


def sentences(certified: Certified, rows: Stems, most: int = MOST_TOLD) -> tuple[str, ...]:
    """Say what the blocks are, largest first; equal ones once, and not more than a few.

    Parameters
    ----------
    certified : Certified
    rows : Stems
        Of the form's rows: the sides of a network are called what its rows are called.
    most : int

    Returns
    -------
    tuple of str

    Examples
    --------
    >>> from pyomo_latpath.deadline import Deadline
    >>> from pyomo_latpath.explain.remains import Remains
    >>> from pyomo_latpath.explain.stems import row_stems
    >>> form = LinearForm.from_arrays([[1, 1], [1, 0], [0, 1]], row_lower=0, row_upper=9,
    ...     col_lower=0, col_upper=9, cost=0, row_names=["cave[1]", "town[1]", "town[2]"])
    >>> everything = Remains(form).certified(np.full(3, True), Deadline(None))
    >>> sentences(everything, row_stems(form))
    ("a transport network: 1 row on one side, 2 on the other, 2 columns: 'cave' against 'town'",)
    """
    pairs = sorted(
        zip(certified.proofs, certified.blocks, strict=True), key=lambda pair: -pair[1].columns.size
    )
    told = [
        describe(name, proof.part, sp.csc_array((block.rows.size, block.columns.size)))
        + _sides(proof.part, certified.normal.rows[block.rows], rows)
        for (name, proof), block in pairs
        if name != "trivial"
    ]
    count = Counter(told or [BECAUSE["trivial"]])
    lines = [text if k == 1 else f"{text} ({k:,} blocks)" for text, k in count.items()]
    rest = sum(list(count.values())[most:])
    return (*lines[:most], f"{rest:,} smaller blocks") if rest > 1 else tuple(lines)


def _sides(part: Part, members: Integers, rows: Stems) -> str:
    """Name the two sides of a star by its rows, where each side has few names of its own."""
    if not isinstance(part, Network) or rows.by == "pattern":
        return ""
    if not (part.tree == len(part.tree)).any(axis=1).all():
        return ""
    away = part.tree[:, 0] == len(part.tree)
    sides = [Counter(rows.label[members[side]].tolist()) for side in (away, ~away)]
    if not all(0 < len(side) <= MOST_NAMES for side in sides) or sides[0].keys() & sides[1].keys():
        return ""
    fewer, more = (
        listed([rows.names[k] for k in side], MOST_NAMES)
        for side in sorted(sides, key=lambda side: side.total())
    )
    return f": {fewer} against {more}"


def breakers(certified: Certified) -> tuple[str, ...]:
    """What could break the wholeness of certified blocks; true for the proofs at hand.

    Parameters
    ----------
    certified : Certified

    Returns
    -------
    tuple of str
        Empty where nothing could, for want of rows over several integer columns.
    """
    normal = certified.normal
    structures = [name for name in certified.structures if name != "trivial"]
    if not structures:
        return ()
    told = [COEFFICIENT] if set(structures) != {"unimodular"} else []
    told += [BREAKS[name] for name in structures if name in BREAKS]
    if _needs_sides(certified):
        told.append(FOR_THESE_SIDES)
    odd = oddities_of(normal, certified.blocks)
    if odd.mixed.any():
        row = normal.form.row_names[int(normal.rows[odd.row[np.argmax(odd.mixed)]])]
        told.append(
            "a side that is not whole in a row with continuous columns, or a bound of theirs that "
            f"is not (row {row!r} is such a row): these cannot be rounded"
        )
    return tuple(told)


def keepers(certified: Certified) -> tuple[str, ...]:
    """What may change freely without breaking it."""
    if not [name for name in certified.structures if name != "trivial"]:
        return ()
    if _needs_sides(certified):
        return ("costs",)
    if oddities_of(certified.normal, certified.blocks).mixed.any():
        return "costs", "sides and bounds, as long as they are whole"
    return "costs", "sides and bounds: those that are not whole are rounded inwards"


def _needs_sides(certified: Certified) -> bool:
    parts = (block.part for _, block in certified.proofs)
    return any(isinstance(part, Unimodular) and part.needs_sides for part in parts)


def time_branch_and_bound(form: LinearForm, deadline: Deadline) -> tuple[float, bool]:
    """Time HiGHS's branch and bound on a form as declared, one run.

    Returns
    -------
    seconds : float
    ended : bool
        False where it was cut off.
    """
    since = time.perf_counter()
    sign = 1.0 if form.sense == "min" else -1.0
    limits = form.row_lower, form.row_upper, form.col_lower, form.col_upper
    kinds = form.integer.astype(np.int32)
    settings = MipSettings(rel_gap=0.0)
    result = branch_and_bound(form.matrix, *limits, sign * form.cost, kinds, settings, deadline)
    if result.status == "interrupted":
        raise KeyboardInterrupt
    return time.perf_counter() - since, result.status != "time_limit"

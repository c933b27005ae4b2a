"""Names of rows, columns and groups, and odd numbers, as they stand in sentences."""

from __future__ import annotations

from collections.abc import Sequence

from ..forms.numbers import simplest_fraction
from ..pages.markup import shortened, visible

#: Characters of a name within a sentence, at most.
NAME_WIDTH = 40
#: Characters of a fraction, at most; what takes longer to read is told in decimals.
FRACTION_WIDTH = 15
#: How a conflict among bounds is called, with the name of their column.
BOUNDS_OF = "bounds of "


def short(name: str) -> str:
    """A name fit for a sentence."""
    return shortened(visible(name), NAME_WIDTH)


def quoted(name: str) -> str:
    """A name within a sentence, apart from its words.

    Examples
    --------
    >>> quoted("open"), quoted("bounds of van[1]")
    ("'open'", "bounds of 'van[1]'")
    """
    if name.startswith(BOUNDS_OF):
        return f"{BOUNDS_OF}'{short(name.removeprefix(BOUNDS_OF))}'"
    return f"'{short(name)}'"


def listed(names: Sequence[str], most: int) -> str:
    """Names as a clause, at most so many of them.

    Examples
    --------
    >>> listed(["rent", "shelves", "vans"], 3), listed(["rent", "shelves", "vans"], 1)
    ("'rent', 'shelves' and 'vans'", "'rent' and 2 more")
    """
    shown = [quoted(name) for name in names[:most]]
    rest = len(names) - len(shown)
    if rest:
        shown.append(f"{rest:,} more")
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}"


def coefficient(value: float) -> str:
    """A coefficient in decimals where few do, else as a fraction.

    Examples
    --------
    >>> coefficient(3.0), coefficient(0.25), coefficient(1 / 60), coefficient(0.123456789012)
    ('3', '0.25', '1/60', '0.123457')
    """
    decimals, fraction = f"{value:g}", str(simplest_fraction(value))
    exact = float(decimals) == value or len(fraction) > FRACTION_WIDTH
    return decimals if exact else fraction

"""Names of rows, columns and groups as they stand in sentences."""

from __future__ import annotations

from collections.abc import Sequence

from ..pages.markup import shortened, visible

#: Characters of a name within a sentence, at most.
NAME_WIDTH = 40


def short(name: str) -> str:
    """A name fit for a sentence."""
    return shortened(visible(name), NAME_WIDTH)


def listed(names: Sequence[str], most: int) -> str:
    """Names as a clause, at most so many of them.

    Examples
    --------
    >>> listed(["rent", "shelves", "vans"], 3), listed(["rent", "shelves", "vans"], 1)
    ('rent, shelves and vans', 'rent and 2 more')
    """
    shown = [short(name) for name in names[:most]]
    rest = len(names) - len(shown)
    if rest:
        shown.append(f"{rest:,} more")
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}"

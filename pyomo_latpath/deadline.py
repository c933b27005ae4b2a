"""One time budget, passed down through all stages of a solve."""

from __future__ import annotations

import math
import time
from collections.abc import Iterator, Sequence


class Deadline:
    """A moment by which work must be done.

    Parameters
    ----------
    seconds : float or None
        Budget from now on; None for no limit.

    Examples
    --------
    >>> Deadline(None).passed
    False
    >>> Deadline(0).passed
    True
    """

    def __init__(self, seconds: float | None) -> None:
        self.at = math.inf if seconds is None else time.monotonic() + seconds

    @property
    def left(self) -> float:
        """Seconds left, at least 0; infinite without a limit."""
        return max(0.0, self.at - time.monotonic())

    @property
    def passed(self) -> bool:
        """Whether the budget is used up."""
        return time.monotonic() >= self.at

    def within(self, seconds: float) -> Deadline:
        """Return a deadline that lies at most `seconds` ahead and not after this one."""
        return Deadline(min(seconds, self.left)) if seconds < math.inf else self

    def shared(self, sizes: Sequence[float]) -> Iterator[Deadline]:
        """Share what is left among pieces of work, in proportion to their sizes, as each begins.

        What one piece leaves, the others have; so none can use up the time of those after it.

        Examples
        --------
        >>> shares = Deadline(60).shared([1, 2])
        >>> round(next(shares).left), round(next(shares).left)
        (20, 60)
        """
        total = math.fsum(sizes)
        for size in sizes:
            yield self.within(self.left * size / total if size else 0.0)
            total -= size

"""Smallest sets: thinning one out by deletion, and hitting several with few members."""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterator, Sequence
from typing import Any, TypeVar

from ..deadline import Deadline

Item = TypeVar("Item")


def thin_out(
    items: Sequence[Item], still: Callable[[list[Item]], bool], deadline: Deadline
) -> tuple[list[Item], bool]:
    """Leave out what can be left out, in bundles of half the size each time.

    Parameters
    ----------
    items : sequence
        `still` holds for all of them.
    still : callable
        Whether a subset, in the order of the items, still serves; monotone: more items serve
        if fewer do.
    deadline : Deadline

    Returns
    -------
    items : list
        A set that serves.
    minimal : bool
        Whether none of them can be left out; False where the time ran out before.

    Examples
    --------
    >>> thin_out(range(10), lambda some: {3, 7} <= set(some), Deadline(None))
    ([3, 7], True)
    """
    kept = list(items)
    bundle = max(1, (len(kept) + 1) // 2)
    while kept:
        at = 0
        while at < len(kept):
            if deadline.passed:
                return kept, False
            fewer = kept[:at] + kept[at + bundle :]
            if still(fewer):
                kept = fewer
            else:
                at += bundle
        if bundle == 1:
            break
        bundle = (bundle + 1) // 2
    return kept, True


def hitting_sets(
    sets: Sequence[Collection[int]],
    size: int,
    barred: Sequence[frozenset[int]] = (),
    key: Callable[[int], Any] | None = None,
) -> Iterator[frozenset[int]]:
    """Go through the sets of so many members that meet all given ones.

    Each member is needed where it is taken: it hits a set that those before it miss (Reiter
    1987, A theory of diagnosis from first principles, section 4).

    Parameters
    ----------
    sets : sequence of collections of int
    size : int
        Members at most.
    barred : sequence of frozenset
        What contains one of these is passed over.
    key : callable, optional
        Members with a smaller key are tried first.

    Yields
    ------
    frozenset of int
        Some more than once.

    Examples
    --------
    >>> [sorted(found) for found in hitting_sets([{1, 2}, {2, 3}], 1)]
    [[2]]
    """

    def extend(chosen: frozenset[int]) -> Iterator[frozenset[int]]:
        if any(those <= chosen for those in barred):
            return
        missed = next((those for those in sets if chosen.isdisjoint(those)), None)
        if missed is None:
            yield chosen
        elif len(chosen) < size:
            for member in sorted(missed, key=key):
                yield from extend(chosen | {member})

    return extend(frozenset())

"""The end of the time, as an exception: a decision is complete or none at all."""

from __future__ import annotations

from ...deadline import Deadline


class OutOfTime(Exception):
    """The time given ran out before the decision."""


def check_time(deadline: Deadline) -> None:
    """Raise OutOfTime if a deadline has passed."""
    if deadline.passed:
        raise OutOfTime

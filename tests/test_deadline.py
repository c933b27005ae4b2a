"""One budget, shared out."""

from __future__ import annotations

import math
from types import SimpleNamespace

import pytest

from pyomo_latpath import deadline
from pyomo_latpath.deadline import Deadline


def test_shares_are_in_proportion_to_sizes():
    for size, share in zip([3, 1], Deadline(100).shared([3, 1]), strict=True):
        assert share.left == pytest.approx({3: 75, 1: 100}[size], abs=1)


def test_what_one_piece_overdraws_or_leaves_is_shared_among_the_others(monkeypatch):
    clock = SimpleNamespace(now=0)
    monkeypatch.setattr(deadline, "time", SimpleNamespace(monotonic=lambda: clock.now))
    left = []
    for share in Deadline(12).shared([1, 1, 1]):
        left.append(share.left)
        if len(left) == 1:
            clock.now += 6  # instead of 4; the second takes no time
    assert left == [4, 3, 6]


def test_without_a_limit_shares_have_none():
    assert [share.left for share in Deadline(None).shared([2, 1])] == [math.inf, math.inf]


def test_pieces_without_size_get_nothing():
    assert [share.passed for share in Deadline(9).shared([0, 0])] == [True, True]

"""Thinning out and hitting sets, against all subsets."""

import itertools

from hypothesis import given
from hypothesis import strategies as st

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.minimal import hitting_sets, thin_out

families = st.lists(st.sets(st.integers(0, 7), min_size=1, max_size=4), min_size=1, max_size=5)


@given(families)
def test_thinning_out_leaves_a_set_that_serves_and_needs_each_of_its_members(needs):
    def serves(some):
        return any(need <= set(some) for need in needs)

    kept, minimal = thin_out(range(8), serves, Deadline(None))
    assert minimal and serves(kept)
    assert not any(serves([item for item in kept if item != left]) for left in kept)


def test_thinning_out_needs_few_questions_where_little_is_needed():
    asked = []

    def serves(some):
        asked.append(len(some))
        return 511 in some

    assert thin_out(range(1024), serves, Deadline(None)) == ([511], True)
    assert len(asked) < 40


def test_nothing_is_needed_where_nothing_serves_as_well():
    assert thin_out([1, 2, 3], lambda some: True, Deadline(None)) == ([], True)


def test_without_time_everything_is_kept_and_not_called_minimal():
    assert thin_out([1, 2, 3], lambda some: True, Deadline(0)) == ([1, 2, 3], False)


@given(families, st.integers(0, 5))
def test_all_smallest_hitting_sets_are_met(sets, size):
    found = set(hitting_sets(sets, size))
    members = sorted(set().union(*sets))
    for count in range(size + 1):
        for chosen in itertools.combinations(members, count):
            hits = all(not those.isdisjoint(chosen) for those in sets)
            needed = hits and not any(
                all(those & set(chosen) - {left} for those in sets) for left in chosen
            )
            if needed:
                assert frozenset(chosen) in found
    for chosen in found:
        assert len(chosen) <= size
        assert all(not those.isdisjoint(chosen) for those in sets)


@given(families)
def test_barred_sets_are_passed_over(sets):
    for barred in set(hitting_sets(sets, 3)):
        assert not any(barred <= chosen for chosen in hitting_sets(sets, 5, [barred]))


def test_members_with_a_smaller_key_come_first():
    assert next(hitting_sets([{1, 2, 3}], 1, key=lambda member: -member)) == {3}

"""Smallest sets of groups and rows to blame, against all subsets."""

import itertools

import numpy as np
from exact_milp import solve_exactly
from grouped_models import certified_without, grouped_form
from hypothesis import given, settings
from hypothesis import strategies as st

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.conflict import violators
from pyomo_latpath.explain.culprits import MOST_SETS, Search, objective_without, smallest_rows
from pyomo_latpath.explain.groups import groups_of, oddities_of
from pyomo_latpath.explain.relaxation import Relaxation
from pyomo_latpath.explain.remains import Remains
from pyomo_latpath.explain.stems import row_stems
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise


def search_in(form, deadline=None, tell=None):
    normal = normalise(form)
    odd = oddities_of(normal, blocks_of(normal))
    groups = groups_of(normal, row_stems(form), odd, None)
    relaxation = Relaxation(normal)
    deadline, tell = deadline or Deadline(None), tell or (lambda line: None)
    return Search(
        Remains(form), groups, conflicts_of(normal, relaxation), relaxation, deadline, tell
    )


def conflicts_of(normal, relaxation):
    """Groups of the violators at the optimum."""
    optimum = relaxation.optimum(Deadline(None))
    places = relaxation.places(optimum.x) if optimum.status == "optimal" else []
    names = [name.split("[")[0] for name in normal.form.row_names]
    return [found.groups for found in violators(normal, places, names, Deadline(None))]


def smallest_by_brute_force(form, groups):
    """All sets of as few groups as can be, by trying every set."""
    for size in range(len(groups) + 1):
        found = {
            chosen
            for chosen in itertools.combinations(range(len(groups)), size)
            if certified_without(form, [i for k in chosen for i in groups[k].rows.tolist()])
        }
        if found:
            return found
    return set()


def forms():
    return st.integers(0, 2**32).map(lambda seed: grouped_form(np.random.default_rng(seed)))


@settings(max_examples=40)
@given(forms())
def test_all_smallest_sets_of_groups_are_found(form):
    normal = normalise(form)
    search = search_in(form)
    expected = smallest_by_brute_force(form, search.groups)
    if normal.conflict is not None or expected == {()}:
        return
    found = list(search.run())
    size = len(next(iter(expected)))
    if size == 1 or (form.row_lower != form.row_upper).all():
        assert {each.places for each in found} == expected
        assert all(each.smallest for each in found)
        assert search.exhausted
    # With equations a set of more than one group may be overlooked, and then none is called small.
    assert all(each.places in expected or not each.smallest for each in found)
    assert all(len(each.places) >= size for each in found)


@settings(max_examples=25)
@given(forms())
def test_what_is_left_is_whole_so_its_relaxation_has_the_value_of_the_best_plan(form):
    if normalise(form).conflict is not None or certified_without(form, []):
        return
    search = search_in(form)
    for each in search.run():
        rows = np.concatenate([search.groups[k].rows for k in each.places])
        kept = np.ones(form.shape[0], np.bool_)
        kept[rows] = False
        status, value = solve_exactly(Remains(form).without(kept))
        assert status == "optimal"
        told = objective_without(search, each.places, Deadline(None))
        assert abs(told - float(value)) < 1e-7


@settings(max_examples=25)
@given(forms())
def test_of_the_rows_told_none_can_stay(form):
    if normalise(form).conflict is not None or certified_without(form, []):
        return
    search = search_in(form)
    for each in itertools.islice(search.run(), 1):
        everything = np.concatenate([search.groups[k].rows for k in each.places])
        rows, minimal = smallest_rows(Remains(form), everything, Deadline(None))
        assert minimal and set(rows.tolist()) <= set(everything.tolist())
        assert certified_without(form, rows.tolist())
        for kept in rows.tolist():
            assert not certified_without(form, [i for i in rows.tolist() if i != kept])


def two_odd_cycles(*, linked):
    """Two odd cycles of clashes, each with a group of its own rows; several sets of culprits."""
    cycle = np.eye(3) + np.roll(np.eye(3), 1, axis=1)
    matrix = np.zeros((6, 6))
    matrix[:3, :3] = matrix[3:, 3:] = cycle
    names = ["left[0]", "left[1]", "west", "right[0]", "right[1]", "east"]
    if linked:
        matrix = np.vstack((matrix, np.full((1, 6), 2.0)))
        names.append("budget")
    return LinearForm.from_arrays(
        matrix,
        row_lower=-np.inf,
        row_upper=[1] * 6 + [7] * linked,
        col_lower=0,
        col_upper=1,
        cost=-1,
        row_names=names,
    )


def test_every_way_to_break_both_cycles_is_told():
    search = search_in(two_odd_cycles(linked=False))
    told = {tuple(search.groups[k].name for k in each.places) for each in search.run()}
    ways = {("left", "right"), ("left", "east"), ("west", "right"), ("west", "east")}
    assert told == ways
    assert search.exhausted


def test_a_group_to_blame_on_its_own_is_in_every_set():
    form = two_odd_cycles(linked=True)
    by_hand = np.array(form.matrix.toarray())
    by_hand[6] = [2, 3, 2, 3, 2, 3]
    form = LinearForm.from_arrays(
        by_hand,
        row_lower=form.row_lower,
        row_upper=form.row_upper,
        col_lower=0,
        col_upper=1,
        cost=-1,
        row_names=form.row_names,
    )
    search = search_in(form)
    sets = [{search.groups[k].name for k in each.places} for each in search.run()]
    assert len(sets) == 4 and all("budget" in chosen and len(chosen) == 3 for chosen in sets)
    place = [group.name for group in search.groups].index("budget")
    assert [k for k, certified in search.alone.items() if not certified] == [place]


def test_several_conflicts_in_one_group_count_as_one():
    rents = np.hstack((np.kron(np.eye(3), [[2.0, 3.0]]), np.zeros((3, 3))))
    cycle = np.hstack((np.zeros((3, 6)), np.eye(3) + np.roll(np.eye(3), 1, axis=1)))
    form = LinearForm.from_arrays(
        np.vstack((rents, cycle)),
        row_lower=-np.inf,
        row_upper=[4, 4, 4, 1, 1, 1],
        col_lower=0,
        col_upper=1,
        cost=-1,
        row_names=["rent[1]", "rent[2]", "rent[3]", "cave", "town", "van"],
    )
    search = search_in(form)
    sets = list(search.run())
    assert {len(each.places) for each in sets} == {2} and all(each.smallest for each in sets)
    assert len(sets) == 3 and all(0 in each.places for each in sets)


def test_no_more_sets_are_told_than_a_person_reads():
    cycle = np.eye(9) + np.roll(np.eye(9), 1, axis=1)
    form = LinearForm.from_arrays(
        cycle,
        row_lower=-np.inf,
        row_upper=1,
        col_lower=0,
        col_upper=1,
        cost=-1,
        row_names=[f"{letter}_row" for letter in "abcdefghi"],
    )
    search = search_in(form)
    assert len(list(search.run())) == MOST_SETS
    assert not search.exhausted


def test_where_many_groups_are_to_blame_a_set_of_which_none_can_stay_is_told():
    cycle = np.eye(3) + np.roll(np.eye(3), 1, axis=1)
    form = LinearForm.from_arrays(
        np.repeat(np.kron(np.eye(7), cycle), 2, axis=0),
        row_lower=-np.inf,
        row_upper=1,
        col_lower=0,
        col_upper=1,
        cost=-1,
        row_names=[f"{chr(97 + k)}{end}[{i}]" for k in range(7) for end in "xyz" for i in (1, 2)],
    )
    search = search_in(form)
    (only,) = search.run()
    assert len(only.places) == 7 and not only.smallest and not search.exhausted


def test_without_time_nothing_is_told_and_the_search_does_not_call_itself_complete():
    search = search_in(two_odd_cycles(linked=False), Deadline(0))
    assert list(search.run()) == []
    assert not search.exhausted
    rows, minimal = smallest_rows(search.remains, np.arange(6), Deadline(0))
    assert rows.tolist() == list(range(6)) and not minimal


def test_progress_names_what_is_left_out():
    lines = []
    list(search_in(two_odd_cycles(linked=False), tell=lines.append).run())
    assert any(line == "leaving out 'west' and 'east'" for line in lines)

"""Side reasons: odd numbers, continuous columns, parity; each against plain counting."""

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from small_forms import triangle

from pyomo_latpath.explain.groups import groups_of, oddities_of
from pyomo_latpath.explain.parity import parity_conflict
from pyomo_latpath.explain.reasons import find_reasons
from pyomo_latpath.explain.stems import column_stems, row_stems
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise


def reasons_of(form):
    normal = normalise(form)
    odd = oddities_of(normal, blocks_of(normal))
    return find_reasons(normal, odd, row_stems(form), column_stems(form))


def groups_in(form, x=None):
    normal = normalise(form)
    odd = oddities_of(normal, blocks_of(normal))
    return {group.name: group for group in groups_of(normal, row_stems(form), odd, x)}


def form_of(matrix, names, **changes):
    sides = {"row_lower": -np.inf, "row_upper": 4, "col_lower": 0, "col_upper": 3, "cost": 1}
    return LinearForm.from_arrays(matrix, row_names=names, **(sides | changes))


def test_coefficients_are_counted_by_group_and_the_worst_is_named():
    form = form_of([[2, 3, 0], [1, 1, 1], [0, 5, 7]], ["rent[1]", "lots", "rent[2]"])
    (told,) = reasons_of(form)
    assert (told.kind, told.where, told.count) == ("coefficient", "rent", 4)
    assert told.examples == ("rent[2]", "rent[1]")
    assert "7 for one (row 'rent[2]', column 'x3')" in told.sentence
    assert groups_in(form)["rent"].beyond == 4 and groups_in(form)["lots"].beyond == 0


def test_what_scaling_makes_whole_is_no_reason():
    form = form_of([[0.5, 0.5], [-3, 3]], ["half", "thirds"], row_upper=[1.7, 8])
    assert reasons_of(form) == ()


def test_rows_over_one_column_and_blocks_without_integer_columns_are_no_reason():
    form = form_of(
        [[2, 0, 0], [0, 3, 2]], ["bound", "rest"], row_upper=[5, 1.5], integer=[True, False, False]
    )
    assert reasons_of(form) == ()


def test_continuous_columns_keep_sides_from_being_rounded():
    form = form_of(
        [[1, 1, 0], [1, 0, 1]],
        ["mix[1]", "mix[2]"],
        row_upper=[1.5, 1],
        col_upper=[3, 0.5, 1],
        integer=[True, False, False],
        col_names=["open", "flow[1]", "flow[2]"],
    )
    told = {reason.kind: reason for reason in reasons_of(form)}
    assert set(told) == {"side", "bound", "continuous"}
    assert (told["side"].where, told["side"].count, told["side"].examples) == (
        "mix",
        1,
        ("mix[1]",),
    )
    assert "1.5 at 'mix[1]'" in told["side"].sentence
    assert (told["bound"].where, told["bound"].examples) == ("flow", ("flow[1]",))
    assert told["continuous"].count == 2
    group = groups_in(form)["mix"]
    assert (group.size, group.nonzeros, group.broken_sides, group.continuous) == (2, 4, 1, 2)


def test_semicontinuous_columns_come_before_numbers():
    form = form_of(
        [[2, 3]], ["rent"], col_lower=1, semicontinuous=[False, True], col_names=["a", "batch"]
    )
    assert [reason.kind for reason in reasons_of(form)] == ["semicontinuous", "coefficient"]
    assert "batch" in reasons_of(form)[0].sentence


def test_contradictions_come_first_and_name_the_rows():
    form = form_of(
        [[1, 1, 0, 0], [0, 1, 1, 0], [1, 0, 1, 0], [2, 3, 5, 7]],
        ["clash[1]", "clash[2]", "end", "rent"],
        row_lower=[1, 1, 1, 0],
        row_upper=[1, 1, 1, 9],
    )
    first = reasons_of(form)[0]
    assert (first.kind, first.where, first.count) == ("parity", "clash, end", 3)
    assert "'clash[1]', 'clash[2]' and 'end' together" in first.sentence


def even_sum_odd_side(matrix, sides, rows):
    total = sum(matrix[i] for i in rows)
    return not (total % 2).any() and sum(sides[i] for i in rows) % 2 == 1


@given(st.integers(0, 2**32), st.integers(1, 5), st.integers(1, 5))
def test_a_parity_conflict_is_found_exactly_where_there_is_one(seed, m, n):
    rng = np.random.default_rng(seed)
    matrix = rng.choice([0, 1, -1, 2], (m, n), p=[0.4, 0.3, 0.2, 0.1])
    sides = rng.integers(-2, 3, m)
    form = LinearForm.from_arrays(
        matrix, row_lower=sides, row_upper=sides, col_lower=-9, col_upper=9, cost=0
    )
    normal = normalise(form)
    if normal.conflict is not None or normal.rows.size < m:
        return
    scaled = normal.matrix.toarray().astype(int)
    sides = normal.row_upper.astype(int)
    sets = itertools.chain.from_iterable(
        itertools.combinations(range(m), size) for size in range(1, m + 1)
    )
    wrong = {rows for rows in sets if even_sum_odd_side(scaled, sides, rows)}
    found = parity_conflict(normal)
    assert (found is None) == (not wrong)
    if found is not None:
        rows = tuple(found.tolist())
        assert rows in wrong
        assert not any(set(other) < set(rows) for other in wrong)


@pytest.mark.parametrize("changes", [{"integer": [True, True, False]}, {"row_upper": [1, 1, 2]}])
def test_inequalities_and_continuous_columns_have_no_parity(changes):
    form = triangle(row_lower=1, cost=0).replace(**changes)
    assert parity_conflict(normalise(form)) is None


def test_tight_rows_are_counted():
    form = form_of([[1, 1], [1, -1], [1, 0]], ["cave[1]", "cave[2]", "van"])
    told = groups_in(form, np.array([3.0, 1.0]))
    assert (told["cave"].tight, told["van"].tight) == (1, 0)

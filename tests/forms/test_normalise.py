"""Normalisation keeps every whole plan and loses no way back."""

import itertools
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise

INF = np.inf


def form_of(A, row_lower, row_upper, col_lower=0, col_upper=3, **more):
    return LinearForm.from_arrays(
        A,
        row_lower=row_lower,
        row_upper=row_upper,
        col_lower=col_lower,
        col_upper=col_upper,
        cost=more.pop("cost", 0),
        **more,
    )


def test_rows_become_coprime_whole_numbers_with_sides_rounded_inwards():
    normal = normalise(form_of([[0.5, 1.5], [6, 9]], [0.4, -INF], [7, 20]))
    assert normal.matrix.toarray().tolist() == [[1, 3], [2, 3]]
    assert normal.row_lower.tolist() == [1, -INF]
    assert normal.row_upper.tolist() == [14, 6]


def test_a_third_of_a_column_can_equal_one():
    normal = normalise(form_of([[1 / 3, 1 / 3]], 1.0000000000000002, 1.0000000000000002))
    assert normal.conflict is None
    assert normal.row_lower.tolist() == [3]


def test_a_row_with_a_continuous_column_keeps_its_sides():
    normal = normalise(form_of([[1, 1]], 0.5, 1.5, integer=[True, False]))
    assert normal.row_upper.tolist() == [1.5]
    assert not normal.whole_sides[0]
    assert not normal.certifiable


def test_continuous_columns_are_scaled_to_unit_entries():
    normal = normalise(
        form_of(
            [[1, -0.25, 0], [0, 0.25, 1]],
            [0, -INF],
            [0, 2],
            col_upper=[1, 4, 1],
            integer=[True, False, True],
            cost=[0, 3, 0],
        )
    )
    assert normal.matrix.toarray().tolist() == [[1, -1, 0], [0, 1, 1]]
    assert normal.col_upper.tolist() == [1, 1, 1]
    assert normal.cost.tolist() == [0, 12, 0]
    assert normal.x_original(np.ones(3)).tolist() == [1, 4, 1]


def test_fixed_columns_are_substituted_and_empty_rows_dropped():
    normal = normalise(form_of([[1, 1], [0, 2]], [1, 4], [2, 4], col_lower=[0, 2], col_upper=2))
    assert normal.columns.tolist() == [0]
    assert normal.rows.tolist() == [0]
    assert normal.row_lower.tolist() == [-1]
    assert normal.fixed_value.tolist() == [0, 2]


@pytest.mark.parametrize(
    ("form", "named"),
    [
        (form_of([[2, 2]], 1, 1), "row 'r1'"),
        (form_of([[1, 1]], 3, 2), "row 'r1'"),
        (form_of([[1, 1]], 0, 1, col_lower=0.2, col_upper=0.8), "column 'x1'"),
        (form_of([[1.0]], 5, 6, col_lower=2, col_upper=2), "row 'r1' is 2"),
    ],
)
def test_what_rounding_shows_impossible_is_named(form, named):
    conflict = normalise(form).conflict
    assert conflict is not None
    assert conflict.reason.startswith(named)


def test_snaps_are_counted_where_they_change_a_number():
    assert normalise(form_of([[0.1, 1]], 0, 1)).snapped == 0
    assert normalise(form_of([[0.1 + 0.2, 1]], 0, 1)).snapped == 1
    assert normalise(form_of([[1, 1]], 0, 0.99999999999)).snapped == 1


def test_prices_come_back_with_the_factor_of_their_row_and_the_sense():
    normal = normalise(form_of([[0.5, 1.5]], 0, 3, sense="max", cost=[1, 1]))
    row_dual, reduced = normal.duals_original(np.array([-2.0]), np.array([4.0, 1.0]))
    assert row_dual.tolist() == [4.0]
    assert reduced.tolist() == [-4.0, -1.0]


fractions = st.integers(-6, 6).map(lambda k: k / 2) | st.integers(-3, 3).map(lambda k: k / 3)


@st.composite
def small_forms(draw):
    m, n = draw(st.integers(1, 3)), draw(st.integers(1, 3))
    entries = draw(st.lists(fractions, min_size=m * n, max_size=m * n))
    sides = draw(st.lists(st.integers(-8, 8).map(lambda k: k / 2), min_size=m, max_size=m))
    width = draw(st.lists(st.sampled_from([0, 0.5, 1, INF]), min_size=m, max_size=m))
    fixed = draw(st.lists(st.booleans(), min_size=n, max_size=n))
    return form_of(
        np.array(entries).reshape(m, n),
        np.array(sides),
        np.array(sides) + np.array(width),
        col_lower=np.where(fixed, 1.0, -0.5),
        col_upper=np.where(fixed, 1.0, 2.5),
    )


@settings(max_examples=200, deadline=None)
@given(small_forms())
def test_whole_plans_before_and_after_are_the_same(form):
    normal = normalise(form)
    exact = [[Fraction(v).limit_denominator(100) for v in row] for row in form.matrix.toarray()]
    for plan in itertools.product(range(-1, 4), repeat=form.shape[1]):
        before = all(
            low <= x <= up for low, x, up in zip(form.col_lower, plan, form.col_upper, strict=True)
        ) and all(
            low <= sum(a * x for a, x in zip(row, plan, strict=True)) <= up
            for low, row, up in zip(form.row_lower, exact, form.row_upper, strict=True)
        )
        x = np.array(plan, dtype=float)
        kept = x[normal.columns]
        activity = normal.matrix @ kept
        fixed = np.delete(np.arange(x.size), normal.columns)
        after = (
            normal.conflict is None
            and np.array_equal(x[fixed], normal.fixed_value[fixed])
            and bool(((activity >= normal.row_lower) & (activity <= normal.row_upper)).all())
            and bool(((kept >= normal.col_lower) & (kept <= normal.col_upper)).all())
        )
        assert before == after


def test_a_block_restricted_is_the_block():
    normal = normalise(form_of([[1, 0, 1], [0, 1, 0]], 0, [1, 2]))
    part = normal.restrict(np.array([0]), np.array([0, 2]))
    assert part.matrix.toarray().tolist() == [[1, 1]]
    assert part.columns.tolist() == [0, 2]
    assert part.row_upper.tolist() == [1]

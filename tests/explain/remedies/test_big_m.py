"""Smaller coefficients of switches, and on/off rows split: no plan lost, no smaller one valid."""

import itertools
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from switched_models import switched_form, whole_plans

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.remedies.big_m import Prober, loose_state, shrunk, tightened
from pyomo_latpath.explain.remedies.lines import (
    Columns,
    Line,
    columns_of,
    float_above,
    float_below,
    lines_of,
    outlook_of,
)
from pyomo_latpath.explain.remedies.splitting import split
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise


def whole_points(columns):
    ranges = [
        range(int(low), int(high) + 1)
        for low, high in zip(columns.lower, columns.upper, strict=True)
    ]
    return list(itertools.product(*ranges))


def holds(line, point):
    return sum(a * point[j] for j, a in line.terms.items()) <= line.side


lines = st.integers(2, 4).flatmap(
    lambda n: st.tuples(
        st.lists(st.fractions(-6, 6, max_denominator=4), min_size=n, max_size=n),
        st.lists(st.tuples(st.integers(-2, 1), st.integers(0, 2)), min_size=n, max_size=n),
        st.fractions(-8, 8, max_denominator=4),
        st.integers(0, n - 1),
    )
)


def line_and_columns(drawn):
    entries, spans, side, switch = drawn
    bounds = [(low, low + width) for low, width in spans]
    bounds[switch] = (0, 1)
    terms = {j: Fraction(a) for j, a in enumerate(entries) if a}
    size = len(entries)
    columns = Columns(
        [Fraction(low) for low, _ in bounds],
        [Fraction(high) for _, high in bounds],
        np.full(size, True),
        np.array([pair == (0, 1) for pair in bounds]),
    )
    return Line(0, 1, terms, Fraction(side)), columns


@settings(max_examples=200)
@given(lines)
def test_a_tightened_row_keeps_exactly_the_same_whole_plans(drawn):
    line, columns = line_and_columns(drawn)
    if not line.terms:
        return
    after = tightened(line, columns)
    for point in whole_points(columns):
        assert holds(line, point) == holds(after, point)


@settings(max_examples=200)
@given(lines)
def test_no_smaller_coefficient_keeps_them(drawn):
    """The larger side of the first switch is reached, or it is the smaller side already."""
    line, columns = line_and_columns(drawn)
    switches = [j for j in line.terms if columns.binary[j]]
    if not switches:
        return
    switch = max(switches, key=lambda j: abs(line.terms[j]))
    state = loose_state(line, switch)
    after = tightened(line, columns)
    sides = after.side, after.side - after.terms[switch]
    rest = [
        sum(a * point[j] for j, a in after.terms.items() if j != switch)
        for point in whole_points(columns)
        if point[switch] == state
    ]
    noise = Fraction(1, 10**6)
    assert sides[state] <= max(max(rest), sides[1 - state]) + noise or after.terms == line.terms


@settings(max_examples=200)
@given(lines)
def test_the_parts_of_a_split_row_hold_where_it_holds(drawn):
    line, columns = line_and_columns(drawn)
    part = split(line, columns) if line.terms else None
    if part is None:
        return
    for point in whole_points(columns):
        y = point[part.switch]
        limits = [b if y else a for a, b in zip(part.at_0, part.at_1, strict=True)]
        parts_hold = all(
            point[j] <= limit if upper else point[j] >= limit
            for j, limit, upper in zip(part.columns, limits, part.upper, strict=True)
        )
        if holds(line, point):
            assert parts_hold
        elif part.replaces:
            assert not parts_hold


def test_which_rows_are_split_and_whether_they_stay():
    one, zero = Fraction(1), Fraction(0)
    columns = Columns([zero] * 4, [one] * 4, np.full(4, True), np.full(4, True))
    cave = {0: one, 1: one, 2: one}
    open_all = split(Line(0, 1, cave | {3: -3 * one}, zero), columns)
    assert open_all.replaces and len(open_all.columns) == 3
    room_for_two = split(Line(0, 1, cave | {3: -2 * one}, zero), columns)
    assert not room_for_two.replaces and len(room_for_two.columns) == 3
    assert split(Line(0, 1, cave | {3: -one}, zero), columns) is None  # one lot: nothing to gain
    assert split(Line(0, 1, cave | {3: one}, one), columns) is None  # four that exclude each other
    closed = split(Line(0, 1, cave | {3: 3 * one}, 3 * one), columns)
    assert closed.replaces and closed.at_0 == (1, 1, 1) and closed.at_1 == (0, 0, 0)
    all_or_none = split(Line(0, 1, {0: -one, 1: -one, 2: -one, 3: 3 * one}, zero), columns)
    assert all_or_none.upper == (False,) * 3 and all_or_none.replaces


@settings(max_examples=60)
@given(st.integers(0, 10**6))
def test_what_a_linear_program_proves_holds_at_every_whole_plan(seed):
    form = switched_form(np.random.default_rng(seed))
    normal = normalise(form)
    plans = whole_plans(form)
    if normal.conflict is not None or not len(plans):
        return
    columns, prober = columns_of(form), Prober(normal, Deadline(10))
    for line in lines_of(form, outlook_of(form).one_sided):
        switch = max(line.terms, key=lambda j: abs(line.terms[j]))
        if not columns.binary[switch]:
            continue
        most = prober.most(line, switch)
        rest = {j: a for j, a in line.terms.items() if j != switch}
        there = plans[plans[:, switch] == loose_state(line, switch)]
        values = [sum(float(a) * x[j] for j, a in rest.items()) for x in there]
        if most is not None and values:
            assert max(values) <= float(most) + 1e-9
            after = shrunk(tightened(line, columns), switch, most)
            assert all(float(after.side) + 1e-9 >= value for value in _left_sides(after, plans))


def _left_sides(line, plans):
    return [sum(float(a) * x[j] for j, a in line.terms.items()) for x in plans]


@pytest.mark.parametrize("whole", [True, False])
def test_other_rows_prove_a_smaller_coefficient_than_bounds(whole):
    """x1 + x2 <= 1000 y, and elsewhere 2 x1 + 2 x2 <= 7: 7/2, or 3 where both are whole."""
    form = LinearForm.from_arrays(
        [[1, 1, -1000], [2, 2, 0]],
        row_lower=-np.inf,
        row_upper=[0, 7],
        col_lower=0,
        col_upper=[50, 50, 1],
        cost=0,
        integer=[whole, whole, True],
    )
    columns = columns_of(form)
    line = next(lines_of(form, np.array([True] + [False] * (form.shape[0] - 1))))
    assert tightened(line, columns).terms[2] == -100
    most = Prober(normalise(form), Deadline(None)).most(line, 2)
    assert most == (3 if whole else Fraction(7, 2))


def test_no_limit_no_proof():
    form = LinearForm.from_arrays(
        [[1, -1000]],
        row_lower=-np.inf,
        row_upper=0,
        col_lower=[-np.inf, 0],
        col_upper=[np.inf, 1],
        cost=0,
        integer=[False, True],
    )
    columns = columns_of(form)
    line = next(lines_of(form, np.array([True] + [False] * (form.shape[0] - 1))))
    assert tightened(line, columns) is line
    # The row itself is the only limit: 1000, which is no gain.
    most = Prober(normalise(form), Deadline(None)).most(line, 1)
    assert most is None or shrunk(line, 1, most) is line


def test_rounded_floats_lose_nothing():
    third = Fraction(1, 3)
    assert Fraction(float_above(third)) >= third >= Fraction(float_below(third))
    assert float_above(Fraction(5)) == float_below(Fraction(5)) == 5.0
    assert float_above(-third) > float_below(-third)

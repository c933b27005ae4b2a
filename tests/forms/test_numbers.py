"""Reading floats as rationals."""

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pyomo_latpath.forms.numbers import (
    common_scale,
    nearby_fraction,
    read_fractions,
    reading_tolerance,
    simplest_fraction,
    snap,
    whole_numbers,
)


@pytest.mark.parametrize(
    ("value", "meant"),
    [
        (0.1, Fraction(1, 10)),
        (0.1 + 0.2, Fraction(3, 10)),
        (1 / 3, Fraction(1, 3)),
        (-2 / 7, Fraction(-2, 7)),
        (1e9 + 0.1, Fraction(10**10 + 1, 10)),
        (7.0, Fraction(7)),
        (0.0, Fraction(0)),
    ],
)
def test_numbers_are_read_as_they_were_meant(value, meant):
    assert simplest_fraction(value) == meant


def test_small_coefficients_are_not_read_as_nothing():
    assert 0 < simplest_fraction(1e-13) < Fraction(2, 10**13)


@given(st.integers(-5000, 5000), st.integers(1, 5000))
def test_every_simple_fraction_is_read_back_from_its_float(top, bottom):
    assert simplest_fraction(top / bottom) == Fraction(top, bottom)


@given(st.floats(-1e6, 1e6, allow_subnormal=False))
def test_no_smaller_denominator_is_as_near(value):
    found = simplest_fraction(value)
    slack = Fraction(float(reading_tolerance(np.array(value))))
    assert abs(found - Fraction(value)) <= slack
    for denominator in range(1, min(found.denominator, 200)):
        nearest = Fraction(round(Fraction(value) * denominator), denominator)
        assert nearest == found or abs(nearest - Fraction(value)) > slack


@given(st.lists(st.floats(-1e5, 1e5, allow_subnormal=False), min_size=1, max_size=20))
def test_arrays_are_read_as_single_numbers_are(values):
    num, den, read = read_fractions(np.array(values))
    for value, top, bottom, done in zip(values, num, den, read, strict=True):
        if done:
            assert Fraction(int(top), int(bottom)) == simplest_fraction(value)


def test_too_many_odd_values_stay_unread():
    odd = np.random.default_rng(0).random(100)
    assert not read_fractions(odd, most_odd=10)[2].any()


def test_snapping_is_relative_and_keeps_infinities():
    values = np.array([1e12 + 0.1, 1 + 1e-8, 1 + 1e-10, -np.inf])
    assert snap(values).tolist() == [1e12, 1 + 1e-8, 1.0, -np.inf]


@given(st.lists(st.floats(-1e12, 1e12), min_size=1, max_size=10))
def test_whole_numbers_over_one_denominator_are_within_reading_tolerance(values):
    array = np.array(values)
    numerators, denominator = whole_numbers(array)
    for value, top, slack in zip(values, numerators, reading_tolerance(array), strict=True):
        assert abs(Fraction(int(top), denominator) - Fraction(value)) <= Fraction(float(slack))


def test_costs_without_a_common_denominator_are_taken_bit_by_bit():
    values = np.random.default_rng(1).random(200)
    numerators, denominator = whole_numbers(values)
    exact = [Fraction(int(top), denominator) for top in numerators]
    assert exact == [Fraction(value) for value in values]


def test_nearby_fraction_reads_small_values_as_zero():
    assert nearby_fraction(1e-9, 1e-7) == 0


@given(st.lists(st.integers(-(10**7), 10**7), min_size=1, max_size=9), st.integers(0, 6))
def test_decimals_are_read_one_by_one_as_all_at_once(numerators, places):
    values = np.array(numerators) / 10.0**places
    whole, denominator = whole_numbers(values)
    read = [simplest_fraction(value) for value in values.tolist()]
    assert [Fraction(int(top), denominator) for top in whole.tolist()] == read
    assert denominator == common_scale(read)

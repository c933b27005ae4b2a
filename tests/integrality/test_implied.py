"""Implied declarations, against every fixing and every vertex."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from brute_force import vertices
from hypothesis import given, settings
from hypothesis import strategies as st
from mixed_models import FAMILIES
from random_models import random_form

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.implied import implied_columns, mostly_implied


def fibers_are_whole(normal, implied) -> bool:
    """Fix the other integer columns in every way; look at every vertex of what is left."""
    held = np.flatnonzero(normal.integer & ~implied)
    vary = np.flatnonzero(~normal.integer | implied)
    matrix = normal.matrix.toarray()
    ranges = [range(int(normal.col_lower[j]), int(normal.col_upper[j]) + 1) for j in held]
    asked = implied[vary]
    for values in itertools.product(*ranges):
        shift = matrix[:, held] @ np.array(values, float)
        met = vertices(
            matrix[:, vary],
            normal.row_lower - shift,
            normal.row_upper - shift,
            normal.col_lower[vary],
            normal.col_upper[vary],
        )
        if any(point[k].denominator > 1 for point in met for k in np.flatnonzero(asked)):
            return False
    return True


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 10**6), kind=st.sampled_from(["network", "general", "mixed", "tight"]))
def test_what_is_implied_is_whole_whatever_the_others_are(seed, kind):
    normal = normalise(random_form(np.random.default_rng(seed), kind))
    implied = implied_columns(normal)
    assert not implied[~normal.integer].any()
    if normal.conflict is None:
        assert fibers_are_whole(normal, implied)


@pytest.mark.parametrize("kind", ["general", "mixed"])
def test_the_brute_force_sees_what_is_not_implied(kind):
    rng, seen = np.random.default_rng(5), 0
    for _ in range(60):
        normal = normalise(random_form(rng, kind))
        if normal.conflict is None and not fibers_are_whole(normal, normal.integer):
            seen += 1
            assert not implied_columns(normal)[normal.integer].all()
    assert seen >= 10


@pytest.mark.parametrize("family", FAMILIES)
def test_amounts_follow_from_openings(family):
    form = FAMILIES[family](np.random.default_rng(1), 2)
    normal = normalise(form)
    implied = implied_columns(normal)
    mostly = mostly_implied(normal, Deadline(None))
    assert mostly is not None
    openings = np.unique(form.matrix.indices[np.abs(form.matrix.data) > 1]).size > 0
    assert mostly.sum() >= normal.integer.sum() / 2
    assert implied.sum() >= mostly.sum()
    large = np.abs(normal.matrix).max(axis=0).toarray().ravel() > 1
    assert not openings or not implied[large].any()


def test_entries_sides_and_bounds_that_are_not_whole_spoil_what_they_touch():
    data = {"row_lower": -math.inf, "row_upper": [4.5], "col_lower": 0, "col_upper": 9, "cost": 0}
    free = [True, True, False]
    spoilt = LinearForm.from_arrays([[1, 1, 1]], **data, integer=free)
    assert not implied_columns(normalise(spoilt)).any()
    rounded = LinearForm.from_arrays([[1, 1, 1]], **data)
    assert implied_columns(normalise(rounded)).all()
    large = LinearForm.from_arrays([[2, 1, 3]], **data)
    assert implied_columns(normalise(large)).tolist() == [False, True, False]


def test_semicontinuous_columns_are_left_alone():
    form = LinearForm.from_arrays(
        [[1, 1]],
        row_lower=2,
        row_upper=5,
        col_lower=[2, 0],
        col_upper=4,
        cost=1,
        semicontinuous=[True, False],
        integer=[True, True],
    )
    assert not implied_columns(normalise(form))[0]


def test_a_few_implied_columns_are_not_most():
    rng = np.random.default_rng(3)
    form = LinearForm.from_arrays(
        rng.integers(2, 9, (5, 12)), row_lower=0, row_upper=40, col_lower=0, col_upper=5, cost=1
    )
    assert mostly_implied(normalise(form), Deadline(None)) is None


def test_out_of_time_means_fewer():
    normal = normalise(FAMILIES["lot sizing"](np.random.default_rng(0), 3))
    assert not implied_columns(normal, Deadline(0)).any()
    assert mostly_implied(normal, Deadline(0)) is None

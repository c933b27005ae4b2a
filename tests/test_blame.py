"""Named conflicts are conflicts, and lose no member without losing the conflict."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pyomo_latpath.blame import blame
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.routing import solve

FOREVER = Deadline(None)


def without(form, names):
    """The form with all rows but these left without sides."""
    kept = np.array([name in names for name in form.row_names])
    return form.replace(
        row_lower=np.where(kept, form.row_lower, -np.inf),
        row_upper=np.where(kept, form.row_upper, np.inf),
    )


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1), st.sampled_from([1, 3]))
def test_each_named_row_is_needed_for_the_conflict(seed, largest):
    rng = np.random.default_rng(seed)
    m, n = 6, 4
    side = rng.integers(-6, 7, m)
    form = LinearForm.from_arrays(
        rng.integers(-largest, largest + 1, (m, n)),
        row_lower=side,
        row_upper=side + rng.integers(0, 3, m),
        col_lower=0,
        col_upper=3,
        cost=rng.integers(-5, 5, n),
    )
    report = solve(form).report
    if not report.blame or not report.blame_is_minimal:
        return
    rows = {name for name in report.blame if not name.startswith("bounds of ")}
    assert solve(without(form, rows)).status == "infeasible"
    for name in rows:
        assert solve(without(form, rows - {name})).status != "infeasible"


def parity(pairs):
    """Pairs of columns with even sums next to a sum that is odd: whole plans conflict."""
    A = np.zeros((pairs + 2, 2 * pairs))
    for k in range(pairs):
        A[k, 2 * k : 2 * k + 2] = 1, -1
    A[pairs] = 1
    A[pairs + 1, 0] = 1
    return LinearForm.from_arrays(
        A,
        row_lower=[0] * pairs + [5, 0],
        row_upper=[0] * pairs + [5, 1],
        col_lower=0,
        col_upper=2,
        cost=1,
    )


def test_a_conflict_of_whole_plans_is_thinned_out():
    found = blame(normalise(parity(3)), None, False, 60.0, FOREVER)
    assert found.names == ("r1", "r2", "r3", "r4")
    assert found.minimal


def test_out_of_time_nothing_is_claimed():
    found = blame(normalise(parity(3)), None, False, 0.0, Deadline(0))
    assert not found.minimal
    assert found.names == ()


@pytest.mark.parametrize("time_limit", [None, 5])
def test_bounds_are_to_blame_too(time_limit):
    form = LinearForm.from_arrays(
        [[1, 1]], row_lower=9, row_upper=np.inf, col_lower=0, col_upper=2, cost=0
    )
    report = solve(form, time_limit=time_limit).report
    assert report.blame == ("r1", "bounds of x1", "bounds of x2")

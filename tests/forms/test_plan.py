"""What a plan misses is found, named and measured."""

import numpy as np
import pytest

from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.plan import feasible_start, largest_violation

FORM = LinearForm.from_arrays(
    [[1, 1, 0], [0, 1, -1]],
    row_lower=[-np.inf, 0],
    row_upper=[3, 2],
    col_lower=0,
    col_upper=[2, 2, 5],
    cost=0,
    integer=[True, True, False],
    row_names=["shelf", "van"],
    col_names=["brie", "tomme", "litres"],
)


@pytest.mark.parametrize(
    ("plan", "missed"),
    [
        ([1, 2, 0.5], 0.0),
        ([2, 2, 0], 1.0),
        ([3, 0, 0], 1.0),
        ([0.75, 0, 0], 0.25),
        ([0, 0, 0.5], 0.5),
    ],
)
def test_the_largest_miss_counts(plan, missed):
    assert largest_violation(FORM, np.array(plan, dtype=float)) == missed


@pytest.mark.parametrize(
    ("plan", "named"),
    [
        ([2, 2, 0], "row 'shelf' is at 4"),
        ([3, 0, 0], "column 'brie' is at 3"),
        ([0.5, 0, 0], "column 'brie', which must be a whole number"),
        ([0, 0, np.nan], "column 'litres'"),
        ([0, 0, 0.5], "row 'van' is at -0.5"),
        ([0, 0], "needs 3 values"),
    ],
)
def test_a_start_that_is_no_plan_is_named(plan, named):
    with pytest.raises(ValueError, match=named):
        feasible_start(FORM, plan)


def test_a_start_is_rounded_within_tolerance():
    assert feasible_start(FORM, [1 + 1e-9, 2, 0.5]).tolist() == [1, 2, 0.5]

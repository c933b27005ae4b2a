"""Whole optima behind fractional ones are found, and only where they exist."""

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from small_forms import triangle

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.sampling import program_of
from pyomo_latpath.paths.optimal_face import attainable, is_whole, whole_optimum
from pyomo_latpath.proof import plan_holds

FOREVER = Deadline(None)


@settings(max_examples=80, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_what_is_found_is_a_whole_plan_as_good_as_the_relaxation(seed):
    rng = np.random.default_rng(seed)
    form = LinearForm.from_arrays(
        rng.integers(0, 2, (5, 7)),
        row_lower=rng.integers(0, 2, 5),
        row_upper=2,
        col_lower=0,
        col_upper=1,
        cost=rng.integers(0, 3, 7),
    )
    normal = normalise(form)
    if normal.conflict or not normal.rows.size:
        return
    lp = program_of(normal)
    optimum = lp.solve()
    if optimum.status != "optimal" or is_whole(optimum.x, normal.integer):
        return
    x = whole_optimum(normal, lp, optimum, seed % 97, 10_000, FOREVER)
    best = min(
        (
            normal.cost @ plan
            for plan in map(np.array, itertools.product((0.0, 1.0), repeat=normal.columns.size))
            if plan_holds(normal, plan)
        ),
        default=np.inf,
    )
    if x is not None:
        assert plan_holds(normal, x)
        assert abs(normal.cost @ x - optimum.objective) < 1e-6
        assert normal.cost @ x == best
    if not attainable(normal, optimum.objective):
        assert best > optimum.objective + 1e-6


def test_a_whole_optimum_beside_a_fractional_one_is_found():
    # Two triangles, one of them priced flat: (1/2, 1/2, 1/2) ties with whole plans.
    A = [[1, 1, 0, 1], [0, 1, 1, 1], [1, 0, 1, 1]]
    form = LinearForm.from_arrays(
        A, row_lower=1, row_upper=1, col_lower=0, col_upper=1, cost=[2, 2, 2, 3]
    )
    normal = normalise(form)
    lp = program_of(normal)
    lp.set_cost(np.array([2.0, 2, 2, 4]))
    optimum = lp.solve()
    assert not is_whole(optimum.x, normal.integer)
    lp.set_cost(normal.cost)
    optimum = lp.solve(method="primal")
    assert optimum.objective == 3.0
    if not is_whole(optimum.x, normal.integer):
        x = whole_optimum(normal, lp, optimum, 0, 10_000, FOREVER)
        assert x is not None
        assert x.tolist() == [0, 0, 0, 1]


@pytest.mark.parametrize(
    ("most_pivots", "deadline"), [(10_000, Deadline(0)), (0, FOREVER)], ids=["time", "pivots"]
)
def test_without_time_or_pivots_there_is_no_search(most_pivots, deadline):
    normal = normalise(triangle(row_lower=1, row_upper=2, cost=[1, 1, 0]))
    lp = program_of(normal)
    assert whole_optimum(normal, lp, lp.solve(), 0, most_pivots, deadline) is None

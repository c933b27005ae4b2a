"""Relaxations solved one after another: the optimum of each, from wherever the last one ended."""

from __future__ import annotations

from collections import deque

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from random_models import KINDS, random_form

from pyomo_latpath import relaxation as relaxation_module
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import NormalForm, normalise
from pyomo_latpath.relaxation import Relaxation, relax

FOREVER = Deadline(None)


def in_turn(members: list[NormalForm]) -> list[Relaxation]:
    last: deque[Relaxation] = deque(maxlen=1)
    solved = []
    for member in members:
        solved.append(relax(member, last, FOREVER))
        # Whoever has the program may do anything with it before it is put back.
        solved[-1].program.set_cost(-member.cost)
        solved[-1].program.set_col_bounds(member.col_lower, np.maximum(member.col_lower, 0) + 1)
        solved[-1].program.solve()
        last.append(solved[-1])
    return solved


@given(st.integers(0, 10**9), st.sampled_from(KINDS))
def test_each_optimum_is_that_from_nothing(seed, kind):
    rng = np.random.default_rng(seed)
    form = random_form(rng, kind)
    normal = normalise(form)
    if normal.conflict is not None or not normal.columns.size:
        return
    members = [normal]
    for _ in range(5):
        form = form.replace(cost=form.cost + rng.integers(-2, 3, form.shape[1]))
        if rng.random() < 0.4:
            shift = rng.integers(-1, 2, form.shape[0])
            form = form.replace(row_lower=form.row_lower + shift, row_upper=form.row_upper + shift)
            other = normalise(form, normal.scaled)
            if other.conflict is not None:
                return
            normal = other
        else:
            normal = normal.priced_as(form)
        members.append(normal)
    for member, solved in zip(members, in_turn(members), strict=True):
        fresh = relax(member, deque(), FOREVER).optimum
        assert solved.optimum.status == fresh.status
        if fresh.status == "optimal":
            assert solved.optimum.objective == pytest.approx(fresh.objective, rel=1e-6, abs=1e-6)


def covering(cost: np.ndarray) -> NormalForm:
    rng = np.random.default_rng(0)
    A = (rng.random((30, 200)) < 0.15).astype(float)
    A[np.arange(30), np.arange(30)] = 1
    return normalise(
        LinearForm.from_arrays(A, row_lower=1, row_upper=9, col_lower=0, col_upper=1, cost=cost)
    )


def test_the_same_costs_need_no_pivot():
    cost = np.random.default_rng(1).integers(1, 99, 200).astype(float)
    first, again = in_turn([covering(cost), covering(cost)])
    assert first.optimum.pivots > 0
    assert again.optimum.pivots == 0


def test_a_start_that_costs_more_than_nothing_is_not_tried_again(monkeypatch):
    rng = np.random.default_rng(1)
    first, second, third = (covering(rng.integers(1, 99, 200).astype(float)) for _ in range(3))
    last: deque[Relaxation] = deque(maxlen=1)
    begun = relax(first, last, FOREVER)
    monkeypatch.setattr(relaxation_module, "FEW_PIVOTS", -begun.pivots)  # none at all
    for member in (second, third):
        last.append(begun)
        begun = relax(member, last, FOREVER)
        assert begun.lost
        fresh = relax(member, deque(), FOREVER).optimum
        assert begun.optimum.objective == pytest.approx(fresh.objective)

"""What is left without some rows: remembered answers are those of a fresh look."""

import numpy as np
from grouped_models import certified_without, grouped_form
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import KINDS, random_form

from pyomo_latpath.certificates import Certificate, check_certificate, fingerprint
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.relaxation import Relaxation
from pyomo_latpath.explain.remains import Remains
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise


def some_rows(rng, form):
    return rng.random(form.shape[0]) < 0.7


@settings(max_examples=25)
@given(st.integers(0, 2**32))
def test_remembered_answers_are_those_of_a_fresh_look(seed):
    rng = np.random.default_rng(seed)
    form = grouped_form(rng)
    remains = Remains(form)
    for _ in range(6):
        kept = some_rows(rng, form)
        told = remains.certified(kept, Deadline(None)) is not None
        assert told == certified_without(form, np.flatnonzero(~kept))


@settings(max_examples=40)
@given(st.integers(0, 2**32), st.sampled_from(KINDS))
def test_proofs_of_what_is_left_are_accepted_by_the_checker(seed, kind):
    rng = np.random.default_rng(seed)
    form = random_form(rng, kind)
    remains, kept = Remains(form), some_rows(rng, form)
    certified = remains.certified(kept, Deadline(None))
    if certified is None:
        return
    part = remains.without(kept)
    blocks = tuple(block for _, block in certified.proofs)
    check_certificate(part, Certificate(fingerprint(part), blocks))


@settings(max_examples=25)
@given(st.integers(0, 2**32))
def test_the_relaxation_without_rows_is_that_of_a_form_without_them(seed):
    rng = np.random.default_rng(seed)
    form = grouped_form(rng)
    normal = normalise(form)
    if normal.conflict is not None:
        return
    relaxation = Relaxation(normal)
    relaxation.optimum(Deadline(None))
    for _ in range(3):
        kept = some_rows(rng, form)
        rows = np.flatnonzero(kept)
        alone = LinearForm.from_arrays(
            form.matrix[rows, :],
            row_lower=form.row_lower[rows],
            row_upper=form.row_upper[rows],
            col_lower=form.col_lower,
            col_upper=form.col_upper,
            cost=form.cost,
            sense=form.sense,
        )
        told = relaxation.optimum(Deadline(None), kept[normal.rows])
        fresh = Relaxation(normalise(alone))
        expected = fresh.objective(fresh.optimum(Deadline(None)))
        assert abs(relaxation.objective(told) - expected) < 1e-7


def test_without_time_nothing_is_certified_and_nothing_wrong_is_remembered():
    shifts = LinearForm.from_arrays(
        [[1, 1, 0], [1, 1, 1], [0, 1, 1]],
        row_lower=1,
        row_upper=9,
        col_lower=0,
        col_upper=1,
        cost=1,
    )
    remains, everything = Remains(shifts), np.ones(3, np.bool_)
    assert remains.certified(everything, Deadline(0)) is None
    assert remains.certified(everything, Deadline(None)).structures == ("interval",)

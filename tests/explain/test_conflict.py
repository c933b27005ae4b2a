"""Smallest conflicts, against all submatrices and at random fractional vertices."""

import numpy as np
import pytest
from all_minors import is_tu
from grouped_models import grouped_form
from hypothesis import given, settings
from hypothesis import strategies as st
from regular_models import disguised, regular

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.conflict import cycle_order, violators
from pyomo_latpath.explain.relaxation import Place, Relaxation
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.regular.decision import totally_unimodular


def conflicts_at_optimum(form):
    normal = normalise(form)
    if normal.conflict is not None:
        return []
    relaxation = Relaxation(normal)
    optimum = relaxation.optimum(Deadline(None))
    if optimum.status != "optimal":
        return []
    names = [name.split("[")[0] for name in form.row_names]
    return list(violators(normal, relaxation.places(optimum.x), names, Deadline(None)))


def every_smaller_part_is_unimodular(entries):
    k = entries.shape[0]
    lines = range(k)
    return all(is_tu(np.delete(entries, i, axis=axis)) for i in lines for axis in (0, 1) if k > 1)


@settings(max_examples=100)
@given(st.integers(0, 2**32))
def test_what_is_told_of_a_fractional_optimum_stands_in_the_model(seed):
    form = grouped_form(np.random.default_rng(seed))
    dense = normalise(form)
    for found in conflicts_at_optimum(form):
        rows = np.searchsorted(dense.rows, found.rows)
        columns = np.searchsorted(dense.columns, found.columns)
        assert (dense.matrix.toarray()[np.ix_(rows, columns)] == found.entries).all()
        assert found.row_names == tuple(form.row_names[i] for i in found.rows)
        assert found.column_names == tuple(form.col_names[j] for j in found.columns)
        assert set(found.groups) == {name.split("[")[0] for name in found.row_names}
        assert found.determinant == round(np.linalg.det(found.entries))
        if found.entries.shape == (1, 1):
            assert abs(found.determinant) > 1
        else:
            assert abs(found.determinant) == 2
            assert every_smaller_part_is_unimodular(found.entries)
            # Camion (1965): even sums of rows and columns, and a total of 2 modulo 4.
            sums = [*found.entries.sum(axis=0), *found.entries.sum(axis=1)]
            assert all(value % 2 == 0 for value in sums) and found.entries.sum() % 4 == 2


@settings(max_examples=100)
@given(st.integers(0, 2**32))
def test_a_fractional_optimum_with_whole_numbers_has_a_conflict(seed):
    form = grouped_form(np.random.default_rng(seed))
    normal = normalise(form)
    relaxation = Relaxation(normal)
    optimum = relaxation.optimum(Deadline(None))
    whole = optimum.status != "optimal" or np.abs(optimum.x - np.rint(optimum.x)).max() < 1e-6
    if normal.conflict is None:
        assert whole == (not conflicts_at_optimum(form))


@pytest.mark.parametrize("size", [3, 5, 9])
def test_an_odd_cycle_is_told_in_its_order(size):
    rng = np.random.default_rng(size)
    matrix = np.eye(size) + np.roll(np.eye(size), 1, axis=1)
    matrix = matrix[rng.permutation(size)][:, rng.permutation(size)]
    form = LinearForm.from_arrays(
        matrix, row_lower=-np.inf, row_upper=1, col_lower=0, col_upper=1, cost=-1
    )
    (found,) = conflicts_at_optimum(form)
    assert found.cycle and found.minimal
    own_and_before = np.eye(size) + np.roll(np.eye(size), -1, axis=1)
    assert (found.entries == own_and_before).all()


def test_a_square_with_a_chord_is_no_cycle():
    assert cycle_order(np.array([[1, 1, 1], [0, 1, 1], [1, 0, 1]])) is None
    two = np.kron(np.eye(2, dtype=int), np.ones((2, 2), dtype=int))
    assert cycle_order(two) is None


def test_conflicts_at_different_places_are_told_each():
    cycle = np.eye(3) + np.roll(np.eye(3), 1, axis=1)
    form = LinearForm.from_arrays(
        np.kron(np.eye(5), cycle), row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=-1
    )
    found = conflicts_at_optimum(form)
    assert len(found) == 3
    assert len({j for each in found for j in each.columns.tolist()}) == 9


def test_a_coefficient_is_told_where_nothing_else_is_wrong():
    form = LinearForm.from_arrays(
        [[2, 3, 0], [0, 1, 1]],
        row_lower=-np.inf,
        row_upper=[4, 1],
        col_lower=0,
        col_upper=[1, 2, 1],
        cost=[-1, -2, 0],
        row_names=["budget", "cave"],
    )
    (found,) = conflicts_at_optimum(form)
    assert found.row_names == ("budget",) and found.entries.shape == (1, 1) and not found.cycle
    assert abs(found.determinant) in (2, 3)


@pytest.mark.parametrize("seed", range(4))
def test_a_sum_of_networks_and_others_has_no_conflict_until_a_sign_is_wrong(seed):
    rng = np.random.default_rng(seed)
    matrix = disguised(rng, regular(rng, leaves=3, size=5), pivots=2).matrix

    def conflicts(entries):
        form = LinearForm.from_arrays(
            entries, row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=0
        )
        normal = normalise(form)
        whole = Place(np.arange(normal.rows.size), np.arange(normal.columns.size))
        names = ["cave"] * form.shape[0]
        return list(violators(normal, [whole], names, Deadline(None)))

    assert conflicts(matrix) == []
    broken = matrix.copy()
    for i, j in rng.permutation(np.argwhere(matrix)):
        broken[i, j] *= -1
        if not totally_unimodular(broken).holds:
            break
        broken[i, j] *= -1
    (found,) = conflicts(broken)
    assert abs(found.determinant) == 2 and every_smaller_part_is_unimodular(found.entries)

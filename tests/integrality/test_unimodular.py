"""Equality systems that are unimodular, against all of their determinants and vertices."""

import itertools
import json
import math
from fractions import Fraction

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from brute_force import maximal_minors, solve, vertices
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from system_models import FAMILIES, mixed_rows, sums_and_differences

from pyomo_latpath.certificates import (
    CertificateError,
    Network,
    Trivial,
    Unimodular,
    check_certificate,
)
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality import unimodular
from pyomo_latpath.integrality.assess import assess
from pyomo_latpath.integrality.recognise import prove_tu


@st.composite
def systems(draw, most_rows=3, most_columns=4):
    """Entries from -3 to 3, which rows are equalities, and sides."""
    m, n = draw(st.integers(1, most_rows)), draw(st.integers(1, most_columns))
    entries = draw(st.lists(st.integers(-3, 3), min_size=m * n, max_size=m * n))
    equality = draw(st.lists(st.sampled_from([True, True, False]), min_size=m, max_size=m))
    sides = draw(st.lists(st.integers(-3, 3), min_size=m, max_size=m))
    matrix = np.array(entries, np.int64).reshape(m, n)
    if m > 1 and draw(st.booleans()):
        matrix[-1] = matrix[0] - draw(st.integers(-1, 1)) * matrix[1 % (m - 1)]
    return matrix, np.array(equality), np.array(sides)


def rest(matrix):
    proof = prove_tu(matrix)
    return None if proof is None else proof[1]


def by_definition(matrix):
    """Stands for a prover that misses nothing."""
    return Trivial() if is_tu(matrix.toarray()) else None


def recognise(matrix, equality, sides, prover=rest):
    return unimodular.recognise(
        sp.csc_array(matrix), equality, np.array(sides), prover, Deadline(None)
    )


def with_slacks(matrix, equality):
    return np.hstack([matrix, np.eye(len(matrix), dtype=np.int64)[:, ~equality]])


def basis_determinants(matrix, equality):
    """Up to sign, for every basis of what the rows, with slacks, generate over the integers: the
    greatest common divisor of the determinants in its columns."""
    whole = with_slacks(matrix, equality)
    rank = np.linalg.matrix_rank(whole)
    choices = itertools.combinations(range(whole.shape[1]), rank)
    return [math.gcd(*maximal_minors(whole[:, columns].T)) for columns in choices]


def is_whole_for(matrix, equality, sides):
    """Whether some basis turns the sides into whole numbers; None where they contradict."""
    whole, b = with_slacks(matrix, equality), np.where(equality, sides, 0)
    rank = np.linalg.matrix_rank(whole)
    if np.linalg.matrix_rank(np.column_stack([whole, b])) > rank:
        return None
    for columns in itertools.combinations(range(whole.shape[1]), rank):
        for rows in itertools.combinations(range(len(whole)), rank):
            point = solve(whole[np.ix_(rows, columns)].tolist(), b[list(rows)].tolist())
            if point is not None:
                return all(value.denominator == 1 for value in point)
    return True


@settings(max_examples=250)
@given(systems(most_rows=4))
def test_recognised_if_and_only_if_it_is_unimodular_or_whole_for_its_sides(system):
    matrix, equality, sides = system
    assume(equality.any())
    values = set(basis_determinants(matrix, equality)) - {0}
    whole = is_whole_for(matrix, equality, sides)
    assume(whole is not None)
    part = recognise(matrix, equality, sides, by_definition)
    assert (part is not None) == (len(values) <= 1 and whole)
    assert part is None or part.needs_sides == bool(values - {1})


@settings(max_examples=150)
@given(systems(), st.lists(st.tuples(st.integers(-2, 1), st.integers(0, 3)), min_size=4))
def test_what_is_recognised_has_whole_vertices(system, box):
    matrix, equality, sides = system
    part = recognise(matrix, equality, sides)
    assume(part is not None)
    part.check(sp.csc_array(matrix))
    part.check_sides([(s, s) if e else (None, s) for s, e in zip(sides, equality, strict=True)])
    n = matrix.shape[1]
    lower = np.array([low for low, _ in box[:n]])
    upper = lower + np.array([width for _, width in box[:n]])
    low = np.where(equality, sides, -np.inf)
    for point in vertices(matrix, low, sides, lower, upper):
        assert all(value.denominator == 1 for value in point)


def test_the_right_one_of_dependent_rows_is_dropped():
    matrix = np.array([[1, 1], [1, -1], [1, 0]])
    part = recognise(matrix, np.full(3, True), [3, 1, 2])
    assert not part.needs_sides
    part.check(sp.csc_array(matrix))


def test_rows_of_which_no_choice_generates_the_others():
    """Differences of 6, 10 and 15 together make one of 1, any two of them do not."""
    matrix = np.array([[1, 0], [1, 6], [1, 10], [1, 15]])
    part = recognise(matrix, np.full(4, True), [0, 6, 10, 15])
    assert not part.needs_sides
    part.check(sp.csc_array(matrix))


@pytest.mark.parametrize(("sides", "whole"), [((2, 0), True), ((3, 1), True), ((1, 0), False)])
def test_some_systems_are_whole_for_some_sides_only(sides, whole):
    part = recognise(np.array([[1, 1], [1, -1]]), np.full(2, True), sides)
    assert (part is not None) == whole
    if whole:
        assert part.needs_sides


def sides_of(system):
    """As the checker asks for them."""
    limits = zip(system.sides.tolist(), system.equality.tolist(), strict=True)
    return [(Fraction(side) if equal else None, Fraction(side)) for side, equal in limits]


@pytest.mark.parametrize("family", FAMILIES)
def test_thousands_of_rows(family):
    system = family(1500, np.random.default_rng(1))
    assert prove_tu(system.matrix) is None
    part = unimodular.recognise(*system, rest, Deadline(60))
    assert isinstance(part.rest, Network)
    assert part.needs_sides == (family is sums_and_differences)
    again = Unimodular.from_dict(json.loads(json.dumps(part.to_dict())))
    again.check(system.matrix)
    again.check_sides(sides_of(system))


def test_five_thousand_rows_of_ten_thousand_columns():
    system = mixed_rows(5000, np.random.default_rng(2))
    assert system.matrix.shape == (5000, 10000)
    part = unimodular.recognise(*system, rest, Deadline(60))
    part.check(system.matrix)
    spoilt = system.matrix.copy()
    spoilt.data[1234] += 1
    with pytest.raises(CertificateError):
        part.check(spoilt)


@pytest.mark.parametrize("family", FAMILIES)
def test_families_with_an_entry_changed_against_all_determinants(family):
    rng = np.random.default_rng(3)
    seen = set()
    for k in range(16):
        system = family(6, rng)
        matrix = system.matrix.toarray()[:, :8]
        for _ in range(k % 3):
            matrix[tuple(rng.integers(0, size) for size in matrix.shape)] += rng.choice([-1, 1])
        values = set(basis_determinants(matrix, system.equality)) - {0}
        sides = matrix @ rng.integers(0, 3, matrix.shape[1])
        whole = is_whole_for(matrix, system.equality, sides)
        part = recognise(matrix, system.equality, sides, by_definition)
        assert (part is not None) == (len(values) <= 1 and whole)
        seen.add(part is not None)
    assert seen == {True, False}


@pytest.mark.parametrize("family", FAMILIES)
def test_families_as_models(family):
    system = family(100, np.random.default_rng(4))
    low = np.where(system.equality, system.sides, system.sides - 3)
    form = LinearForm.from_arrays(
        system.matrix, row_lower=low, row_upper=system.sides, col_lower=0, col_upper=3, cost=0
    )
    finding = assess(form, samples=1)
    assert finding.verdict == "proven"
    assert {block.structure for block in finding.blocks} - {"trivial"} == {"unimodular"}
    for block in finding.blocks:
        check_certificate(form, block.certificate)


def test_entries_of_any_size_come_from_row_operations():
    rng = np.random.default_rng(4)
    mixed = np.tril(rng.integers(-2, 3, (30, 30)), -1) + np.eye(30, dtype=np.int64)
    network = np.zeros((30, 60), np.int64)
    for j, first in enumerate(rng.integers(0, 29, 60)):
        network[first, j], network[rng.integers(first + 1, 30), j] = 1, -1
    network = np.hstack([np.eye(30, dtype=np.int64), network])
    matrix = mixed @ network
    assert np.abs(matrix).max() > 1
    part = recognise(matrix, np.full(30, True), np.zeros(30, np.int64))
    part.check(sp.csc_array(matrix))
    again = Unimodular.from_dict(part.to_dict())
    again.check(sp.csc_array(matrix))


def test_systems_without_an_equality_are_left_to_others():
    assert recognise(np.array([[2]]), np.array([False]), [0]) is None


def test_too_much_work_is_given_up(monkeypatch):
    matrix = np.array([[2, 3], [1, 1]])
    monkeypatch.setattr(unimodular, "MOST_TIMES", 0)
    monkeypatch.setattr(unimodular, "MOST_WORK", 3)
    assert recognise(matrix, np.full(2, True), [5, 2]) is not None
    monkeypatch.setattr(unimodular, "MOST_WORK", 2)
    assert recognise(matrix, np.full(2, True), [5, 2]) is None


def test_time_is_kept():
    matrix = sp.csc_array(np.array([[2, 3], [1, 1]]))
    late = unimodular.recognise(matrix, np.full(2, True), np.array([5, 2]), rest, Deadline(0))
    assert late is None

"""Exact solutions of square systems and exact vertices, against elimination in fractions."""

from fractions import Fraction

import numpy as np
import pytest
from brute_force import solve
from hypothesis import given
from hypothesis import strategies as st
from small_forms import triangle

from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.highs import Basis
from pyomo_latpath.integrality.exact_vertex import PRIME, exact_vertex, solve_square
from pyomo_latpath.integrality.sampling import program_of

ENTRY = st.fractions(min_value=-20, max_value=20, max_denominator=6)


def as_rows(table):
    return [{j: a for j, a in enumerate(row) if a} for row in table]


@st.composite
def square(draw):
    """A square system, sparse or dense."""
    size = draw(st.integers(1, 6))
    entry = st.one_of(st.just(Fraction(0)), ENTRY) if draw(st.booleans()) else ENTRY
    table = draw(
        st.lists(st.lists(entry, min_size=size, max_size=size), min_size=size, max_size=size)
    )
    return table, draw(st.lists(ENTRY, min_size=size, max_size=size))


@given(square())
def test_the_same_solution_as_elimination(system):
    table, right = system
    assert solve_square(as_rows(table), right) == solve(table, right)


def test_a_core_with_a_large_determinant():
    size = 40
    rng = np.random.default_rng(1)
    table = rng.integers(-9, 10, (size, size))
    rows = as_rows([[Fraction(int(a)) for a in row] for row in table])
    right = [Fraction(int(b)) for b in rng.integers(-9, 10, size)]
    found = solve_square(rows, right)
    assert max(value.denominator for value in found) > PRIME
    for row, side in zip(rows, right, strict=True):
        assert sum(a * found[j] for j, a in row.items()) == side


def test_a_large_core_is_solved_if_it_is_sparse():
    size = 800
    shift = np.random.default_rng(2).permutation(size)
    # A cycle with a chord: no row has one unknown, no unknown stands in one row.
    rows = [{int(shift[i]): 1, int(shift[i - 1]): 1} for i in range(size - 1)]
    rows.append({int(shift[-1]): 1, int(shift[-2]): 1, int(shift[0]): 1})
    rows = [{j: Fraction(a) for j, a in row.items()} for row in rows]
    found = solve_square(rows, [Fraction(1)] * size)
    for row in rows:
        assert sum(a * found[j] for j, a in row.items()) == 1


def test_a_large_core_is_given_up_if_it_is_dense():
    table = np.random.default_rng(3).integers(1, 9, (500, 500))
    rows = as_rows([[Fraction(int(a)) for a in row] for row in table])
    assert solve_square(rows, [Fraction(1)] * 500) is None


def test_a_system_singular_modulo_the_prime_is_given_up():
    # Two equations in a core that is regular, but whose determinant is the prime.
    rows = as_rows([[Fraction(PRIME + 1), Fraction(1)], [Fraction(1), Fraction(1)]])
    assert solve_square(rows, [Fraction(1), Fraction(0)]) is None


def test_an_empty_system():
    assert solve_square([], []) == []


def vertex_of(form):
    piece = normalise(form)
    program = program_of(piece)
    assert program.solve().status == "optimal"
    return piece, program.basis()


def test_the_vertex_of_an_odd_cycle_is_one_half_everywhere():
    assert exact_vertex(*vertex_of(triangle())) == [Fraction(1, 2)] * 3


@pytest.mark.parametrize("step", [0.1, 0.3, 1 / 3, 1e-3])
def test_decimals_are_read_as_fractions(step):
    form = LinearForm.from_arrays(
        [[step, 1.0]], row_lower=1, row_upper=1, col_lower=[0, 0], col_upper=[9999, 0.5],
        cost=[1, 0], integer=[False, False],
    )  # fmt: skip
    piece, basis = vertex_of(form)
    x = exact_vertex(piece, basis)
    exact = {0.1: Fraction(5), 0.3: Fraction(5, 3), 1 / 3: Fraction(3, 2), 1e-3: Fraction(500)}
    assert x[0] * Fraction(int(piece.col_num[0]), int(piece.col_den[0])) == exact[step]


def test_a_basis_that_is_not_feasible_or_not_square_gives_nothing():
    form = LinearForm.from_arrays(
        [[2.0, 1.0]], row_lower=-np.inf, row_upper=9, col_lower=0, col_upper=3, cost=-1
    )
    piece = normalise(form)
    too_large = Basis(np.array([1, 0], np.int8), np.array([2], np.int8))
    assert exact_vertex(piece, too_large) is None
    no_square = Basis(np.array([1, 1], np.int8), np.array([2], np.int8))
    assert exact_vertex(piece, no_square) is None


def test_a_column_resting_at_infinity_gives_nothing():
    form = LinearForm.from_arrays(
        [[2.0, 1.0]], row_lower=-np.inf, row_upper=9, col_lower=0, col_upper=np.inf, cost=-1
    )
    at_upper = Basis(np.array([2, 0], np.int8), np.array([1], np.int8))
    assert exact_vertex(normalise(form), at_upper) is None

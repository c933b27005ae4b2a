"""Proofs that a block is infeasible, with fractions that scaling does not make whole."""

import numpy as np
import pytest
from brute_force import vertices
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import random_form

from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.infeasible import conflicting_rows
from pyomo_latpath.integrality.sampling import program_of


@settings(max_examples=100)
@given(st.integers(0, 10**6), st.sampled_from(["mixed", "tight", "decimals"]))
def test_what_highs_calls_infeasible_is_proven_so_and_nothing_else_is(seed, kind):
    piece = normalise(random_form(np.random.default_rng(seed), kind))
    if piece.conflict is not None or not piece.columns.size:
        return
    result = program_of(piece).solve()
    if result.status == "infeasible":
        rows = conflicting_rows(piece, result.farkas)
        assert rows is not None
        limits = piece.row_lower[rows], piece.row_upper[rows], piece.col_lower, piece.col_upper
        assert not vertices(piece.matrix.toarray()[rows], *limits)
    else:
        for y in np.vstack([np.eye(piece.rows.size), np.ones(piece.rows.size)]):
            assert conflicting_rows(piece, y) is None


@pytest.mark.parametrize("upper", [2, 3])
def test_the_sides_decide(upper):
    form = LinearForm.from_arrays(
        [[1, 2 / 3], [1, 2 / 3]],
        row_lower=[3, -np.inf],
        row_upper=[np.inf, upper],
        col_lower=-np.inf,
        col_upper=np.inf,
        cost=0,
        integer=[True, False],
    )
    found = conflicting_rows(normalise(form), np.array([-0.5, 0.5]))
    assert (found is not None) == (upper < 3)


@pytest.mark.parametrize("farkas", [None, [0.0, 0.0], [np.nan, 1.0]])
def test_no_multipliers_no_proof(farkas):
    form = LinearForm.from_arrays(
        [[1, 1], [1, 1]], row_lower=[3, 0], row_upper=[4, 2], col_lower=0, col_upper=9, cost=0
    )
    y = None if farkas is None else np.array(farkas)
    assert conflicting_rows(normalise(form), y) is None

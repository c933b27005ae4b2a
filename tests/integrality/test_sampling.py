"""The vertex sampler: what it finds holds exactly, and it keeps time, seed and objective."""

from fractions import Fraction

import numpy as np
import pytest
from brute_force import solve, vertices
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import random_form

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.highs import LpResult
from pyomo_latpath.integrality.assess import assess
from pyomo_latpath.integrality.sampling import program_of, sample_vertices


def look(form, samples=16, seed=0, deadline=None, **options):
    piece = normalise(form)
    return sample_vertices(
        piece, samples=samples, seed=seed, deadline=deadline or Deadline(None), **options
    )


def odd_cycle(size, **changes):
    """Turning orders round a table of `size` wheels: of two neighbours at most one."""
    matrix = np.eye(size) + np.roll(np.eye(size), 1, axis=1)
    form = LinearForm.from_arrays(
        matrix, row_lower=-np.inf, row_upper=1, col_lower=0, col_upper=1, cost=-1
    )
    return form.replace(**changes)


def assert_vertex(form, witness):
    """The witness is a feasible point, and the only one with its tight rows and bounds."""
    piece = normalise(form)
    values = dict(zip(witness.columns.tolist(), witness.values, strict=True))
    for k, j in enumerate(piece.columns.tolist()):
        assert piece.col_num[k] == piece.col_den[k] == 1
        assert piece.col_lower[k] <= values[j] <= piece.col_upper[k]
    lines, right = [], []
    for k, i in enumerate(piece.rows.tolist()):
        row = [Fraction(a) for a in piece.matrix.toarray()[k]]
        total = sum(a * values[j] for a, j in zip(row, piece.columns.tolist(), strict=True))
        assert piece.row_lower[k] <= total <= piece.row_upper[k]
        if i in witness.tight_rows:
            assert total in (piece.row_lower[k], piece.row_upper[k])
            lines.append(row)
            right.append(total)
    for k, j in enumerate(piece.columns.tolist()):
        if j in witness.tight_bounds:
            assert values[j] in (piece.col_lower[k], piece.col_upper[k])
            lines.append([Fraction(int(k == other)) for other in range(piece.columns.size)])
            right.append(values[j])
    assert solve(lines, right) == [values[j] for j in piece.columns.tolist()]


@pytest.mark.parametrize("size", [3, 5, 11])
def test_an_odd_cycle_has_a_witness(size):
    form = odd_cycle(size)
    sample = look(form)
    assert_vertex(form, sample.witness)
    assert set(sample.witness.values) == {Fraction(1, 2)}


@settings(max_examples=60)
@given(st.integers(0, 10**6))
def test_witnesses_are_vertices_and_their_absence_is_honest(seed):
    form = random_form(np.random.default_rng(seed), "general")
    piece = normalise(form)
    if piece.conflict is not None:
        return
    sample = look(form)
    limits = piece.row_lower, piece.row_upper, piece.col_lower, piece.col_upper
    points = vertices(piece.matrix.toarray(), *limits)
    assert sample.unconfirmed == 0
    assert sample.infeasible == (not points)
    fractional = [p for p in points if any(v.denominator > 1 for v in p)]
    if sample.witness is not None:
        assert sample.witness.values in fractional
        assert_vertex(form, sample.witness)
    elif points:
        assert sample.count == 16


def test_samples_depend_on_the_seed_alone():
    rng = np.random.default_rng(8)
    matrix = (rng.random((12, 30)) < 0.25).astype(float)
    form = LinearForm.from_arrays(
        matrix, row_lower=1, row_upper=np.inf, col_lower=0, col_upper=1, cost=rng.random(30)
    )
    first, again = look(form, seed=5), look(form, seed=5)
    assert first.count == again.count
    assert first.witness.values == again.witness.values


def test_scaled_costs_meet_what_the_true_costs_miss():
    # The optimum is whole, but its neighbours are not: x1 alone outweighs the cycle.
    form = odd_cycle(3, cost=[-2.1, -1.0, -1.0])
    assert look(form, samples=1).witness is None
    assert look(form, samples=16).witness is not None


def test_no_samples_asked_none_taken():
    assert look(odd_cycle(3), samples=0).count == 0


def test_no_time_left_none_taken():
    assert look(odd_cycle(3), deadline=Deadline(0)).count == 0


def test_an_unbounded_objective_is_turned_towards_the_bounds():
    form = LinearForm.from_arrays(
        [[2, -2, 1]], row_lower=1, row_upper=1, col_lower=0, col_upper=[np.inf, np.inf, 5], cost=-1
    )
    sample = look(form)
    assert sample.witness is not None
    assert_vertex(form, sample.witness)


def test_a_known_unbounded_outcome_is_turned_too():
    piece = normalise(
        LinearForm.from_arrays(
            [[1, -1]], row_lower=0, row_upper=2, col_lower=[0, -np.inf], col_upper=np.inf, cost=-1
        )
    )
    program = program_of(piece)
    first = program.solve()
    assert first.status == "unbounded"
    sample = sample_vertices(
        piece, samples=4, seed=0, deadline=Deadline(None), first=(program, first)
    )
    assert (sample.count, sample.witness) == (4, None)


def test_an_infeasible_block_names_the_rows_that_conflict():
    form = LinearForm.from_arrays(
        [[1, 1, 0], [1, 1, 0], [0, 1, 1]],
        row_lower=[3, -np.inf, -np.inf],
        row_upper=[np.inf, 2, 9],
        col_lower=0,
        col_upper=5,
        cost=1,
    )
    sample = look(form)
    assert sample.infeasible
    assert sample.conflict.tolist() == [0, 1]


def test_a_known_outcome_is_looked_at_and_the_objective_put_back():
    form = odd_cycle(3)
    piece = normalise(form)
    program = program_of(piece)
    first = program.solve()
    sample = look(form, samples=0, first=(program, first))
    assert sample.witness is not None
    whole = normalise(odd_cycle(4))
    program = program_of(whole)
    first = program.solve()
    sample = sample_vertices(
        whole, samples=8, seed=0, deadline=Deadline(None), first=(program, first)
    )
    assert sample.count == 8
    again = program.solve()
    assert again.objective == pytest.approx(first.objective)


def test_a_known_outcome_that_is_no_vertex_ends_the_look():
    piece = normalise(odd_cycle(3))
    nothing = np.zeros(3)
    stopped = LpResult("time_limit", nothing, nothing, nothing, 0.0, 0)
    sample = sample_vertices(
        piece, samples=4, seed=0, deadline=Deadline(None), first=(program_of(piece), stopped)
    )
    assert sample.count == 0


def test_a_free_column_at_rest_makes_no_vertex():
    form = LinearForm.from_arrays(
        [[-2, 2, -3, 1]],
        row_lower=-np.inf,
        row_upper=-2,
        col_lower=[1, 1, -np.inf, -np.inf],
        col_upper=np.inf,
        cost=[1, 1, -1, 0],
    )
    finding = assess(form)
    assert finding.blocks[0].witness is None
    assert finding.verdict == "undecided"

"""The sketch counts each nonzero once, where it stands in the permuted matrix."""

import numpy as np
import scipy.sparse as sp
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import KINDS, random_form

from pyomo_latpath.explain.explain import explain
from pyomo_latpath.explain.sketch import CELLS, sketch_of
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise


def permuted(normal, blocks):
    rows = np.concatenate([b.rows for b in blocks])
    columns = np.concatenate([b.columns for b in blocks])
    return normal.matrix.toarray()[np.ix_(rows, columns)] != 0


@settings(max_examples=60)
@given(st.integers(0, 2**32), st.sampled_from(KINDS))
def test_small_matrices_are_shown_entry_by_entry(seed, kind):
    normal = normalise(random_form(np.random.default_rng(seed), kind))
    blocks = blocks_of(normal)
    if blocks:
        assert (sketch_of(normal, blocks).counts == permuted(normal, blocks)).all()


@settings(max_examples=20)
@given(st.integers(0, 2**32), st.integers(30, 200), st.integers(30, 200))
def test_large_matrices_are_counted_cell_by_cell(seed, m, n):
    matrix = sp.random_array((m, n), density=0.05, rng=np.random.default_rng(seed))
    matrix.data[:] = 1
    form = LinearForm.from_arrays(
        matrix, row_lower=0, row_upper=5, col_lower=0, col_upper=9, cost=1
    )
    normal = normalise(form)
    blocks = blocks_of(normal)
    told = sketch_of(normal, blocks)
    assert max(told.counts.shape) <= CELLS
    assert (told.rows, told.columns) == normal.matrix.shape
    dense = permuted(normal, blocks)
    for i, rows in enumerate(zip(told.row_edges[:-1], told.row_edges[1:], strict=True)):
        for j, columns in enumerate(zip(told.column_edges, told.column_edges[1:], strict=False)):
            assert told.counts[i, j] == dense[slice(*rows), slice(*columns)].sum()


def test_blocks_are_summed_up_in_the_order_of_the_sketch():
    form = LinearForm.from_arrays(
        [[1, 1, 0, 0, 0], [0, 0, 1, 1, 0], [0, 0, 0, 1, 1], [0, 0, 1, 0, 1]],
        row_lower=0,
        row_upper=1,
        col_lower=0,
        col_upper=1,
        cost=-1,
    )
    first, second = explain(form).blocks
    assert (first.rows, first.columns, first.nonzeros, str(first.verdict)) == (1, 2, 2, "proven")
    assert (second.rows, second.columns, second.nonzeros) == (3, 3, 6)
    assert str(second.verdict) == "refuted" and second.structure is None
    assert (first.row_slice, second.row_slice) == ((0, 1), (1, 4))
    assert (first.column_slice, second.column_slice) == ((0, 2), (2, 5))


def test_a_form_without_columns_has_an_empty_sketch():
    form = LinearForm.from_arrays(
        [[1.0]], row_lower=0, row_upper=2, col_lower=1, col_upper=1, cost=1
    )
    told = explain(form)
    assert told.sketch.counts.size == 0 and told.blocks == ()

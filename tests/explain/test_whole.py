"""Whole models: what is said of them holds, and what could break them does."""

import math

import numpy as np
import pytest
import scipy.sparse as sp
from small_forms import pairs

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.explain import explain
from pyomo_latpath.explain.remains import Certified
from pyomo_latpath.explain.stems import row_stems
from pyomo_latpath.explain.whole import breakers, keepers, sentences, time_branch_and_bound
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.certify import certify
from pyomo_latpath.integrality.finding import Verdict


def certified(form):
    normal = normalise(form)
    blocks = blocks_of(normal)
    proofs = certify(normal, blocks, Deadline(None))
    assert all(proofs)
    return Certified(normal, tuple(blocks), tuple(proofs))


def transport(**changes):
    """Two caves, three towns."""
    sides = {"row_lower": [0, 0, 2, 2, 2], "row_upper": [4, 4, 9, 9, 9]} | changes
    return LinearForm.from_arrays(
        pairs(2, 3), col_lower=0, col_upper=9, cost=[3, 1, 4, 1, 5, 9], **sides
    )


def test_a_whole_model_is_told_as_such_with_both_times():
    told = explain(transport())
    assert told.verdict is Verdict.PROVEN and told.complete
    assert told.whole is not None and told.culprits == () and told.violators == ()
    assert len(told.whole.sentences) == 1
    assert told.whole.path_seconds > 0 and told.whole.highs_seconds > 0 and told.whole.highs_ended
    assert told.gap.absolute == 0 and told.gap.exact and told.fractional.count == 0


def test_equal_blocks_are_said_once_and_not_too_many():
    sizes = [2, 3, 3, 4, 5, 6, 7, 8]
    matrix = sp.block_diag([np.ones((1, size)) for size in sizes])
    form = LinearForm.from_arrays(
        matrix, row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=-1
    )
    told = explain(form).whole.sentences
    assert len(told) == 6 and "8 columns" in told[0] and told[-1] == "3 smaller blocks"
    twice = sentences(certified(form), row_stems(form), most=7)
    assert len(twice) == 7 and sum(text.endswith("(2 blocks)") for text in twice) == 1


def test_the_structure_is_told_in_a_sentence():
    (sentence,) = explain(transport()).whole.sentences
    assert sentence == "a transport network: 2 rows on one side, 3 on the other, 6 columns"
    names = ["cave[1]", "cave[2]", "town[1]", "town[2]", "town[3]"]
    (named,) = explain(transport(row_names=names)).whole.sentences
    assert named == f"{sentence}: 'cave' against 'town'"
    mixed = ["cave[1]", "town[4]", "town[1]", "town[2]", "town[3]"]
    assert explain(transport(row_names=mixed)).whole.sentences == (sentence,)


def test_sides_that_are_not_whole_are_rounded_and_do_not_break_it():
    assert any("rounded inwards" in text for text in keepers(certified(transport())))
    shifted = explain(transport(row_upper=[4.5, 3.5, 9, 9, 9]))
    assert shifted.verdict is Verdict.PROVEN


def test_with_continuous_columns_sides_must_be_whole_and_the_row_is_named():
    form = transport(integer=[True] * 5 + [False])
    told = [text for text in breakers(certified(form)) if "continuous" in text]
    assert len(told) == 1 and ("'r2'" in told[0] or "'r5'" in told[0])
    assert not any("rounded inwards" in text for text in keepers(certified(form)))
    broken = form.replace(row_upper=[4, 3.5, 9, 9, 9])
    assert explain(broken).whole is None


def test_a_system_that_is_whole_for_its_sides_alone_says_so():
    form = LinearForm.from_arrays(
        [[2, 3], [1, 1]], row_lower=[5, 2], row_upper=[5, 2], col_lower=0, col_upper=4, cost=1
    )
    needs_sides = LinearForm.from_arrays(
        [[1, 1], [1, -1]], row_lower=[4, 2], row_upper=[4, 2], col_lower=0, col_upper=4, cost=1
    )
    assert not any("the proof holds" in text for text in breakers(certified(form)))
    assert any("the proof holds for the sides" in text for text in breakers(certified(needs_sides)))
    assert keepers(certified(needs_sides)) == ("costs",)


def test_nothing_can_break_what_has_no_rows_over_several_columns():
    form = LinearForm.from_arrays(
        np.eye(2), row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=1
    )
    assert breakers(certified(form)) == () == keepers(certified(form))


@pytest.mark.parametrize("limit", [0.0, None])
def test_branch_and_bound_is_cut_off_at_its_limit(limit):
    seconds, ended = time_branch_and_bound(transport(), Deadline(limit))
    assert ended == (limit is None)
    assert seconds >= 0 and not math.isnan(seconds)


def test_a_further_row_over_columns_in_two_rows_can_break_a_transport():
    form = transport()
    assert any("in two rows already" in text for text in breakers(certified(form)))
    broken = LinearForm.from_arrays(
        np.vstack((form.matrix.toarray(), [1, 0, 0, 0, 1, 0], [0, 1, 0, 1, 0, 0])),
        row_lower=[*form.row_lower, 0, 0],
        row_upper=[*form.row_upper, 3, 3],
        col_lower=0,
        col_upper=9,
        cost=form.cost,
    )
    assert explain(broken).whole is None

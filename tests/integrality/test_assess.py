"""Assessment: the verdict of each kind of block, against all vertices, and its certificate."""

import json

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from brute_force import vertices
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import KINDS, random_form
from small_forms import TRIANGLE

from pyomo_latpath.certificates import Certificate, Conetwork, Network, check_certificate
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.assess import assess
from pyomo_latpath.integrality.certify import certify
from pyomo_latpath.integrality.finding import Verdict
from pyomo_latpath.integrality.recognise import prove_tu

#: Difference rows: at most two nonzeros in a row, more in a column.
DIFFERENCES = np.array([[1, -1, 0, 0], [0, 1, -1, 0], [0, 1, 0, -1], [1, 0, 0, -1]])
RUNS = np.array([[1, 0, 0, 1], [1, 1, 0, 1], [1, 1, 1, 1], [0, 1, 1, 0]])
#: Columns that are runs in another order of the rows.
HIDDEN = np.array([[1, 0, 1], [0, 1, 1], [1, 1, 1]])
SHUFFLED = np.array([[b <= i < e for e in range(2, 7) for b in range(e - 1)] for i in range(6)])
SHUFFLED = SHUFFLED[[4, 0, 2, 5, 1, 3]].astype(int)
#: Tree paths in the graph of three nodes each tied to three others: no network when transposed.
UTILITIES = np.array([[-1, -1, 1, 0], [1, 0, -1, -1], [0, 1, 0, 1], [1, 1, 0, 0], [0, 0, 1, 1]])
#: Nothing is left of it after reductions.
REDUCIBLE = np.array([[1, 1, 1], [1, 0, 1], [1, 1, 1]])


def form_of(matrix, **changes):
    data = {"row_lower": 0, "row_upper": 1, "col_lower": 0, "col_upper": 1, "cost": -1}
    return LinearForm.from_arrays(matrix, **{**data, **changes})


def only_block(form, **options):
    (block,) = assess(form, **options).blocks
    return block


def assert_certified(form, finding):
    """Each block's certificate and that of the whole pass the checker, also by way of JSON."""
    for block in finding.blocks:
        check_certificate(form, block.certificate)
    for certificate in (finding.certificate, finding.blocks[0].certificate):
        text = json.dumps(certificate.to_dict())
        check_certificate(form, Certificate.from_dict(json.loads(text)))


@pytest.mark.parametrize(
    ("matrix", "structure"),
    [
        ([[1, 1, 0], [0, 1, 1]], "incidence"),
        (RUNS, "interval"),
        (HIDDEN, "interval"),
        (SHUFFLED, "interval"),
        (SHUFFLED.T, "conetwork"),
        (REDUCIBLE, "network"),
        (UTILITIES, "network"),
        (UTILITIES.T, "conetwork"),
        (DIFFERENCES, "conetwork"),
        ([[3], [5]], "trivial"),
        ([[1, 0, 1, 1, 1], [1, 1, 0, 1, 1], [0, 1, 1, 1, 0], [0, 1, 0, 1, 1]], None),
    ],
)
def test_structures_by_name(matrix, structure):
    form = form_of(matrix)
    finding = assess(form)
    assert finding.blocks[0].structure == structure
    assert (finding.verdict == Verdict.PROVEN) == (structure is not None)
    if structure is not None:
        assert_certified(form, finding)


def test_an_equality_system_with_large_entries():
    form = form_of([[2, 3, 1], [1, 1, 0]], row_lower=[5, 2], row_upper=[5, 2], col_upper=9)
    finding = assess(form)
    assert finding.blocks[0].structure == "unimodular"
    assert_certified(form, finding)
    # With a slack in the second row, 2 and 3 are determinants of bases.
    assert assess(form.replace(row_lower=[5, 0])).verdict == Verdict.REFUTED


def test_a_system_that_is_whole_for_its_sides_alone():
    form = form_of([[1, 1], [1, -1]], row_lower=[4, 2], row_upper=[4, 2], col_upper=9)
    finding = assess(form)
    assert finding.blocks[0].structure == "unimodular"
    assert_certified(form, finding)
    other = form.replace(row_lower=[4, 1], row_upper=[4, 1])
    block = only_block(other)
    assert block.verdict == Verdict.REFUTED
    assert [str(value) for value in block.witness.values] == ["5/2", "3/2"]


@settings(max_examples=120)
@given(st.integers(0, 10**6), st.sampled_from(KINDS))
def test_verdicts_against_all_vertices(seed, kind):
    form = random_form(np.random.default_rng(seed), kind)
    normal = normalise(form)
    finding = assess(form, samples=6)
    for block in finding.blocks:
        if block.certificate is not None:
            check_certificate(form, block.certificate)
    rows, columns = (
        {int(i): k for k, i in enumerate(places)} for places in (normal.rows, normal.columns)
    )
    for block in finding.blocks:
        if block.columns.size == 0 or block.reason.startswith("infeasible: row"):
            continue
        i, j = [rows[int(r)] for r in block.rows], [columns[int(c)] for c in block.columns]
        if not normal.whole_rows[i].all():
            continue
        points = vertices(
            normal.matrix.toarray()[np.ix_(i, j)],
            normal.row_lower[i],
            normal.row_upper[i],
            normal.col_lower[j],
            normal.col_upper[j],
        )
        integer = normal.integer[j]
        fractional = {
            p
            for p in points
            if any(w and v.denominator > 1 for v, w in zip(p, integer, strict=True))
        }
        if block.verdict == Verdict.PROVEN:
            assert not fractional
            assert not (points and block.reason.startswith("infeasible"))
        if block.verdict == Verdict.REFUTED:
            assert fractional


def test_the_worst_block_gives_the_verdict():
    cycle, pair = sp.csc_array(TRIANGLE), sp.csc_array([[1, 1]])
    form = form_of(sp.block_diag([pair, cycle, pair]))
    finding = assess(form)
    assert [str(block.verdict) for block in finding.blocks] == ["proven", "refuted", "proven"]
    assert finding.verdict == Verdict.REFUTED
    assert finding.certificate is None


def test_many_small_blocks_of_two_kinds():
    count = 400
    runs = [sp.csc_array(RUNS)] * count + [sp.csc_array([[1, 1], [1, 1]])] * count
    form = form_of(sp.block_diag(runs))
    finding = assess(form)
    assert finding.verdict == Verdict.PROVEN
    assert set(finding.structures) == {"interval", "incidence"}
    assert len(finding.blocks) == 2 * count
    check_certificate(form, finding.certificate)


def test_without_integer_columns_there_is_nothing_to_prove():
    form = form_of(TRIANGLE / 3, integer=False)
    finding = assess(form)
    assert finding.verdict == Verdict.PROVEN
    assert_certified(form, finding)


@pytest.mark.parametrize(
    ("changes", "word"),
    [
        ({"row_upper": 1.5}, "side"),
        ({"col_upper": [1, 1, 0.5]}, "bound"),
    ],
)
def test_a_continuous_column_keeps_sides_and_bounds_unrounded(changes, word):
    form = form_of([[1, 1, 0], [0, 1, 1]], integer=[True, True, False])
    assert assess(form).verdict == Verdict.PROVEN
    block = only_block(form.replace(**changes), samples=0)
    assert block.verdict == Verdict.UNDECIDED
    assert word in block.reason


def test_continuous_columns_are_scaled():
    form = form_of([[1, 0.25, 0], [0, 0.25, 1]], integer=[True, False, True], col_upper=[1, 8, 1])
    finding = assess(form)
    assert finding.blocks[0].structure == "incidence"
    assert_certified(form, finding)
    assert assess(form.replace(col_upper=[1, 9, 1])).verdict != Verdict.PROVEN


def test_rounding_comes_first():
    form = form_of([[0.5, 0.5]], row_upper=1.2, col_upper=2.5)
    finding = assess(form)
    assert finding.verdict == Verdict.PROVEN
    assert_certified(form, finding)


def test_fixed_columns_and_idle_rows_are_outside_all_blocks():
    matrix = np.array([[1, 1, 7], [1, 0, 5], [2, 3, 1]])
    form = form_of(
        matrix,
        col_lower=[0, 0, 1],
        row_lower=[0, 0, -np.inf],
        row_upper=[9, 9, np.inf],
    )
    finding = assess(form)
    assert finding.verdict == Verdict.PROVEN
    assert finding.blocks[0].columns.tolist() == [0, 1]
    assert_certified(form, finding)


@pytest.mark.parametrize("matrix", [TRIANGLE, np.ones((1, 2))], ids=["searched", "certified"])
def test_a_conflict_of_rounded_sides_is_a_proof(matrix):
    form = form_of(matrix, row_lower=0.4, row_upper=0.6)
    finding = assess(form)
    assert finding.verdict == Verdict.PROVEN
    assert finding.blocks[0].reason.startswith("infeasible: row 'r1'")
    assert finding.blocks[0].columns.size == len(matrix[0])


def test_a_column_without_a_whole_value_is_a_proof():
    finding = assess(form_of([[1, 1]], col_lower=[0.2, 0], col_upper=[0.8, 1]))
    assert finding.verdict == Verdict.PROVEN
    assert finding.blocks[-1].columns.tolist() == [0]
    assert "infeasible" in finding.blocks[-1].reason


def test_an_infeasible_block_is_proven_and_says_why():
    rows = [[1, 1, 1, 0], [1, 1, -1, 0], [0, 1, 1, 1]]
    form = form_of(rows, row_lower=[3, -9, 0], row_upper=[9, 0, 9])
    block = only_block(form)
    assert block.verdict == Verdict.PROVEN
    assert block.certificate is None
    assert block.reason == "infeasible: no point within all bounds satisfies rows 'r1', 'r2'"


def test_semicontinuous_columns_are_not_judged():
    form = LinearForm.from_arrays(
        [[1, 1]],
        row_lower=0,
        row_upper=1,
        col_lower=0,
        col_upper=1,
        cost=0,
        semicontinuous=[True, False],
    )
    block = only_block(form)
    assert block.verdict == Verdict.UNDECIDED
    assert "semicontinuous" in block.reason


def test_sampled_and_undecided():
    # Whole at every vertex, TU, but of no structure that is looked for with so little effort.
    form = form_of(np.vstack([TRIANGLE, [[1, 1, 1]]]), row_upper=[9, 9, 9, 1])
    block = only_block(form, samples=5)
    assert (block.verdict, block.samples) == (Verdict.SAMPLED, 5)
    assert only_block(form, samples=0).verdict == Verdict.UNDECIDED
    assert only_block(form, time_limit=0).verdict == Verdict.UNDECIDED


def test_a_coefficient_beyond_reading_is_still_a_bound_on_its_one_column():
    form = form_of([[1e20]], row_upper=5e20)
    finding = assess(form)
    assert finding.blocks[0].structure == "trivial"
    assert_certified(form, finding)


def test_nothing_to_assess():
    finding = assess(form_of(np.ones((1, 2)), row_upper=2, col_lower=1))
    assert finding.blocks == ()
    assert finding.verdict == Verdict.PROVEN


@pytest.mark.parametrize("options", [{"samples": -1}, {"time_limit": -1}, {"time_limit": np.nan}])
def test_options_out_of_range_are_refused(options):
    with pytest.raises(ValueError, match=next(iter(options))):
        assess(form_of([[1, 1]]), **options)


@settings(max_examples=200)
@given(st.integers(0, 10**6))
def test_what_is_proven_is_totally_unimodular(seed):
    rng = np.random.default_rng(seed)
    m, n = rng.integers(1, 6, 2)
    matrix = rng.choice([0, 0, 1, 1, -1], (m, n))
    for quick in (True, False):
        proof = prove_tu(sp.csc_array(matrix), quick=quick)
        if proof is not None:
            proof[1].check(sp.csc_array(matrix))
            assert is_tu(matrix)


def test_less_effort_proves_less():
    hidden, reducible = sp.csc_array(HIDDEN), sp.csc_array(REDUCIBLE)
    assert prove_tu(hidden, quick=True) is None
    assert prove_tu(hidden)[0] == "interval"
    assert prove_tu(reducible, quick=True) is None
    name, part = prove_tu(reducible)
    assert (name, type(part)) == ("network", Network)
    name, part = prove_tu(sp.csc_array(DIFFERENCES), quick=True)
    assert (name, type(part)) == ("conetwork", Conetwork)


def test_blocks_not_looked_at_in_time_have_no_certificate():
    normal = normalise(form_of(RUNS))
    assert certify(normal, blocks_of(normal), Deadline(0)) == [None]


def test_sides_that_cross_are_no_equation():
    form = LinearForm.from_arrays(
        [[0, 0, 0], [0, 0, 3], [0, -3, 3], [-1, -2, 3]],
        row_lower=[-2, -np.inf, -10, -np.inf],
        row_upper=[-2, -3, -10, -4],
        col_lower=[-np.inf, 1, -1],
        col_upper=[1, 3, np.inf],
        cost=0,
    )
    for block in assess(form).blocks:
        if block.certificate is not None:
            check_certificate(form, block.certificate)

"""Assessment of models whose matrix must be taken apart, or is not totally unimodular."""

import json

import numpy as np
import pytest
import scipy.sparse as sp
from decisions import without_odd_holes
from known_matrices import FANO, R10
from regular_models import disguised, regular
from small_forms import TRIANGLE

import pyomo_latpath as latpath
from pyomo_latpath.certificates import Certificate, check_certificate
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality.assess import assess
from pyomo_latpath.integrality.finding import Verdict


def form_of(matrix, **changes):
    data = {"row_lower": -2, "row_upper": 3, "col_lower": 0, "col_upper": 2, "cost": -1}
    return LinearForm.from_arrays(matrix, **{**data, **changes})


@pytest.mark.parametrize("seed", range(6))
def test_a_sum_is_proven(seed):
    rng = np.random.default_rng(seed)
    piece = regular(rng, 4, 6, orders=(3, 2), kinds=("network", "conetwork", "R10"))
    form = form_of(disguised(rng, piece, pivots=1).matrix)
    finding = assess(form, samples=2)
    assert finding.verdict == Verdict.PROVEN
    text = json.dumps(finding.certificate.to_dict())
    check_certificate(form, Certificate.from_dict(json.loads(text)))


@pytest.mark.parametrize("matrix", R10)
def test_r10_is_proven_and_solved(matrix):
    form = form_of(matrix, cost=[-3, 1, -2, 4, -5])
    (block,) = assess(form).blocks
    assert (block.verdict, block.structure) == (Verdict.PROVEN, "sum")
    assert "R10" in block.reason
    check_certificate(form, block.certificate)
    solution = latpath.solve(form)
    assert solution.status == "optimal"
    assert solution.report.route == "path"
    assert solution.objective == latpath.solve(form, samples=0).objective


def test_r10_with_equations_and_large_entries():
    """Rows added to others: the system is one with R10, whatever its entries."""
    mixing = np.array(
        [[1, 2, 0, 0, 0], [0, 1, 2, 0, 0], [0, 0, 1, 2, 0], [0, 0, 0, 1, 2], [0, 0, 0, 0, 1]]
    )
    whole = np.hstack((R10[0], np.eye(5, dtype=int)))
    sides = mixing @ whole @ np.ones(10)
    form = form_of(mixing @ whole, row_lower=sides, row_upper=sides)
    (block,) = assess(form).blocks
    assert (block.verdict, block.structure) == (Verdict.PROVEN, "unimodular")
    check_certificate(form, block.certificate)


def test_what_refutes_is_named():
    form = form_of(TRIANGLE, row_lower=-np.inf, row_upper=1, row_names=["hall", "cave", "van"])
    (block,) = assess(form).blocks
    assert block.verdict == Verdict.REFUTED
    assert block.reason.endswith(
        "rows 'hall', 'cave', 'van' and as many columns have determinant 2"
    )


def test_without_odd_cycles_there_is_only_no_structure_to_tell_of():
    matrix = without_odd_holes(np.random.default_rng(0), FANO)
    (block,) = assess(form_of(matrix), samples=0).blocks
    assert block.verdict == Verdict.UNDECIDED
    assert block.reason.endswith("the matrix has no structure known here")


def test_time_is_kept():
    rng = np.random.default_rng(1)
    piece = regular(rng, 10, 20, orders=(3,), kinds=("network", "conetwork"))
    form = form_of(sp.csc_array(disguised(rng, piece).matrix))
    assert assess(form, samples=0, time_limit=0).verdict == Verdict.UNDECIDED
    assert assess(form, samples=0, time_limit=200).verdict == Verdict.PROVEN

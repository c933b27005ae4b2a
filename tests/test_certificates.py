"""The checker on forms: rows, columns, sides and factors must be those of the model."""

import copy
import json

import numpy as np
import pytest
import scipy.sparse as sp
from certificate_data import accepts
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import random_form
from small_forms import assignment

from pyomo_latpath.certificates import (
    BlockCertificate,
    Certificate,
    CertificateError,
    Trivial,
    check_certificate,
    fingerprint,
)
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality.assess import assess
from pyomo_latpath.integrality.regular.decision import totally_unimodular


def pair_of_rows(**changes):
    """Two rows over three columns, the last of them continuous."""
    data = {"row_lower": 0, "row_upper": 4, "col_lower": 0, "col_upper": 3, "cost": 0}
    data |= {"integer": [True, True, False]} | changes
    return LinearForm.from_arrays([[1, 1, 0], [0, 1, 1]], **data)


def proof_of(form):
    return assess(form).certificate


def test_a_certificate_belongs_to_one_matrix_with_its_sides_and_integer_columns():
    form = pair_of_rows()
    proof = proof_of(form)
    assert accepts(form, proof)
    assert accepts(form.replace(cost=5, sense="max"), proof)
    for other in (
        form.replace(row_upper=3),
        form.replace(row_lower=1),
        form.replace(integer=True),
        pair_of_rows().replace(row_lower=-np.inf),
    ):
        assert not accepts(other, proof)
    assert fingerprint(form) == fingerprint(pair_of_rows())
    assert fingerprint(form.replace(row_lower=-0.0)) == fingerprint(form)


def renewed(proof, form):
    """The same proof, claimed for another form."""
    return {**proof.to_dict(), "fingerprint": fingerprint(form)}


@pytest.mark.parametrize(
    ("changes", "complaint"),
    [
        ({"row_upper": [4, 3.5]}, "row 'r2' has a side"),
        ({"row_lower": [0, 0.25]}, "row 'r2' has a side"),
        ({"col_upper": [3, 3, 2.5]}, "column 'x3' has a bound"),
        ({"semicontinuous": [False, False, True]}, "semicontinuous"),
    ],
)
def test_what_may_not_be_rounded_must_be_whole(changes, complaint):
    form = pair_of_rows(**changes)
    with pytest.raises(CertificateError, match=complaint):
        check_certificate(form, Certificate.from_dict(renewed(proof_of(pair_of_rows()), form)))


@pytest.mark.parametrize("changes", [{"row_upper": [3.5, 4]}, {"col_upper": [2.5, 1.2, 3]}])
def test_rows_and_columns_that_are_all_integer_may_be_rounded(changes):
    form = pair_of_rows(**changes)
    assert accepts(form, renewed(proof_of(pair_of_rows()), form))


def test_a_side_within_tolerance_of_a_whole_number_is_whole():
    third = LinearForm.from_arrays(
        [[1 / 3, 1 / 3]], row_lower=1, row_upper=1, col_lower=0, col_upper=[5, 4.000000000001],
        cost=0, integer=[True, False],
    )  # fmt: skip
    assert accepts(third, proof_of(third))


def test_all_integer_columns_and_all_their_entries_are_in_blocks():
    matrix = sp.block_diag([np.ones((1, 2)), np.ones((1, 2))])
    form = LinearForm.from_arrays(
        matrix, row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=0
    )
    finding = assess(form)
    proof = finding.certificate.to_dict()
    part = {**proof, "blocks": proof["blocks"][:1]}
    assert not accepts(form, part)
    assert accepts(form, {**part, "complete": False})
    assert not accepts(form, {**part, "blocks": part["blocks"] * 2})
    one = LinearForm.from_arrays(
        [[1, 1], [1, 1]], row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=0
    )
    torn = proof_of(one).to_dict()
    block = torn["blocks"][0]
    block.update(rows=[0], row_factors=["1"], tree=[[0, 1]], arcs=[[0, 1], [0, 1]])
    assert not accepts(one, torn)
    assert not accepts(one, {**torn, "complete": False})
    idle = one.replace(row_lower=[0, -np.inf], row_upper=[1, np.inf])
    assert accepts(idle, {**torn, "fingerprint": fingerprint(idle)})


def test_fixed_columns_are_put_in():
    form = LinearForm.from_arrays(
        [[1, 1, 0.5]], row_lower=0, row_upper=3, col_lower=[0, 0, 1], col_upper=[1, 1, 1], cost=0,
        integer=[True, False, False],
    )  # fmt: skip
    shifted = form.replace(row_upper=3.5, row_lower=0.5)
    proof = proof_of(shifted)
    assert proof.blocks[0].columns.tolist() == [0, 1]
    assert accepts(shifted, proof)
    assert not accepts(form, renewed(proof, form))
    freed = shifted.replace(col_upper=[1, 1, 2])
    assert not accepts(freed, proof)


def test_integer_columns_are_negated_at_most():
    form = LinearForm.from_arrays(
        [[2, 2]], row_lower=0, row_upper=3, col_lower=0, col_upper=1, cost=0
    )
    proof = proof_of(form).to_dict()
    assert proof["blocks"][0]["row_factors"] == ["1/2"]
    assert accepts(form, proof)
    scaled = copy.deepcopy(proof)
    scaled["blocks"][0].update(row_factors=["1"], col_factors=["1/2", "1/2"])
    assert not accepts(form, scaled)
    turned = copy.deepcopy(proof)
    turned["blocks"][0]["col_factors"] = ["-1", "1"]
    assert not accepts(form, turned)
    turned["blocks"][0]["arcs"][0].reverse()
    assert accepts(form, turned)


@pytest.mark.parametrize("factor", ["0", "1/0", "0.5", "", "one", "2", "1e0", 1, None])
def test_only_the_right_factor_passes(factor):
    form = LinearForm.from_arrays(
        [[2, 2]], row_lower=0, row_upper=3, col_lower=0, col_upper=1, cost=0
    )
    proof = proof_of(form).to_dict()
    proof["blocks"][0]["row_factors"] = [factor]
    assert not accepts(form, proof)


def test_only_equations_are_added_to_others():
    form = LinearForm.from_arrays(
        [[2, 3], [1, 1]], row_lower=[5, 2], row_upper=[5, 2], col_lower=0, col_upper=9, cost=0
    )
    proof = proof_of(form)
    assert accepts(form, proof)
    loose = form.replace(row_lower=[5, 0])
    assert not accepts(loose, renewed(proof, loose))


def test_sides_that_are_needed_are_checked():
    form = LinearForm.from_arrays(
        [[1, 1], [1, -1]], row_lower=[4, 2], row_upper=[4, 2], col_lower=0, col_upper=9, cost=0
    )
    proof = proof_of(form)
    assert accepts(form, proof)
    other = form.replace(row_lower=[4, 1], row_upper=[4, 1])
    assert not accepts(other, renewed(proof, other))


def test_a_trivial_block_speaks_of_integer_columns_alone():
    form = LinearForm.from_arrays(
        [[3, 0], [0, 0.7]], row_lower=0, row_upper=[4, 0.31], col_lower=0, col_upper=1.5, cost=0,
        integer=[True, False],
    )  # fmt: skip
    assert accepts(form, proof_of(form))
    shared = LinearForm.from_arrays(
        [[1, 0.7]], row_lower=0, row_upper=0.4, col_lower=0, col_upper=1, cost=0,
        integer=[True, False],
    )  # fmt: skip
    forged = Certificate(
        fingerprint(shared),
        (BlockCertificate(np.array([0]), np.arange(2), ("1",), ("1", "1"), Trivial()),),
    )
    assert not accepts(shared, forged)


def test_numbers_too_large_for_64_bits_are_no_obstacle():
    form = LinearForm.from_arrays(
        [[1e19, 0], [0, 2.0**62]], row_lower=0, row_upper=3e30, col_lower=0, col_upper=9, cost=0
    )
    proof = proof_of(form)
    assert proof.blocks[0].row_factors[1] == f"1/{2**62}"
    assert accepts(form, proof)
    wrong = proof.to_dict()
    wrong["blocks"][0]["row_factors"][0] = f"1/{10**19 - 1}"
    assert not accepts(form, wrong)


@settings(max_examples=60)
@given(st.integers(0, 10**6))
def test_every_certificate_found_for_mixed_models_passes(seed):
    rng = np.random.default_rng(seed)
    form = random_form(rng, str(rng.choice(["mixed", "free", "decimals", "network"])))
    for block in assess(form, samples=1).blocks:
        if block.certificate is not None:
            assert accepts(form, block.certificate)


@pytest.mark.parametrize(
    "spoil",
    [
        lambda data: data.update(schema="latpath-certificate/2"),
        lambda data: data.pop("fingerprint"),
        lambda data: data.update(complete=1),
        lambda data: data.update(blocks={}),
        lambda data: data.update(blocks=[3]),
        lambda data: data["blocks"][0].update(kind="tree"),
        lambda data: data["blocks"][0].update(kind=["network"]),
        lambda data: data["blocks"][0].pop("arcs"),
        lambda data: data["blocks"][0].update(tree=[[0, 1, 2]]),
        lambda data: data["blocks"][0].update(tree=[["0", 1]]),
        lambda data: data["blocks"][0].update(rows=[0.0]),
        lambda data: data["blocks"][0].update(rows=[True]),
        lambda data: data["blocks"][0].update(rows=[-1]),
        lambda data: data["blocks"][0].update(columns=[0, 0]),
        lambda data: data["blocks"][0].update(columns=[0, 2**70]),
        lambda data: data["blocks"][0].update(row_factors=[]),
    ],
)
def test_broken_json_is_refused_in_a_sentence(spoil):
    form = LinearForm.from_arrays(
        [[1, 1]], row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=0
    )
    data = proof_of(form).to_dict()
    spoil(data)
    with pytest.raises(CertificateError, match=r"\w+ \w+ \w+"):
        check_certificate(form, Certificate.from_dict(data))


@pytest.mark.parametrize("data", [None, [], "network", 7])
def test_what_is_no_object_is_refused(data):
    with pytest.raises(CertificateError):
        Certificate.from_dict(data)


def test_a_certificate_is_taken_as_data_too_and_nothing_else():
    form = assignment(np.ones((2, 2)))
    finding = assess(form)
    data = json.loads(json.dumps(finding.certificate.to_dict()))
    check_certificate(form, data)
    for wrong in (None, 5, "proof", {}):
        with pytest.raises(CertificateError):
            check_certificate(form, wrong)


def test_a_certificate_of_a_matrix_says_nothing_of_a_form():
    form = assignment(np.ones((2, 2)))
    alone = totally_unimodular(form.matrix).certificate
    with pytest.raises(CertificateError, match="of a matrix alone"):
        check_certificate(form, alone)
    check_certificate(form.matrix, alone)

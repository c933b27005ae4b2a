"""The checker: it accepts what is valid and nothing else, whatever is changed."""

import copy
import json
from fractions import Fraction

import numpy as np
import pytest
import scipy.sparse as sp
from brute_force import is_tu, network_matrix
from hypothesis import given, settings
from hypothesis import strategies as st
from random_models import random_form
from system_models import FAMILIES

from pyomo_latpath.certificates import (
    KINDS,
    BlockCertificate,
    Certificate,
    CertificateError,
    Conetwork,
    Network,
    Reduced,
    Step,
    Trivial,
    Unimodular,
    check_certificate,
    fingerprint,
)
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality import reductions, unimodular
from pyomo_latpath.integrality.assess import assess
from pyomo_latpath.integrality.recognise import prove_tu

#: The system x = b, and the matrix without rows and columns.
ONE_ROW = Unimodular(np.empty((0, 3), np.int64), Network(np.array([[0, 1]]), np.array([[0, 1]])))
NOTHING = Network(np.empty((0, 2), np.int64), np.empty((0, 2), np.int64))


def accepts(form_or_matrix, certificate) -> bool:
    """Whether the checker accepts, by way of JSON."""
    try:
        data = certificate if isinstance(certificate, dict) else certificate.to_dict()
        check_certificate(form_or_matrix, Certificate.from_dict(json.loads(json.dumps(data))))
    except CertificateError:
        return False
    return True


def accepts_part(matrix, data) -> bool:
    """Whether a part, as data, proves a matrix."""
    try:
        KINDS[data["kind"]].from_dict(data).check(sp.csc_array(np.array(matrix)))
    except CertificateError:
        return False
    return True


def whole(part, matrix) -> Certificate:
    """One block over all of a matrix, factors 1."""
    m, n = np.asarray(matrix).shape
    ones = ("1",) * m, ("1",) * n
    return Certificate("", (BlockCertificate(np.arange(m), np.arange(n), *ones, part),))


# What each kind means, spelled out step by step.


def network_holds(matrix, data) -> bool:
    """Rebuild the matrix by walking the tree."""
    table = matrix if data["kind"] == "network" else matrix.T
    if (len(data["tree"]), len(data["arcs"])) != table.shape:
        return False
    rebuilt = network_matrix(data["tree"], data["arcs"])
    return rebuilt is not None and np.array_equal(rebuilt, table)


def reduced_holds(matrix, data) -> bool:
    """Take the steps one by one."""
    table, left = matrix.copy(), {"row": set(range(len(matrix)))}
    left["column"] = set(range(matrix.shape[1]))
    for step in data["steps"]:
        axis = "row" if "row" in step else "column"
        lines = table if axis == "row" else table.T
        line = step[axis]
        if line not in left[axis]:
            return False
        size = np.abs(lines[line]).sum()
        if step["reason"] == "zero" and size != 0:
            return False
        if step["reason"] == "unit" and not (size == 1 == np.count_nonzero(lines[line])):
            return False
        if step["reason"] == "copy":
            of = step["of"]
            if of == line or of not in left[axis] or abs(step["sign"]) != 1:
                return False
            if not np.array_equal(lines[line], step["sign"] * lines[of]):
                return False
        lines[line] = 0
        left[axis].discard(line)
    rest = table[np.ix_(sorted(left["row"]), sorted(left["column"]))]
    return network_holds(rest, data["rest"])


def unimodular_holds(matrix, data) -> bool:
    """Do the operations in fractions, each on a whole row."""
    m, wrong = len(matrix), False
    table = matrix.astype(object)
    for row, source, factor in data["operations"]:
        if not (0 <= row < m and 0 <= source < m):
            return False
        if row != source:
            table[row] = table[row] + factor * table[source]
        elif factor < 1:
            return False
        else:
            table[row] = table[row] * Fraction(1, factor)
            wrong |= any(x.denominator != 1 for x in table[row])
    if wrong or any(abs(x) > 1 for x in table.flat):
        return False
    return REST_HOLDS[data["rest"]["kind"]](table.astype(np.int64), data["rest"])


REST_HOLDS = {"network": network_holds, "conetwork": network_holds, "reduced": reduced_holds}
HOLDS = {**REST_HOLDS, "unimodular": unimodular_holds}


def leaves(data, path=()):
    """Paths to all numbers in JSON data."""
    if isinstance(data, dict):
        for key, value in data.items():
            yield from leaves(value, (*path, key))
    elif isinstance(data, list):
        for k, value in enumerate(data):
            yield from leaves(value, (*path, k))
    elif type(data) is int:
        yield path


def change(data, path, value):
    """The same data with another number at the path."""
    data = copy.deepcopy(data)
    place = data
    for key in path[:-1]:
        place = place[key]
    place[path[-1]] = value
    return data


def random_tree(rng, m):
    """A tree on nodes 0 to m, directions at random, its arcs in any order."""
    arcs = [(int(rng.integers(0, node)), node) for node in range(1, m + 1)]
    arcs = [pair[:: rng.choice([1, -1])] for pair in arcs]
    label = rng.permutation(m + 1)
    return label[np.array(arcs).reshape(-1, 2)][rng.permutation(m)]


def random_proof(rng, kind):
    """A matrix and a part of the given kind that proves it, as data."""
    m, n = rng.integers(1, 5, 2)
    tree, arcs = random_tree(rng, m), rng.integers(0, m + 1, (n, 2))
    matrix = network_matrix(tree.tolist(), arcs.tolist())
    part = Network(tree, arcs)
    if kind == "conetwork":
        matrix, part = matrix.T, Conetwork(tree, arcs)
    elif kind == "reduced":
        matrix = np.vstack([matrix, -matrix[:1], np.zeros((1, n), np.int64)])
        steps = (Step("row", m, "copy", 0, -1), Step("row", m + 1, "zero"))
        reduction = reductions.reduce_matrix(sp.csc_array(matrix))
        part = Reduced(steps, part)
        if not reduction.rows.size and not reduction.columns.size:
            part = Reduced(reduction.steps, NOTHING)
    elif kind == "unimodular":
        mix = np.tril(rng.integers(-2, 3, (m, m)), -1) + np.diag(rng.choice([1, 1, 1, 2], m))
        matrix = mix @ np.hstack([np.eye(m, dtype=np.int64), matrix])
        part = unimodular.recognise(
            sp.csc_array(matrix),
            np.full(m, True),
            np.zeros(m, np.int64),
            lambda rest: (prove_tu(rest) or (None, None))[1],
            Deadline(None),
        )
        assert part is None or isinstance(part, Unimodular)
    return matrix, None if part is None else part.to_dict()


@settings(max_examples=150)
@given(st.integers(0, 10**6), st.sampled_from(sorted(HOLDS)))
def test_any_change_is_refused_unless_it_is_valid_too(seed, kind):
    rng = np.random.default_rng(seed)
    matrix, data = random_proof(rng, kind)
    if data is None:
        return
    assert accepts_part(matrix, data)
    assert HOLDS[kind](matrix, data)
    nested = data.get("rest", {}).get("kind", "network")
    assert nested in ("network", "conetwork")
    for path in leaves(data):
        old = data
        for key in path:
            old = old[key]
        changed = change(data, path, old + int(rng.choice([-2, -1, 1, 2])))
        assert accepts_part(matrix, changed) == HOLDS[kind](matrix, changed), (path, changed)
    for _ in range(6):
        other = matrix.copy()
        place = tuple(rng.integers(0, size) for size in other.shape)
        other[place] += rng.choice([-2, -1, 1])
        assert accepts_part(other, data) == HOLDS[kind](other, data), (place, data)


@pytest.mark.parametrize("family", FAMILIES)
def test_any_change_of_a_system_is_refused_unless_it_is_valid_too(family):
    rng = np.random.default_rng(5)
    system = family(15, rng)
    part = unimodular.recognise(*system, lambda rest: prove_tu(rest)[1], Deadline(None))
    matrix, data = system.matrix.toarray(), part.to_dict()
    assert accepts_part(matrix, data) and unimodular_holds(matrix, data)
    every = range(len(data["operations"]))
    for k in rng.permutation(every)[:30].tolist():
        for place in range(3):
            value = data["operations"][k][place] + int(rng.choice([-1, 1]))
            changed = change(data, ("operations", k, place), value)
            assert accepts_part(matrix, changed) == unimodular_holds(matrix, changed), (k, place)
    for k in rng.permutation(every)[:10].tolist():
        without = {**data, "operations": [data["operations"][i] for i in every if i != k]}
        assert accepts_part(matrix, without) == unimodular_holds(matrix, without), k


def test_operations_may_make_numbers_of_any_size():
    """Back and forth in three hundred steps, by way of numbers of hundreds of bits."""
    there = [[k % 2, 1 - k % 2, 3] for k in range(300)]
    back = [[row, source, -factor] for row, source, factor in reversed(there)]
    swap = {"kind": "network", "tree": [[0, 1], [1, 2]], "arcs": [[0, 1], [1, 2]]}
    data = {"kind": "unimodular", "operations": there + back, "rest": swap}
    assert accepts_part(np.eye(2, dtype=np.int64), data)
    data["operations"][299][2] = 2
    assert not accepts_part(np.eye(2, dtype=np.int64), data)


@settings(max_examples=60)
@given(st.integers(0, 10**6))
def test_what_a_bare_matrix_passes_with_is_totally_unimodular(seed):
    rng = np.random.default_rng(seed)
    matrix, data = random_proof(rng, str(rng.choice(["network", "conetwork", "reduced"])))
    part = KINDS[data["kind"]].from_dict(data)
    assert accepts(matrix, whole(part, matrix))
    assert accepts(sp.csr_array(matrix), whole(part, matrix))
    assert is_tu(matrix)


def test_a_bare_matrix_is_checked_as_it_stands():
    block = BlockCertificate(np.array([0]), np.array([0]), ("1/2",), ("1",), Trivial())
    assert not accepts([[2.0]], Certificate("", (block,)))
    with pytest.raises(CertificateError, match="sides"):
        check_certificate([[1]], whole(ONE_ROW, [[1]]))


@settings(max_examples=60)
@given(st.integers(0, 10**6))
def test_rows_and_columns_are_those_named(seed):
    rng = np.random.default_rng(seed)
    matrix, data = random_proof(rng, "network")
    rows, columns = (rng.permutation(size) for size in matrix.shape)
    ones = ("1",) * rows.size, ("1",) * columns.size
    block = BlockCertificate(rows, columns, *ones, Network.from_dict(data))
    picked = matrix[np.ix_(rows, columns)]
    assert accepts(matrix, Certificate("", (block,))) == network_holds(picked, data)


# Forms: what else must hold.


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


def test_nested_systems_are_refused():
    ONE_ROW.check(sp.csc_array([[1]]))
    for part in (Reduced((), ONE_ROW), Unimodular(ONE_ROW.operations, ONE_ROW)):
        with pytest.raises(CertificateError, match="TU"):
            part.check(sp.csc_array([[1]]))

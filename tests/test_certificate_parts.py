"""The proofs of bare matrices: what is valid passes and nothing else, whatever is changed."""

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from brute_force import network_matrix
from certificate_data import NOTHING, ONE_ROW, accepts, accepts_part, change, leaves, whole
from hypothesis import given, settings
from hypothesis import strategies as st
from part_meanings import HOLDS, network_holds, unimodular_holds
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
)
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality import reductions, unimodular
from pyomo_latpath.integrality.recognise import prove_tu


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


def test_nested_systems_are_refused():
    ONE_ROW.check(sp.csc_array([[1]]))
    for part in (Reduced((), ONE_ROW), Unimodular(ONE_ROW.operations, ONE_ROW)):
        with pytest.raises(CertificateError, match="TU"):
            part.check(sp.csc_array([[1]]))

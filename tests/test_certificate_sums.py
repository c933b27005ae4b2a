"""Sums, pivots and R10: what their check accepts is totally unimodular, and nothing else passes."""

import copy
import json
import sys

import networkx as nx
import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu
from certificate_data import ONE_ROW, accepts, accepts_part, change, leaves, whole
from click.testing import CliRunner
from hypothesis import given, settings
from hypothesis import strategies as st
from known_matrices import R12
from regular_models import disguised, graph_matrix, plain, regular
from sum_meanings import part_holds
from sum_proofs import leaf_part, split_off, sum_proofs

from pyomo_latpath.certificate_sums import R10_MATRICES, Summands, pivoted
from pyomo_latpath.certificates import (
    KINDS,
    R10,
    Certificate,
    CertificateError,
    Network,
    Pivot,
    Split,
    Step,
    Sum,
    check_certificate,
    fingerprint,
)
from pyomo_latpath.cli import main
from pyomo_latpath.cli_output import sum_words
from pyomo_latpath.forms.from_file import read
from pyomo_latpath.integrality.assess import assess


def random_proof(rng, kind):
    """A matrix and data of a kind that prove it."""
    if kind == "r10":
        signs = rng.choice([1, -1], (2, 5))
        rows, columns = rng.permutation(5), rng.permutation(5)
        matrix = np.zeros((5, 5), np.int64)
        known = R10_MATRICES[rng.integers(2)]
        matrix[np.ix_(rows, columns)] = signs[0][:, None] * known * signs[1]
        return matrix, R10(rows, columns, *signs).to_dict()
    if kind == "pivot":
        matrix, data = random_proof(rng, "sum")
        while True:  # a pivot at the same place leads back, up to signs of a row and a column
            i, j = (int(rng.integers(size)) for size in matrix.shape)
            if matrix[i, j]:
                break
        table = sp.csc_array(matrix)
        for _ in range(3):
            table = pivoted(table, i, j)
        return table.toarray(), {"kind": "pivot", "row": i, "column": j, "rest": data}
    piece = regular(rng, 2 if rng.random() < 0.8 else 3, 5, orders=(1, 2, 3, 3, 3, 3))
    piece = disguised(rng, piece)
    proof = next(sum_proofs(piece))
    if rng.random() < 0.5:
        return piece.matrix, proof.to_dict()
    return with_copy(rng, piece.matrix, proof.to_dict())


def with_copy(rng, matrix, data):
    """The same with one row more, its copy or negative, which is dropped before all else."""
    of, m = int(rng.integers(len(matrix))), len(matrix)
    sign = int(rng.choice([1, -1]))
    data = copy.deepcopy(data)
    for step in data["steps"]:  # lines that were added come one later
        step["rows"] = [i + (i >= m) for i in step["rows"]]
        step["entries"] = [[i + (i >= m), j] for i, j in step["entries"]]
    data["steps"].insert(0, {"row": m, "reason": "copy", "of": of, "sign": sign})
    return np.vstack([matrix, sign * matrix[of]]), data


@settings(max_examples=25)
@given(st.integers(0, 10**6), st.sampled_from(["sum", "pivot", "r10"]))
def test_any_change_is_refused_unless_it_is_valid_too(seed, kind):
    rng = np.random.default_rng(seed)
    matrix, data = random_proof(rng, kind)
    assert accepts_part(matrix, data)
    assert part_holds(matrix, data)
    paths = list(leaves(data))
    for k in rng.permutation(len(paths))[:60].tolist():
        old = data
        for key in paths[k]:
            old = old[key]
        changed = change(data, paths[k], old + int(rng.choice([-2, -1, 1, 2])))
        assert accepts_part(matrix, changed) == part_holds(matrix, changed), (paths[k], changed)
    for _ in range(10):
        other = matrix.copy()
        place = tuple(rng.integers(0, size) for size in other.shape)
        other[place] += rng.choice([-2, -1, 1])
        assert accepts_part(other, data) == part_holds(other, data), (place, data)


# What is claimed: the sum of totally unimodular matrices is totally unimodular.


def random_sum(rng):
    """A small matrix with corners of ranks that add up to at most 2, and a split along them."""
    p, q, s, t = rng.integers(1, 4, 4)
    ranks = [(0, 0), (1, 0), (0, 1), (1, 1), (1, 1), (1, 1), (2, 0), (0, 2)][rng.integers(8)]
    entries = [0, 0, 1, -1]
    upper, lower = (
        rng.choice(entries, (height, rank)) @ rng.choice(entries, (rank, width))
        for height, width, rank in ((p, t, ranks[0]), (s, q, ranks[1]))
    )
    own = rng.choice(entries, (p, q)), rng.choice(entries, (s, t))
    matrix = np.block([[own[0], upper], [lower, own[1]]])
    if np.abs(matrix).max() > 1:
        return random_sum(rng)
    sign = int(rng.choice([1, -1]))
    return matrix, split_off(matrix, p + np.arange(s), q + np.arange(t), sign)


def summands_of(matrix, split):
    """Both summands as tables; None where connecting lines have entries other than 0, 1 and -1."""
    summands = Summands(sp.csc_array(matrix))
    try:
        summands.split(split)
    except CertificateError:
        return None
    return [summands.summand(k)[2].toarray() for k in range(2)]


@settings(max_examples=300)
@given(st.integers(0, 10**9))
def test_sums_of_totally_unimodular_matrices_are_totally_unimodular(seed):
    matrix, split = random_sum(np.random.default_rng(seed))
    summands = summands_of(matrix, split)
    both = summands is not None and all(is_tu(summand) for summand in summands)
    assert is_tu(matrix) if both else (split.order == 3 or not is_tu(matrix))


def test_both_summands_must_have_the_same_sign():
    matrix = np.array([[1, 1], [1, -1]])
    for sign, known in ((1, [True, False]), (-1, [False, True])):
        split = Split(np.array([1]), np.array([1]), np.array([[0, 1], [1, 0]]), sign)
        assert [is_tu(summand) for summand in summands_of(matrix, split)] == known


def connectivity(matrix, side):
    """Ranks of both corners together; a bit for each line, rows first, tells its side."""
    m, n = matrix.shape
    rows, columns = sides_of(matrix, side)
    corners = (
        matrix[np.ix_(np.delete(np.arange(m), rows), columns)],
        matrix[np.ix_(rows, np.delete(np.arange(n), columns))],
    )
    return sum(int(np.linalg.matrix_rank(c)) if c.size else 0 for c in corners)


def sides_of(matrix, side):
    """Rows and columns whose bit is set."""
    m, n = matrix.shape
    lines = np.array([k for k in range(m + n) if side >> k & 1], np.int64)
    return lines[lines < m], lines[lines >= m] - m


@pytest.mark.parametrize(
    "matrix",
    [
        graph_matrix(nx.wheel_graph(5)),
        graph_matrix(nx.wheel_graph(6)).T,
        graph_matrix(nx.circular_ladder_graph(3)),
        R12,
    ],
    ids=["wheel of 4 spokes", "dual wheel of 5 spokes", "prism", "R12"],
)
def test_every_separation_of_order_3_is_a_sum(matrix):
    """In whatever basis, if there is none of a lower order and each side has four lines (Seymour
    1980). The form of the sum changes with the basis."""
    rng, seen = np.random.default_rng(1), set()
    piece = plain(matrix)
    for _ in range(8):
        matrix = disguised(rng, piece, 5).matrix
        lines = sum(matrix.shape)
        for side in range(1, 1 << (lines - 1)):
            size, rank = side.bit_count(), connectivity(matrix, side)
            assert rank >= min(size, lines - size, 2)
            if rank == 2 and min(size, lines - size) >= 4:
                splits = [split_off(matrix, *sides_of(matrix, side), sign) for sign in (1, -1)]
                both = [summands_of(matrix, split) for split in splits]
                assert any(s is not None and is_tu(s[0]) and is_tu(s[1]) for s in both)
                rows = set(splits[0].rows.tolist())
                seen.add(sum(i in rows for i in splits[0].entries[:, 0].tolist()))
    assert seen == {0, 1, 2}


def chain(count):
    """Matrices of R10 in a row, each joined to the next by a sum of order 2; and their proof."""
    known, (i, j) = R10_MATRICES[0], (0, 2)  # an entry that is 0
    rows, columns = np.delete(np.arange(5), i), np.delete(np.arange(5), j)
    own, out, into = known[np.ix_(rows, columns)], known[rows, j], known[i, columns]
    blocks = sp.kron(sp.eye_array(count, dtype=np.int64), own)
    links = sp.kron(sp.eye_array(count, k=1, dtype=np.int64), np.outer(out, into))
    matrix = (blocks + links).tocsc()
    matrix.eliminate_zeros()
    steps, parts = [], []
    for k in range(count - 1, 0, -1):
        entry = [4 * k - 4 + int(np.argmax(out == 1)), 4 * k + int(np.argmax(into == 1))]
        lines = 4 * k + np.arange(4)
        link = [4 * count + len(steps) - 1] if steps else []
        steps.append(Split(lines, np.append(lines, link).astype(np.int64), np.array([entry])))
    summands = Summands(matrix)
    found = {}
    for step in steps:
        summands.split(step)
    for k in range(count):
        part = summands.summand(k)[2]
        key = part.toarray().tobytes()
        if key not in found:
            found[key] = leaf_part(part)
        parts.append(found[key])
    return matrix, Sum(tuple(steps), tuple(parts))


def test_long_chains_of_sums_are_no_obstacle():
    matrix, proof = chain(2000)
    assert matrix.shape == (8000, 8000)
    ends = {"network", "conetwork"}  # these have lost a line
    assert {part.kind for part in proof.parts} == {"r10", *ends}
    claim = whole(proof, np.broadcast_to(0, matrix.shape))
    assert accepts(matrix, claim)
    matrix.data[matrix.nnz // 2] *= -1
    assert not accepts(matrix, claim)


def test_a_split_takes_time_in_proportion_to_what_is_split_off():
    """Not to what stays: else a chain of sums would take time in proportion to its square."""
    touched = []
    for count in (20, 400):
        matrix, proof = chain(count)
        summands = Summands(matrix)
        calls = CountedCalls()
        with calls:
            summands.split(proof.steps[0])
        touched.append(calls.count)
    assert touched[0] == touched[1]


class CountedCalls:
    """Counts the lines of Python that are run."""

    def __init__(self):
        self.count = 0

    def trace(self, frame, event, argument):
        self.count += event == "line"
        return self.trace

    def __enter__(self):
        self.before = sys.gettrace()
        sys.settrace(self.trace)

    def __exit__(self, *error):
        sys.settrace(self.before)


ONE = Network(np.array([[0, 1]]), np.array([[0, 1]]))


def test_what_is_nested_too_deeply_is_refused_in_a_sentence():
    deep = ONE
    for _ in range(5000):
        deep = Pivot(0, 0, deep)
    with pytest.raises(CertificateError, match="nested too deeply"):
        check_certificate([[1]], whole(deep, [[1]]))
    data = whole(ONE, [[1]]).to_dict()
    for _ in range(5000):
        data["blocks"][0] = {
            **data["blocks"][0],
            "kind": "pivot",
            "row": 0,
            "column": 0,
            "rest": data["blocks"][0],
        }
    with pytest.raises(CertificateError, match="nested too deeply"):
        Certificate.from_dict(data)


TWO = [[1, 1, 0], [1, 0, 1]]


def cut(rows=(1,), columns=(2,), entries=((1, 0),), sign=1):
    return Split(
        *(np.array(lines, np.int64) for lines in (rows, columns)),
        np.array(entries, np.int64).reshape(-1, 2),
        sign,
    )


@pytest.mark.parametrize(
    ("steps", "complaint"),
    [
        ((cut(rows=(), columns=(), entries=()),), "are none, or of several"),
        ((cut(), cut(rows=(0,), columns=(2,), entries=())), "are none, or of several"),
        ((cut(rows=(2,)),), "no row 2"),
        ((cut(rows=(-1,)),), "no row -1"),
        ((cut(rows=(1, 1)),), "row 1 is named twice"),
        ((cut(entries=()),), "not the product"),
        ((cut(entries=((0, 1),)),), "in no corner"),
        ((cut(entries=((1, 1),)),), "do not span"),
        ((cut(entries=((1, 0), (1, 1))),), "do not span"),
        ((cut(entries=((1, 0), (0, 2))),), "do not span"),
        ((cut(entries=((1, 0), (1, 0)), sign=2),), "sign"),
        ((cut(entries=((1, 0),) * 3),), "above 3"),
        ((Step("row", 0, "zero"),), "row 0 is not zero"),
        ((Step("row", 0, "unit"),), "row 0 is no unit line"),
        ((Step("row", 5, "unit"),), "no row 5"),
        ((Step("row", 0, "copy", 1, 1),), "row 0 is no copy of row 1"),
        ((Step("row", 0, "copy", 0, 1),), "no row 0 beside 0"),
        ((Step("column", 0, "twice"),), "unknown reason 'twice'"),
        ((Step("column", 2, "unit"), Step("column", 2, "zero")), "step 1: there is no column 2"),
        ((), "2 parts for 1 summands"),
        ((cut(),), "summand 0"),
    ],
)
def test_a_step_that_does_not_hold_is_named(steps, complaint):
    with pytest.raises(CertificateError, match=complaint):
        Sum(steps, (ONE, ONE)).check(sp.csc_array(TWO))


def test_nothing_but_totally_unimodular_parts_will_do():
    for part in (Sum((), (ONE_ROW,)), Pivot(0, 0, ONE_ROW)):
        with pytest.raises(CertificateError, match="TU"):
            part.check(sp.csc_array([[1]]))
    for part in (Sum((), (ONE,)), Pivot(0, 0, ONE)):
        with pytest.raises(CertificateError, match="entry"):
            part.check(sp.csc_array([[2]]))


def test_a_pivot_that_would_fill_the_memory_is_refused():
    size = 50_000
    cross = np.arange(1, size), np.zeros(size - 1, np.int64)
    places = [np.concatenate([[0], *order]) for order in (cross, cross[::-1])]
    matrix = sp.csc_array((np.ones(2 * size - 1, np.int64), places), shape=(size, size))
    with pytest.raises(CertificateError, match="too many"):
        Pivot(0, 0, ONE).check(matrix)


def test_empty_matrices_and_sides():
    nothing = Network(np.empty((0, 2), np.int64), np.empty((0, 2), np.int64))
    Sum((), (nothing,)).check(sp.csc_array(np.zeros((0, 0), np.int64)))
    all_of_it = cut(rows=(0,), columns=(0,), entries=())
    Sum((all_of_it,), (nothing, ONE)).check(sp.csc_array([[1]]))


@pytest.mark.parametrize(
    "spoil",
    [
        lambda part: part.pop("steps"),
        lambda part: part.update(steps=[3]),
        lambda part: part.update(parts=[None]),
        lambda part: part["steps"][0].pop("entries"),
        lambda part: part["steps"][0].update(entries=[[1]]),
        lambda part: part["steps"][0].update(rows=["1"]),
        lambda part: part["steps"][0].update(rows=[1, 2**70]),
        lambda part: part["steps"][0].update(entries=[[1, 0], [1, 2]]),
        lambda part: part["steps"][0].update(entries=[[1, 0], [1, 2]], sign=True),
        lambda part: part.update(kind="r10"),
        lambda part: part.update(kind="pivot"),
        lambda part: part.update(kind="pivot", row=0, column=0.0, rest=ONE.to_dict()),
        lambda part: part.update(kind="pivot", row=9, column=0, rest=ONE.to_dict()),
    ],
)
def test_broken_json_is_refused_in_a_sentence(spoil):
    data = whole(Sum((cut(),), (ONE, ONE)), TWO).to_dict()
    spoil(data["blocks"][0])
    with pytest.raises(CertificateError, match=r"\w+ \w+ \w+"):
        check_certificate(TWO, Certificate.from_dict(data))


@pytest.mark.parametrize("kind", ["sum", "pivot", "r10"])
def test_the_command_line_checks_every_kind(tmp_path, kind):
    matrix, data = random_proof(np.random.default_rng(5), kind)
    model, certificate = tmp_path / "cellar.lp", tmp_path / "cellar.json"
    write_lp(model, matrix, 7)
    proof = whole(KINDS[kind].from_dict(data), matrix).to_dict()
    certificate.write_text(json.dumps(proof | {"fingerprint": fingerprint(read(model))}))
    assert checked(certificate, model) == (0, f"every vertex of {model} is whole (1 block)")
    write_lp(model, matrix, 8)
    assert checked(certificate, model)[0] == 1
    changed = -matrix
    write_lp(model, changed, 7)
    certificate.write_text(json.dumps(proof | {"fingerprint": fingerprint(read(model))}))
    assert checked(certificate, model)[0] == (0 if part_holds(changed, data) else 1)
    certificate.write_text("[" * 100_000)
    assert checked(certificate, model) == (2, f"{certificate}: its JSON is nested too deeply")


@pytest.mark.parametrize(("count", "shown"), [(2, 0), (8, 7)])
def test_the_command_line_tells_what_a_sum_is_made_of(tmp_path, count, shown):
    model = tmp_path / "cellar.lp"
    write_lp(model, chain(count)[0].toarray(), 1)
    lines = [line.strip() for line in sum_words(assess(read(model)))]
    assert lines[0].startswith("sum ")
    assert sum(line.startswith("summand ") or "further summands" in line for line in lines) == shown


def checked(certificate, model):
    """Exit status of `latpath check`, and what it says after the first colon."""
    result = CliRunner().invoke(main, ["check", str(certificate), str(model)])
    return result.exit_code, result.output.strip().split(": ", 1)[1]


def write_lp(path, matrix, side):
    """A model with whole-number columns from 0 to 3: all rows at most `side`."""
    names = [f"x{j}" for j in range(matrix.shape[1])]
    rows = [
        " ".join(f"{value:+d} {names[j]}" for j, value in enumerate(row) if value)
        for row in matrix.tolist()
    ]
    lines = ["maximize", " obj: " + " + ".join(names), "subject to"]
    lines += [f" r{i}: {row} <= {side}" for i, row in enumerate(rows)]
    lines += ["bounds", *(f" 0 <= {name} <= 3" for name in names)]
    path.write_text("\n".join([*lines, "general", " " + " ".join(names), "end", ""]))

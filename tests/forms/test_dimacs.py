"""Flows and assignments from DIMACS files: what they become, and what is refused where."""

from __future__ import annotations

import gzip
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from model_files import write

from pyomo_latpath.forms.dimacs import ASSIGNMENT, FLOW, ArcNames, read_assignment, read_flow
from pyomo_latpath.forms.dimacs_text import parse_at_once, parse_line_by_line
from pyomo_latpath.forms.file_text import ModelFileError

# Milk from dairy 1 over the cheese caves 2 and 3 to market 4; node 5 stands alone.
CAVES = """c wheels per day

p min 5 6
n 1 4
n 4 -4
a 1 2 0 4 2
c the long road
a 1 3 1 2 2
a 2 3 0 2 -1
a 2 3 0 2 -1
a 3 3 0 7 5
a 3 4 0 5 1
"""

VANS = """p asn 4 3
n 1
n 2
a 1 3 7
a 1 4 2
a 2 4 3
"""


def test_a_flow_becomes_its_node_arc_matrix(tmp_path):
    form = read_flow(write(tmp_path, "caves.min", CAVES))
    assert form.matrix.toarray().tolist() == [
        [1, 1, 0, 0, 0, 0],
        [-1, 0, 1, 1, 0, 0],
        [0, -1, -1, -1, 0, 1],  # the self loop leaves and enters: nothing remains
        [0, 0, 0, 0, 0, -1],
        [0, 0, 0, 0, 0, 0],
    ]
    assert form.row_lower.tolist() == form.row_upper.tolist() == [4, 0, 0, -4, 0]
    assert form.col_lower.tolist() == [0, 1, 0, 0, 0, 0]
    assert form.col_upper.tolist() == [4, 2, 2, 2, 7, 5]
    assert form.cost.tolist() == [2, 2, -1, -1, 5, 1]
    assert form.sense == "min"
    assert form.integer.all()


def test_names_say_number_and_ends_and_parallel_arcs_differ(tmp_path):
    form = read_flow(write(tmp_path, "caves.min", CAVES))
    assert form.col_names[2:4] == ["a3 (2->3)", "a4 (2->3)"]
    assert form.col_names[-1] == "a6 (3->4)"
    assert list(form.row_names) == ["node 1", "node 2", "node 3", "node 4", "node 5"]
    assert len(set(form.col_names)) == len(form.col_names) == 6


def test_names_end_where_the_arcs_end():
    names = ArcNames(np.array([1]), np.array([2]), numbered=True)
    with pytest.raises(IndexError):
        names[1]
    assert list(names) == ["a1 (1->2)"]


def test_an_assignment_takes_every_node_exactly_once(tmp_path):
    form = read_assignment(write(tmp_path, "vans.asn", VANS))
    assert form.matrix.toarray().tolist() == [[1, 1, 0], [0, 0, 1], [1, 0, 0], [0, 1, 1]]
    assert set(form.row_lower) == set(form.row_upper) == {1.0}
    assert (form.col_lower.tolist(), form.col_upper.tolist()) == ([0.0] * 3, [1.0] * 3)
    assert form.cost.tolist() == [7, 2, 3]
    assert list(form.col_names) == ["1->3", "1->4", "2->4"]
    assert form.sense == "min"
    assert form.integer.all()


def test_a_pair_named_twice_gets_numbered_names(tmp_path):
    text = VANS.replace("p asn 4 3", "p asn 4 4") + "a 2 4 1\n"
    form = read_assignment(write(tmp_path, "vans.asn", text))
    assert form.col_names[2:] == ["a3 (2->4)", "a4 (2->4)"]


@pytest.mark.parametrize(
    "change",
    [
        lambda text: text.replace("\n", "\r\n"),
        lambda text: text.replace("\n", "\n\nc more\n"),
        lambda text: text.replace(" ", "\t  "),
        lambda text: text.rstrip("\n"),
        lambda text: text.replace(" 4 2\n", " 4.0 2e0 \n"),
    ],
    ids=["windows", "comments", "tabs", "no last line end", "other numbers"],
)
def test_the_look_of_the_file_does_not_matter(tmp_path, change):
    plain = read_flow(write(tmp_path, "plain.min", CAVES))
    other = read_flow(write(tmp_path, "other.min", change(CAVES)))
    assert_same_form(plain, other)


def test_unbalanced_supplies_are_a_model_without_solution_not_an_error(tmp_path):
    form = read_flow(write(tmp_path, "caves.min", CAVES.replace("n 4 -4", "n 4 -3")))
    assert form.row_lower.sum() == 1


def test_gzipped_files_read_the_same(tmp_path):
    plain = read_flow(write(tmp_path, "caves.min", CAVES))
    packed = tmp_path / "caves.min.gz"
    packed.write_bytes(gzip.compress(CAVES.encode()))
    assert_same_form(plain, read_flow(packed))


FLOW_ERRORS = {
    "no problem line": ("c nothing\n", None, "'p min NODES ARCS' is missing"),
    "empty": ("", None, "'p min NODES ARCS' is missing"),
    "arc before problem": ("a 1 2 0 1 1\np min 2 1\n", 1, "must come before the first 'a' line"),
    "two problem lines": ("p min 2 0\np min 2 0\n", 2, "a second problem line after 1"),
    "short problem line": ("c\np min 5\n", 2, "has 3 words"),
    "other problem": ("p max 5 6\n", 1, "speaks of 'max'"),
    "sizes": ("p min five 6\n", 1, "not whole numbers"),
    "huge": ("p min 99999999999 6\n", 1, "announces 99999999999"),
    "unknown letter": ("p min 2 0\nx 3\n", 2, "starts with 'x'"),
    "glued letter": ("p min 2 1\na1 2 0 1 1 1\n", 2, "starts with 'a1'"),
    "short arc": ("p min 2 1\na 1 2 0 4\n", 2, "has 4 values after 'a'; expected 'a TAIL HEAD"),
    "short and long": (
        "p min 2 2\na 1 2 0 4\na 1 2 0 4 1 1\n",
        2,
        "has 4 values after 'a'",
    ),
    "long node": ("p min 2 0\nn 1 2 3\n", 2, "has 3 values after 'n'; expected 'n NODE SUPPLY'"),
    "letters": ("p min 2 1\na 1 2 0 many 1\n", 2, "'many' stands where a number is expected (the"),
    "letter glued": ("p min 2 1\na 1 2 0 3a 1\n", 2, "'3a' stands where a number"),
    "minus glued": ("p min 2 1\na 1 2 0 3-1 1\n", 2, "'3-1' stands where a number"),
    "nan": ("p min 2 1\na 1 2 0 nan 1\n", 2, "'nan' stands where a number"),
    "infinite": ("p min 2 1\na 1 2 0 inf 1\n", 2, "'inf' stands where a number"),
    "underscore": ("p min 2 1\na 1 2 0 1_0 1\n", 2, "'1_0' stands where a number"),
    "beyond exact": ("p min 2 1\na 1 2 0 1e18 1\n", 2, "the capacity is beyond 2^53"),
    "overflow": ("p min 2 1\na 1 2 0 1 -1e999\n", 2, "the cost is beyond 2^53"),
    "tail": ("p min 2 1\n\na 0 2 0 4 1\n", 3, "the tail 0 is not a node; nodes are 1 to 2"),
    "head": ("p min 2 2\na 1 2 0 4 1\na 1 3 0 4 1\n", 3, "the head 3 is not a node"),
    "part of a node": ("p min 2 1\na 1 1.5 0 4 1\n", 2, "the head 1.5 is not a node"),
    "supply node": ("p min 2 0\nn 7 1\n", 2, "the node 7 is not a node"),
    "supply twice": ("p min 2 0\nn 2 1\nn 1 1\nn 2 1\n", 4, "node 2 has a second 'n' line"),
    "lower": ("p min 2 1\na 1 2 5 4 1\n", 2, "the lower bound 5 exceeds the capacity 4"),
    "negative": ("p min 2 1\na 1 2 0 -4 1\n", 2, "the capacity -4 is negative"),
    "negative lower": ("p min 2 1\na 1 2 -1 4 1\n", 2, "the lower bound -1 is negative"),
    "too few": ("c\np min 2 3\na 1 2 0 1 1\n", 2, "announces 3 arcs, the file has 1"),
    "too many": ("p min 2 0\na 1 2 0 1 1\n", 1, "announces 0 arcs, the file has 1"),
}


@pytest.mark.parametrize(("text", "line", "phrase"), FLOW_ERRORS.values(), ids=FLOW_ERRORS)
def test_a_wrong_flow_is_refused_with_file_and_line(tmp_path, text, line, phrase):
    path = write(tmp_path, "caves.min", text)
    with pytest.raises(ModelFileError) as caught:
        read_flow(path)
    assert caught.value.line == line
    assert phrase in str(caught.value)
    assert str(path) in str(caught.value)


ASSIGNMENT_ERRORS = {
    "other problem": ("p min 4 3\n", 1, "expected 'p asn NODES ARCS' in this kind of file"),
    "left again": (VANS.replace("n 2", "n 1"), 3, "node 1 has a second 'n' line"),
    "from the right": (VANS.replace("a 2 4", "a 3 4"), 6, "node 3 has no 'n' line"),
    "to the left": (VANS.replace("a 1 4", "a 1 2"), 5, "node 2 has an 'n' line"),
    "supply": (VANS.replace("n 2", "n 2 1"), 3, "expected 'n NODE'"),
    "range": (VANS.replace("a 1 4", "a 1 5"), 5, "the right 5 is not a node"),
}


@pytest.mark.parametrize(
    ("text", "line", "phrase"), ASSIGNMENT_ERRORS.values(), ids=ASSIGNMENT_ERRORS
)
def test_a_wrong_assignment_is_refused_with_file_and_line(tmp_path, text, line, phrase):
    with pytest.raises(ModelFileError) as caught:
        read_assignment(write(tmp_path, "vans.asn", text))
    assert caught.value.line == line
    assert phrase in caught.value.sentence


@st.composite
def networks(draw):
    """Supplies, arcs, and the same as a file with comments and blanks strewn in."""
    nodes = draw(st.integers(1, 6))
    node = st.integers(1, nodes)
    numbers = st.tuples(node, node, st.integers(0, 9), st.integers(0, 9), st.integers(-99, 99))
    arcs = [(t, h, low, low + width, c) for t, h, low, width, c in draw(st.lists(numbers))]
    supply = draw(st.dictionaries(node, st.integers(-50, 50)))
    lines = [f"n {i} {b}" for i, b in supply.items()]
    lines += [" ".join(["a", *map(str, arc)]) for arc in arcs]
    lines = draw(st.permutations(lines)) if draw(st.booleans()) else lines
    noise = st.sampled_from(["", "c", "c a 1 2 3 4 5", " \t", "c p min 1 1"])
    text = []
    for line in [f"p min {nodes} {len(arcs)}", *lines]:
        text += [*draw(st.lists(noise, max_size=2)), line]
    arcs = [tuple(map(int, line.split()[1:])) for line in lines if line[0] == "a"]
    return nodes, supply, arcs, draw(st.sampled_from(["\n", "\r\n"])).join(text)


@settings(max_examples=60, deadline=None)
@given(network=networks())
def test_written_networks_come_back(tmp_path_factory, network):
    nodes, supply, arcs, text = network
    form = read_flow(write(tmp_path_factory.mktemp("flow"), "any.min", text))
    matrix = np.zeros((nodes, len(arcs)))
    for j, (tail, head, *_) in enumerate(arcs):
        matrix[tail - 1, j] += 1
        matrix[head - 1, j] -= 1
    assert np.array_equal(form.matrix.toarray(), matrix)
    assert form.row_lower.tolist() == [supply.get(i, 0) for i in range(1, nodes + 1)]
    for position, values in enumerate((form.col_lower, form.col_upper, form.cost), start=2):
        assert values.tolist() == [arc[position] for arc in arcs]


@settings(max_examples=200, deadline=None)
@given(network=networks(), data=st.data())
def test_reading_at_once_never_differs_from_reading_line_by_line(network, data):
    """Also not on files with one character changed."""
    text = bytearray(network[3].encode())
    at = data.draw(st.integers(0, len(text) - 1))
    text[at] = data.draw(st.sampled_from(b"0a-.ec np\n+\0"))
    for dialect in (FLOW, ASSIGNMENT):
        quick = parse_at_once(bytes(text), dialect)
        try:
            slow = parse_line_by_line(Path("any.min"), bytes(text), dialect)
        except ModelFileError:
            assert quick is None
            continue
        if quick is None:
            continue
        assert (quick.nodes, quick.arcs) == (slow.nodes, slow.arcs)
        assert quick.problem_place == slow.problem_place
        for letter in dialect.fields:
            assert np.array_equal(quick.lines[letter].numbers, slow.lines[letter].numbers)
            assert np.array_equal(quick.lines[letter].places, slow.lines[letter].places)


@given(network=networks())
@settings(max_examples=60, deadline=None)
def test_files_in_order_never_need_the_slow_way(network):
    assert parse_at_once(network[3].encode(), FLOW) is not None


def assert_same_form(left, right):
    assert (left.matrix != right.matrix).nnz == 0
    for field in ("row_lower", "row_upper", "col_lower", "col_upper", "cost", "integer"):
        assert np.array_equal(getattr(left, field), getattr(right, field))
    assert list(left.col_names) == list(right.col_names)
    assert list(left.row_names) == list(right.row_names)

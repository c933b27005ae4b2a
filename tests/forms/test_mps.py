"""MPS files: the conventions of the format, and what is refused where."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from model_files import MPS, ROWS, write

from pyomo_latpath.forms.from_file import ModelFileError, read
from pyomo_latpath.forms.linear_form import LinearForm

INF = math.inf


def read_bounds(folder: Path, *lines: str) -> LinearForm:
    text = MPS.format(bounds="".join(f" {line}\n" for line in lines))
    return read(write(folder, "cellar.mps", text))


# Bounds given for both columns, and what becomes of the plain and of the marked column.
BOUNDS = {
    "none": ((), (0, INF), (0, 1)),
    "upper": (("UP", 5), (0, 5), (0, 5)),
    "upper zero": (("UP", 0), (0, 0), (0, 0)),
    "negative upper opens the lower": (("UP", -3), (-INF, -3), (-INF, -3)),
    "lower ends the default of 1": (("LO", 2), (2, INF), (2, INF)),
    "lower zero too": (("LO", 0), (0, INF), (0, INF)),
    "fixed": (("FX", 4), (4, 4), (4, 4)),
    "free": (("FR",), (-INF, INF), (-INF, INF)),
    "minus infinity": (("MI",), (-INF, INF), (-INF, INF)),
    "plus infinity": (("PL",), (0, INF), (0, INF)),
    "binary": (("BV",), (0, 1), (0, 1)),
    "integer lower": (("LI", 2), (2, INF), (2, INF)),
    "integer upper": (("UI", 7), (0, 7), (0, 7)),
    "negative integer upper": (("UI", -7), (-INF, -7), (-INF, -7)),
    "infinite upper": (("UP", "1e30"), (0, INF), (0, INF)),
    "infinite lower": (("LO", "-1e20"), (-INF, INF), (-INF, INF)),
}


@pytest.mark.parametrize(("bound", "plain", "marked"), BOUNDS.values(), ids=BOUNDS)
def test_bounds_follow_the_conventions(tmp_path, bound, plain, marked):
    number = "".join(f" {value}" for value in bound[1:])
    lines = [f"{bound[0]} BND {name}{number}" for name in ("milk", "wheel") if bound]
    form = read_bounds(tmp_path, *lines)
    assert (form.col_lower[0], form.col_upper[0]) == plain
    assert (form.col_lower[1], form.col_upper[1]) == marked
    assert form.integer.tolist() == [bound[:1] in (("BV",), ("LI",), ("UI",)), True]


@pytest.mark.parametrize("order", [1, -1])
@pytest.mark.parametrize(
    ("lines", "limits"),
    [
        (("LO BND milk -5", "UP BND milk -3"), (-5, -3)),
        (("MI BND milk", "UP BND milk 5"), (-INF, 5)),
        (("FR BND milk", "LO BND milk 2"), (2, INF)),
        (("BV BND milk", "FX BND milk 1"), (1, 1)),
        (("BV BND milk", "LO BND milk 0"), (0, 1)),
        (("UP BND milk 4", "UP BND milk 4"), (0, 4)),
    ],
)
def test_bounds_may_come_in_any_order_and_numbers_win(tmp_path, lines, limits, order):
    form = read_bounds(tmp_path, *lines[::order])
    assert (form.col_lower[0], form.col_upper[0]) == limits


@pytest.mark.parametrize(
    "lines",
    [("UP wheel 5", "FR milk"), ("UP BND wheel 5", "FR BND milk 0"), ("UP 7 wheel 5", "FR 7 milk")],
)
def test_the_name_of_the_set_of_bounds_may_be_left_out(tmp_path, lines):
    form = read_bounds(tmp_path, *lines)
    assert form.col_upper.tolist() == [INF, 5]
    assert form.col_lower.tolist() == [-INF, 0]


def test_semicontinuous_columns_are_marked(tmp_path):
    form = read_bounds(tmp_path, "SC BND milk 5", "LO BND milk 2", "SI BND wheel 4")
    assert form.semicontinuous.tolist() == [True, True]
    assert form.integer.tolist() == [False, True]
    assert (form.col_lower.tolist(), form.col_upper.tolist()) == ([2, 0], [5, 4])


@pytest.mark.parametrize(
    "text", [ROWS, ROWS.replace("\n    MAX", " maximize"), ROWS.replace("    RHS  ", "    ")]
)
def test_ranges_senses_and_the_objective_s_constant(tmp_path, text):
    form = read(write(tmp_path, "rows.mps", text))
    assert list(form.row_names) == ["l", "g", "e", "f"]
    assert form.row_lower.tolist() == [6, 20, 30, 36]
    assert form.row_upper.tolist() == [10, 24, 34, 40]
    assert form.matrix.toarray().tolist() == [[1, 1], [2, 0], [3, 0], [4, 0]]
    assert (form.cost.tolist(), form.offset, form.sense) == ([5, 0], 7, "max")


def test_fixed_format_reads_names_with_blanks(tmp_path):
    text = MPS.format(bounds=" UP BND       big wh              3.\n")
    text = (
        text.replace("    wheel ", "    big wh")
        .replace("shelf ", "top sh")
        .replace("L  shelf", "L  top sh")
    )
    form = read(write(tmp_path, "cellar.mps", text))
    assert (list(form.col_names), list(form.row_names)) == (["milk", "big wh"], ["top sh"])
    assert form.matrix.toarray().tolist() == [[1, 2]]
    assert (form.row_upper.tolist(), form.col_upper.tolist()) == ([10], [INF, 3])
    assert form.integer.tolist() == [False, True]


@pytest.mark.parametrize(
    "change",
    [
        lambda text: text.encode().replace(b"\n", b"\r\n"),
        lambda text: b"\xef\xbb\xbf" + text.encode(),
        lambda text: text.replace("milk", "laitié").encode("latin-1"),
        lambda text: text.replace("ROWS", "* a comment\n\nROWS").encode(),
        lambda text: text.replace("ROWS", "rows").encode(),
    ],
    ids=["windows", "byte order mark", "latin letters", "comments", "small letters"],
)
def test_the_look_of_the_file_does_not_matter(tmp_path, change):
    path = tmp_path / "cellar.mps"
    path.write_bytes(change(MPS.format(bounds="")))
    form = read(path)
    assert form.matrix.toarray().tolist() == [[1, 2]]
    assert form.col_names[1] == "wheel"


MPS_ERRORS = {
    "text as cost": ("milk      cost                1.", "milk cost x", 6, "'x' stands"),
    "underscore": ("10.", "1_0", 11, "'1_0' stands where a number is expected"),
    "nan": ("10.", "nan", 11, "'nan' stands where a number is expected"),
    "infinite coefficient": ("shelf               2.", "shelf 1e20", 8, "finite number"),
    "unknown row": ("shelf               2.", "floor 2.", 8, "row 'floor' is not in ROWS"),
    "unknown row in RHS": ("RHS       shelf", "RHS       floor", 11, "'floor' is not in ROWS"),
    "unknown column": ("BOUNDS\n", "BOUNDS\n UP BND cow 3\n", 13, "'cow' is not in COLUMNS"),
    "unknown bound": ("BOUNDS\n", "BOUNDS\n ZZ BND milk 3\n", 13, "unknown type of bound 'ZZ'"),
    "bound without number": ("BOUNDS\n", "BOUNDS\n UP milk\n", 13, "needs a column and a number"),
    "bound without column": ("BOUNDS\n", "BOUNDS\n FR\n", 13, "a bound FR needs a column"),
    "two upper bounds": (
        "BOUNDS\n",
        "BOUNDS\n UP BND milk 3\n UP BND milk 4\n",
        14,
        "column 'milk' has a second upper bound, 4 after 3",
    ),
    "two lower bounds": (
        "BOUNDS\n",
        "BOUNDS\n LO BND milk 3\n FX BND milk 4\n",
        14,
        "column 'milk' has a second lower bound, 4 after 3",
    ),
    "two sets": (
        "BOUNDS\n",
        "BOUNDS\n UP A milk 3\n UP B wheel 4\n",
        14,
        "BOUNDS has a second set 'B' after 'A'",
    ),
    "two sides": (
        "BOUNDS\n",
        "    RHS  shelf  11\nBOUNDS\n",
        12,
        "row 'shelf' has a second right-hand side, 11 after 10",
    ),
    "row twice": (" L  shelf\n", " L  shelf\n G  shelf\n", 5, "a second row is named 'shelf'"),
    "objective's name": (" L  shelf\n", " L  cost\n", 4, "a second row is named 'cost'"),
    "type of row": (" L  shelf", " Q  shelf", 4, "row 'shelf' has the type 'Q'"),
    "nameless row": (" L  shelf", " L", 4, "expected the type and the name of a row"),
    "column again": ("RHS\n", "    milk cost 2\nRHS\n", 10, "column 'milk' begins a second time"),
    "entry again": (
        "    M1  ",
        "    milk shelf 3\n    M1  ",
        7,
        "column 'milk' has a second coefficient in row 'shelf'",
    ),
    "odd fields": ("milk      cost", "milk", 6, "expected one or two pairs of a row and a number"),
    "marker": ("'INTEND'", "'INTSTOP'", 9, "unknown marker 'INTSTOP'"),
    "section": ("BOUNDS\n", "BUNDS\n", 12, "unknown section 'BUNDS'"),
    "sense": ("ROWS\n", "OBJSENSE\n    BEST\nROWS\n", 3, "the sense of the objective is 'BEST'"),
    "no section": ("NAME          CELLAR\nROWS\n", "", 1, "outside the sections"),
    "cut off": ("ENDATA\n", "", 13, "ends without ENDATA; it may be cut off"),
    "quadratic": ("ENDATA", "QUADOBJ\n    milk milk 1.\nENDATA", 13, "a quadratic objective"),
    "ordered sets": ("ENDATA", "SOS\n S1 SOS s1 5\nENDATA", 13, "special ordered sets"),
    "infinite side": (" L  shelf", " G  shelf", None, "row 'shelf' has the limits [inf, inf]"),
}


@pytest.mark.parametrize(("old", "new", "line", "phrase"), MPS_ERRORS.values(), ids=MPS_ERRORS)
def test_a_wrong_mps_file_is_refused_with_file_and_line(tmp_path, old, new, line, phrase):
    text = MPS.format(bounds="")
    assert old in text
    text = text.replace(old, new, 1)
    if line is None:
        text = text.replace("10.", "1e30")
    path = write(tmp_path, "cellar.mps", text)
    with pytest.raises(ModelFileError) as caught:
        read(path)
    assert caught.value.line == line
    assert phrase in caught.value.sentence
    assert str(path) in str(caught.value)


def test_an_error_in_fixed_format_is_told_in_fixed_format(tmp_path):
    text = MPS.format(bounds=" ZZ BND       big wh              3.\n").replace(
        "    wheel ", "    big wh"
    )
    with pytest.raises(ModelFileError, match="line 13: unknown type of bound 'ZZ'"):
        read(write(tmp_path, "cellar.mps", text))


@settings(max_examples=200, deadline=None)
@given(data=st.data())
def test_a_damaged_mps_file_is_read_or_refused_but_never_breaks_the_reader(tmp_path_factory, data):
    """A line is dropped, a word exchanged or a character changed."""
    lines = data.draw(st.sampled_from([MPS.format(bounds=" FR BND milk\n"), ROWS])).split("\n")
    at = data.draw(st.integers(0, len(lines) - 1))
    words = lines[at].split(" ")
    words[data.draw(st.integers(0, len(words) - 1))] = data.draw(
        st.sampled_from(["", "UP", "BV", "1e999", "-7", "'MARKER'", "milk", "RHS", "ENDATA", "\0"])
    )
    lines[at] = " ".join(words)
    del lines[data.draw(st.integers(0, len(lines) - 1))]
    path = write(tmp_path_factory.mktemp("damaged"), "any.mps", "\n".join(lines))
    try:
        form = read(path)
    except ModelFileError as error:
        assert error.line is None or 1 <= error.line <= len(lines)
    else:
        assert form.shape == (len(form.row_names), len(form.col_names))

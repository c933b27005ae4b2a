"""Model files: the conventions of their formats, and what is refused where."""

from __future__ import annotations

import gzip
import math
import pickle
from pathlib import Path

import highspy
import numpy as np
import pytest
import scipy.sparse as sp
from hypothesis import given, settings
from hypothesis import strategies as st

from pyomo_latpath.forms.from_file import ModelFileError, read
from pyomo_latpath.forms.linear_form import LinearForm

INF = math.inf

# Earlier releases refuse an .lp file without a reason.
HIGHS_NAMES_LINES = (highspy.HIGHS_VERSION_MAJOR, highspy.HIGHS_VERSION_MINOR) >= (1, 16)

# One column outside integer markers and one inside; the bounds are put in by the tests.
MPS = """NAME          CELLAR
ROWS
 N  cost
 L  shelf
COLUMNS
    milk      cost                1.   shelf               1.
    M1        'MARKER'                 'INTORG'
    wheel     cost                1.   shelf               2.
    M2        'MARKER'                 'INTEND'
RHS
    RHS       shelf              10.
BOUNDS
{bounds}ENDATA
"""


def write(folder: Path, name: str, text: str) -> Path:
    path = folder / name
    path.write_bytes(text.encode())
    return path


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


ROWS = """NAME
OBJSENSE
    MAX
ROWS
 L  l
 N  gain
 G  g
 E  e
 E  f
 N  unused
COLUMNS
    x  l 1 g 2
    x  e 3 f 4
    x  gain 5 unused 6
    y  l 1
RHS
    RHS  l 10 g 20
    RHS  e 30 f 40
    RHS  gain -7
RANGES
    RNG  l -4 g 4
    RNG  e 4 f -4
ENDATA
"""


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


LP = """\\ turning the wheels
Maximize
 gain: 3 young + 2 old - 4
Subject To
 shelf: young + old <= 12.5
 young - old >= -3
 shelf: young + 0 old >= 1
Bounds
 old <= 9
 -inf <= mould <= 7
 4 <= salt <= 8
General
 young old
Semi-continuous
 salt
End
"""


def test_an_lp_file_keeps_names_types_sense_and_constant(tmp_path):
    form = read(write(tmp_path, "wheels.lp", LP))
    assert list(form.col_names) == ["young", "old", "mould", "salt"]
    assert [form.row_names[0], form.row_names[2]] == ["shelf", "shelf (row 3)"]
    assert len(set(form.row_names)) == 3
    assert form.matrix.toarray().tolist() == [[1, 1, 0, 0], [1, -1, 0, 0], [1, 0, 0, 0]]
    assert form.row_lower.tolist() == [-INF, -3, 1]
    assert form.row_upper.tolist() == [12.5, INF, INF]
    assert form.col_lower.tolist() == [0, 0, -INF, 4]
    assert form.col_upper.tolist() == [INF, 9, 7, 8]
    assert (form.cost.tolist(), form.offset, form.sense) == ([3, 2, 0, 0], -4, "max")
    assert form.integer.tolist() == [True, True, False, False]
    assert form.semicontinuous.tolist() == [False, False, False, True]


LP_ERRORS = {
    "number": ("12.5", "many", 5, "many"),
    "quadratic objective": ("3 young", "[ old ^ 2 ] / 2 + 3 young", None, "quadratic in 'old'"),
    "quadratic row": ("young - old", "young - old + [ old ^ 2 ]", 6, "quadratic"),
    "ordered set": ("End", "SOS\n s1: S1:: young:1 old:2\nEnd", 16, "SOS"),
    "cut off": ("End\n", "", None, "end"),
    "tiny": (LP, "Minimize\n obj:\nSubject To\nEnd\n", None, "no columns"),
    "empty": (LP, "", None, "no columns"),
    "huge coefficient": ("young + old", "young + 1e16 old", None, "1e+15"),
}


@pytest.mark.parametrize(("old", "new", "line", "phrase"), LP_ERRORS.values(), ids=LP_ERRORS)
def test_a_wrong_lp_file_is_refused_in_highs_s_words(tmp_path, old, new, line, phrase):
    path = write(tmp_path, "wheels.lp", LP.replace(old, new, 1))
    with pytest.raises(ModelFileError) as caught:
        read(path)
    assert str(path) in str(caught.value)
    if HIGHS_NAMES_LINES or "quadratic in" in phrase or "columns" in phrase:
        assert phrase in caught.value.sentence
    if HIGHS_NAMES_LINES and line is not None:
        assert caught.value.line == line


def test_small_coefficients_are_kept(tmp_path):
    form = read(write(tmp_path, "wheels.lp", LP.replace("young - old", "1e-10 young - old")))
    assert form.matrix.toarray()[1, 0] == 1e-10


def test_reading_prints_nothing(tmp_path, capfd):
    read(write(tmp_path, "wheels.lp", LP))
    with pytest.raises(ModelFileError):
        read(write(tmp_path, "wheels.lp", "nonsense"))
    assert capfd.readouterr() == ("", "")


@pytest.mark.parametrize(("name", "text"), [("a.mps", MPS.format(bounds="")), ("a.lp", LP)])
@pytest.mark.parametrize("ending", [".gz", ".GZ"])
def test_gzipped_files_read_the_same(tmp_path, name, text, ending):
    packed = tmp_path / (name + ending)
    packed.write_bytes(gzip.compress(text.encode()))
    assert_same_form(read(write(tmp_path, name, text)), read(packed))


@pytest.mark.parametrize("name", ["a.mps.gz", "a.lp.gz", "a.min.gz", "a.asn.gz"])
@pytest.mark.parametrize("damage", [lambda data: data[:-20], lambda data: b"plain text"])
def test_damaged_gzip_files_are_refused(tmp_path, name, damage):
    path = tmp_path / name
    path.write_bytes(damage(gzip.compress(MPS.format(bounds="").encode())))
    with pytest.raises(ModelFileError, match="the gzip data is damaged or cut off"):
        read(path)


def test_every_kind_of_file_goes_to_its_reader(tmp_path):
    assert read(write(tmp_path, "A.MPS", MPS.format(bounds=""))).shape == (1, 2)
    assert read(str(write(tmp_path, "a.b.lp", LP))).shape == (3, 4)
    assert read(write(tmp_path, "a.min", "p min 2 1\na 1 2 0 1 1\n")).shape == (2, 1)
    assert read(write(tmp_path, "a.asn", "p asn 2 1\nn 1\na 1 2 1\n")).shape == (2, 1)


@pytest.mark.parametrize("name", ["model.txt", "model", "model.gz", "model.mps.bz2", ".gz"])
def test_unknown_endings_are_refused(tmp_path, name):
    path = write(tmp_path, name, MPS.format(bounds=""))
    with pytest.raises(ModelFileError, match=r"known are .mps, .lp, .min, .asn, each also .gz"):
        read(path)


@pytest.mark.parametrize("name", ["no.mps", "no.lp", "no.min", "no.asn.gz"])
def test_missing_files_are_the_operating_system_s_error(tmp_path, name):
    with pytest.raises(FileNotFoundError, match=name):
        read(tmp_path / name)


def test_the_error_survives_the_way_to_another_process():
    error = ModelFileError("caves.min", 3, "node 9 does not exist")
    again = pickle.loads(pickle.dumps(error))
    assert (str(again), again.line, again.path) == (str(error), 3, "caves.min")


@st.composite
def forms(draw, ranges):
    """Small forms that survive being written.

    Their numbers need few digits, all rows have a side (but for `ranges` not two different
    ones, which an .lp file cannot hold in one row) and all columns a cost.
    """
    m, n = draw(st.integers(1, 4)), draw(st.integers(1, 4))
    number = st.integers(-40, 40).map(lambda k: k / 8)
    pair = st.tuples(number, number).map(sorted)
    below, above = number.map(lambda k: (-INF, k)), number.map(lambda k: (k, INF))
    equal = number.map(lambda k: (k, k))
    row = st.one_of(below, above, equal, pair) if ranges else st.one_of(below, above, equal)
    column = st.one_of(below, above, equal, pair, st.just((-INF, INF)))
    rows = draw(st.lists(row, min_size=m, max_size=m))
    columns = draw(st.lists(column, min_size=n, max_size=n))
    entries = draw(st.lists(number | st.just(0.0), min_size=m * n, max_size=m * n))
    return LinearForm.from_arrays(
        np.reshape(entries, (m, n)),
        row_lower=[low for low, _ in rows],
        row_upper=[high for _, high in rows],
        col_lower=[low for low, _ in columns],
        col_upper=[high for _, high in columns],
        cost=draw(st.lists(number.filter(bool), min_size=n, max_size=n)),
        offset=draw(number),
        sense=draw(st.sampled_from(["min", "max"])),
        integer=draw(st.lists(st.booleans(), min_size=n, max_size=n)),
        row_names=[f"row{i}" for i in range(m)],
        col_names=[f"col{j}" for j in range(n)],
    )


@settings(max_examples=80, deadline=None)
@given(form=forms(ranges=True))
def test_an_mps_file_written_by_highs_is_read_back(tmp_path_factory, form):
    path = tmp_path_factory.mktemp("written") / "any.mps"
    write_with_highs(form, path)
    assert_same_form(form, read(path))


@settings(max_examples=80, deadline=None)
@given(form=forms(ranges=False))
def test_an_lp_file_written_by_highs_is_read_back(tmp_path_factory, form):
    path = tmp_path_factory.mktemp("written") / "any.lp"
    write_with_highs(form, path)
    assert_same_form(form, read(path))


def write_with_highs(form: LinearForm, path: Path) -> None:
    lp = highspy.HighsLp()
    lp.num_row_, lp.num_col_ = form.shape
    lp.row_lower_, lp.row_upper_ = form.row_lower, form.row_upper
    lp.col_lower_, lp.col_upper_ = form.col_lower, form.col_upper
    lp.col_cost_, lp.offset_ = form.cost, form.offset
    lp.sense_ = highspy.ObjSense.kMaximize if form.sense == "max" else highspy.ObjSense.kMinimize
    kinds = highspy.HighsVarType
    lp.integrality_ = [kinds.kInteger if whole else kinds.kContinuous for whole in form.integer]
    lp.row_names_, lp.col_names_ = list(form.row_names), list(form.col_names)
    matrix = sp.csc_array(form.matrix)
    lp.a_matrix_.format_ = highspy.MatrixFormat.kColwise
    lp.a_matrix_.start_, lp.a_matrix_.index_ = matrix.indptr, matrix.indices
    lp.a_matrix_.value_ = matrix.data
    highs = highspy.Highs()
    highs.setOptionValue("output_flag", False)
    assert highs.passModel(lp) == highspy.HighsStatus.kOk
    assert highs.writeModel(str(path)) != highspy.HighsStatus.kError


def assert_same_form(left: LinearForm, right: LinearForm) -> None:
    assert np.array_equal(left.matrix.toarray(), right.matrix.toarray())
    for field in ("row_lower", "row_upper", "col_lower", "col_upper", "cost"):
        assert np.array_equal(getattr(left, field), getattr(right, field)), field
    assert np.array_equal(left.integer, right.integer)
    assert np.array_equal(left.semicontinuous, right.semicontinuous)
    assert (left.offset, left.sense) == (right.offset, right.sense)
    assert list(left.row_names) == list(right.row_names)
    assert list(left.col_names) == list(right.col_names)

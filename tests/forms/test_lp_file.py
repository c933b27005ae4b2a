"""LP files, read by HiGHS: what is kept of them, and what is refused where."""

from __future__ import annotations

import math

import highspy
import pytest
from model_files import LP, write

from pyomo_latpath.forms.from_file import ModelFileError, read

INF = math.inf

# Earlier releases refuse an .lp file without a reason.
HIGHS_NAMES_LINES = (highspy.HIGHS_VERSION_MAJOR, highspy.HIGHS_VERSION_MINOR) >= (1, 16)


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


@pytest.mark.parametrize("content", [b"\0\0\0\0", b"min\n x\xff\x00\xfe", b"\x1f\x8b\x08\xff"])
def test_what_is_no_text_is_told_as_such(tmp_path, content):
    path = tmp_path / "caves.lp"
    path.write_bytes(content)
    with pytest.raises(ModelFileError) as caught:
        read(path)
    assert str(caught.value) == f"{path}: this is no text file"


def test_a_text_in_latin_1_is_read(tmp_path):
    path = tmp_path / "caves.lp"
    path.write_bytes("min\n 3 K\xe4se\nst\n r: K\xe4se >= 2\nend".encode("latin-1"))
    assert list(read(path).col_names) == ["K\xe4se"]


def test_small_coefficients_are_kept(tmp_path):
    form = read(write(tmp_path, "wheels.lp", LP.replace("young - old", "1e-10 young - old")))
    assert form.matrix.toarray()[1, 0] == 1e-10


def test_reading_prints_nothing(tmp_path, capfd):
    read(write(tmp_path, "wheels.lp", LP))
    with pytest.raises(ModelFileError):
        read(write(tmp_path, "wheels.lp", "nonsense"))
    assert capfd.readouterr() == ("", "")

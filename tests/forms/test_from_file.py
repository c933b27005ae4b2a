"""Model files of every kind: which reader they go to, gzip, and what HiGHS writes."""

from __future__ import annotations

import gzip
import math
import pickle
from pathlib import Path

import highspy
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from model_files import LP, MPS, assert_same_form, write
from with_highs import highs, program_of

from pyomo_latpath.forms.from_file import ModelFileError, read
from pyomo_latpath.forms.linear_form import LinearForm

INF = math.inf


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
    assert highs(program_of(form)).writeModel(str(path)) != highspy.HighsStatus.kError

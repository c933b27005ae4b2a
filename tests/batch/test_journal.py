"""The journal: nothing lost, nothing doubled, nothing mixed, whatever happens to it."""

from __future__ import annotations

import errno
import json
import os
import subprocess
import sys
import tempfile
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pyomo_latpath.batch.journal import SCHEMA, Journal, JournalError
from pyomo_latpath.batch.record import BatchRecord

resource = pytest.importorskip("resource", reason="limits of the operating system")

OPTIONS = {"seed": 0, "time_limit": None}
RECORDS = [BatchRecord(f"day {k}", str(k), "optimal", objective=k / 10) for k in range(6)]


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "journal.jsonl"


def written(path: Path) -> bytes:
    with Journal(path, OPTIONS) as journal:
        journal.append(RECORDS[:2])
        journal.append(RECORDS[2:])
    return path.read_bytes()


def test_records_come_back_in_the_order_in_which_they_were_written(path):
    written(path)
    with Journal(path, OPTIONS) as journal:
        assert list(journal.records()) == RECORDS
        assert list(journal.records({"day 3"})) == [RECORDS[3]]
        assert journal.get("day 4") == RECORDS[4]
        assert journal.get("day 6") is None
        assert ("day 5" in journal, "day 6" in journal) == (True, False)
        assert (len(journal), journal.notes, journal.replaced) == (6, [], 0)


def test_a_later_record_of_an_instance_replaces_the_earlier_one(path):
    again = BatchRecord("day 1", "changed", "infeasible")
    written(path)
    with Journal(path, OPTIONS) as journal:
        journal.append([again])
        assert (len(journal), journal.replaced, journal.get("day 1")) == (6, 1, again)
    with Journal(path, OPTIONS) as journal:
        assert list(journal.records()) == [*RECORDS[:1], *RECORDS[2:], again]


@given(st.data())
def test_cut_off_anywhere_the_whole_lines_stay_and_the_rest_can_follow(data):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "journal.jsonl"
        whole = written(path)
        size = data.draw(st.integers(0, len(whole)))
        path.write_bytes(whole[:size])
        with Journal(path, OPTIONS) as journal:
            kept = list(journal.records())
            assert kept == RECORDS[: max(0, whole[:size].count(b"\n") - 1)]
            assert bool(journal.notes) == (size > 0 and whole[size - 1 : size] != b"\n")
            journal.append(RECORDS[len(kept) :])
            assert list(journal.records()) == RECORDS
        assert path.read_bytes() == whole


def test_a_line_that_is_no_record_is_told_and_passed_over(path):
    lines = written(path).splitlines(keepends=True)
    lines[3] = b"\0" * 50 + b"\n"
    path.write_bytes(b"".join(lines))
    with Journal(path, OPTIONS) as journal:
        assert list(journal.records()) == RECORDS[:2] + RECORDS[3:]
        (note,) = journal.notes
    assert f"line 4 of {path} is no record" in note


def test_two_writers_are_refused(path):
    with Journal(path, OPTIONS) as journal:
        journal.append(RECORDS)
        with pytest.raises(JournalError, match="being written by another process"):
            Journal(path, OPTIONS)
    Journal(path, OPTIONS).close()


def test_another_process_is_refused_as_well(path):
    call = f"from pathlib import Path\nfrom {Journal.__module__} import Journal\n"
    call += f"Journal(Path({str(path)!r}), {OPTIONS!r})"
    with Journal(path, OPTIONS):
        result = subprocess.run(
            [sys.executable, "-c", call], capture_output=True, text=True, timeout=120
        )
    assert result.returncode == 1
    assert "is being written by another process" in result.stderr


def test_other_options_are_refused_by_name(path):
    before = written(path)
    with pytest.raises(JournalError, match=r"begun with seed = 0, now it is 3; .* one set"):
        Journal(path, OPTIONS | {"seed": 3})
    with pytest.raises(JournalError, match=r"begun with time_limit = not given, now it is 2\.5"):
        Journal(path, OPTIONS | {"time_limit": 2.5})
    with pytest.raises(JournalError, match="begun with seed = 0, now it is not given"):
        Journal(path, {"time_limit": None})
    assert path.read_bytes() == before


@pytest.mark.parametrize(
    "content",
    [b"column,value\n", b"{}\n", b"[1]\n", b"half", json.dumps({"schema": "x"}).encode() + b"\n"],
)
def test_a_file_of_another_kind_is_left_alone(path, content):
    path.write_bytes(content)
    with pytest.raises(JournalError, match="is no journal"):
        Journal(path, OPTIONS)
    assert path.read_bytes() == content


def test_the_first_line_says_what_it_is(path):
    head = json.loads(written(path).splitlines()[0])
    assert head == {"schema": SCHEMA, "options": OPTIONS}


def test_a_missing_folder_is_named(tmp_path):
    with pytest.raises(JournalError, match=r"nowhere.*no such file or directory"):
        Journal(tmp_path / "nowhere" / "journal.jsonl", OPTIONS)


def test_a_full_disk_loses_nothing_that_was_written(path):
    before = len(written(path))
    limits = resource.getrlimit(resource.RLIMIT_FSIZE)
    more = [BatchRecord(f"night {k}", "", "optimal") for k in range(9)]
    with Journal(path, OPTIONS) as journal:
        resource.setrlimit(resource.RLIMIT_FSIZE, (before + 700, limits[1]))
        try:
            with pytest.raises(JournalError, match="file too large; the 6 records in it are safe"):
                journal.append(more)
        finally:
            resource.setrlimit(resource.RLIMIT_FSIZE, limits)
        assert path.stat().st_size == before
        journal.append(more)
    with Journal(path, OPTIONS) as journal:
        assert list(journal.records()) == RECORDS + more
        assert journal.notes == []


def test_a_disk_that_fills_up_behind_the_cache_is_met_as_well(path, monkeypatch):
    before = written(path)

    def full(_: int) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    with Journal(path, OPTIONS) as journal:
        monkeypatch.setattr(os, "fsync", full)
        with pytest.raises(JournalError, match="no space left on device; the 6 records"):
            journal.append([BatchRecord("night", "", "optimal")])
        assert "night" not in journal
    assert path.read_bytes() == before

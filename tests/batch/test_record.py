"""Records and summaries on their way through JSON."""

from __future__ import annotations

import json
import math
from dataclasses import asdict, fields

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pyomo_latpath.batch.record import BatchRecord, Summary
from pyomo_latpath.batch.summary import MOST_SLOW, MOST_UNSOLVED, summarise

NUMBERS = st.none() | st.floats(allow_nan=False)
COUNTS = st.none() | st.integers(0, 10**12)
RECORDS = st.builds(
    BatchRecord,
    instance=st.text(),
    fingerprint=st.text(),
    status=st.sampled_from(["optimal", "infeasible", "error"]),
    rows=COUNTS,
    steps=COUNTS,
    objective=NUMBERS,
    bound=NUMBERS,
    verdict=st.none() | st.sampled_from(["proven", "sampled"]),
    seconds=st.dictionaries(st.sampled_from(["solve", "proof"]), st.floats(0, 1e6)),
    highs_seconds=st.none() | st.floats(0, 100),
    highs_status=st.none() | st.sampled_from(["optimal", "time_limit"]),
    error=st.none() | st.text(),
)


@given(RECORDS)
def test_a_record_is_one_line_and_comes_back(record):
    line = record.to_json()
    assert "\n" not in line
    assert BatchRecord.from_json(line.encode()) == record


def test_what_is_no_number_is_not_known():
    record = BatchRecord("mon.mps", "0f", "optimal", objective=math.nan)
    assert BatchRecord.from_json(record.to_json()).objective is None


@pytest.mark.parametrize("line", ["", "[]", "{}", "null", '{"instance": "mon.mps"}', "{"])
def test_other_lines_are_no_records(line):
    with pytest.raises(ValueError):
        BatchRecord.from_json(line)


def test_a_record_with_an_unknown_field_is_refused():
    data = BatchRecord("mon.mps", "0f", "optimal").to_dict() | {"colour": "blue"}
    with pytest.raises(ValueError, match="not a record"):
        BatchRecord.from_dict(data)


@given(st.lists(RECORDS, max_size=30))
def test_a_summary_counts_each_record_once_and_comes_back(records):
    summary = summarise(iter(records), waiting=3, wall_seconds=1.5, kept=2)
    assert summary.records == len(records)
    for counts in (summary.statuses, summary.verdicts, summary.structures, summary.routes):
        assert sum(counts.values()) == len(records)
    assert summary.unsolved_count == sum(not record.solved for record in records)
    assert summary.errors == sum(record.error is not None for record in records)
    assert math.isclose(summary.seconds, math.fsum(r.total_seconds for r in records), abs_tol=1e-9)
    times = sorted((record.total_seconds for record in records), reverse=True)
    assert [slow.seconds for slow in summary.slowest] == times[:MOST_SLOW]
    measured = [record for record in records if record.highs_seconds is not None]
    assert (summary.comparison is None) == (not measured)
    if summary.comparison is not None:
        assert summary.comparison.instances == len(measured)
        late = sum(record.highs_status == "time_limit" for record in measured)
        assert summary.comparison.unfinished == late
    assert Summary.from_dict(json.loads(json.dumps(summary.to_dict()))) == summary
    assert set(asdict(summary)) == {item.name for item in fields(Summary)}


def test_what_the_sample_says_about_all():
    seconds = {"compile": 100.0, "solve": 2.0}
    plain = BatchRecord("a", "", "optimal", seconds=seconds)
    beside = BatchRecord("b", "", "optimal", seconds=seconds, highs_seconds=6.0)
    assert math.isnan(summarise([plain]).saved_seconds)
    assert summarise([plain, beside, plain]).saved_seconds == pytest.approx(12)


def test_errors_are_told_before_other_failures_and_not_without_end():
    records = [BatchRecord(f"c{k}", "", "infeasible", why="too much") for k in range(5)]
    records += [BatchRecord(f"e{k}", "", "error", error="unreadable") for k in range(3000)]
    summary = summarise(records)
    assert summary.unsolved_count == 3005
    assert len(summary.unsolved) == MOST_UNSOLVED + 5
    assert [item.reason for item in summary.unsolved[:2]] == ["unreadable", "unreadable"]
    assert [item.reason for item in summary.unsolved[-5:]] == ["too much"] * 5


def test_the_reason_of_a_defect_is_the_last_line_of_its_traceback():
    record = BatchRecord("a", "", "error", error="Traceback\n  line\nRuntimeError: no\n")
    assert record.reason == "RuntimeError: no"

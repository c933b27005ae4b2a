"""What a batch leaves behind: table, summary, and the text shown at the end."""

from __future__ import annotations

import csv
import json
import textwrap
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import fields
from itertools import islice
from pathlib import Path
from typing import Any

from ..console import WIDTH, entry, number
from ..files import whole_file
from .record import BatchRecord, Comparison, Summary, Unsolved

#: What a batch writes beside its journal.
RESULTS = ("table.csv", "table.parquet", "summary.json", "report.html")
STAGES = ("compile", "assess", "solve", "proof")
_PLAIN = tuple(item.name for item in fields(BatchRecord) if item.name != "seconds")
#: Columns of the table: all fields of a record, its seconds by stage.
COLUMNS = (*_PLAIN, *(f"{stage}_seconds" for stage in STAGES))
WHOLE = ("rows", "columns", "integers", "nonzeros", "samples", "steps", "pivots", "attempts")
NUMBERS = (
    "objective",
    "bound",
    "time_limit",
    "highs_seconds",
    *(f"{stage}_seconds" for stage in STAGES),
)
#: Rows that a Parquet table takes at a time.
CHUNK = 10_000
#: Unsolved instances, and lines of one reason, that the text at the end shows.
SHOWN, REASON_LINES = 10, 3


class FolderError(ValueError):
    """A folder for results cannot be made."""


def make_folder(folder: Path, names: Iterable[str] = ()) -> None:
    """Make a folder, or clear one of the drafts that a killed run may have left of these files.

    Raises
    ------
    FolderError
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise FolderError(f"cannot make the folder {folder}: {reason}") from error
    for name in names:
        for draft in folder.glob(f".{name}.*"):
            draft.unlink(missing_ok=True)


def row_of(record: BatchRecord) -> tuple[Any, ...]:
    """A record's values in the order of `COLUMNS`; a stage that was not reached took no time."""
    return (
        *(getattr(record, name) for name in _PLAIN),
        *(record.seconds.get(stage, 0.0) for stage in STAGES),
    )


def write_csv(path: Path, records: Iterable[BatchRecord]) -> None:
    """Write the table as CSV, whole or not at all; what is not known stays empty."""
    with whole_file(path) as file:
        rows = csv.writer(file, lineterminator="\n")
        rows.writerow(COLUMNS)
        rows.writerows(row_of(record) for record in records)


def write_parquet(path: Path, records: Iterable[BatchRecord]) -> None:
    """Write the table as Parquet, whole or not at all.

    Raises
    ------
    ImportError
        Without pyarrow.
    """
    import pyarrow as pa
    from pyarrow import parquet

    kinds = dict.fromkeys(WHOLE, pa.int64()) | dict.fromkeys(NUMBERS, pa.float64())
    schema = pa.schema([(name, kinds.get(name, pa.string())) for name in COLUMNS])
    remaining = iter(records)
    with whole_file(path, binary=True) as file, parquet.ParquetWriter(file, schema) as table:
        while rows := [row_of(record) for record in islice(remaining, CHUNK)]:
            columns = zip(*rows, strict=True)
            arrays = [pa.array(c, f.type) for c, f in zip(columns, schema, strict=True)]
            table.write_table(pa.Table.from_arrays(arrays, schema=schema))


def write_summary(path: Path, summary: Summary) -> None:
    """Write the summary as JSON, whole or not at all."""
    with whole_file(path) as file:
        json.dump(summary.to_dict(), file, indent=1)
        file.write("\n")


def summary_text(summary: Summary) -> str:
    """The summary for the console: what is not solved first, in 80 columns.

    Examples
    --------
    >>> from pyomo_latpath.batch.summary import summarise
    >>> print(summary_text(summarise([
    ...     BatchRecord("mon.mps", "0f", "optimal", verdict="proven", structure="interval",
    ...                 route="path", seconds={"solve": 0.5}),
    ...     BatchRecord("tue.mps", "", "error", error="tue.mps, line 3: no number")])))
    2 instances: 1 optimal, 1 error
    not solved
      error      tue.mps, line 3: no number
    verdict    proven 1, - 1
    structure  interval 1, - 1
    route      path 1, - 1
    seconds    0.500 (read 0.000, assess 0.000, solve 0.500, proof 0.000)
    slowest    mon.mps 0.500 s (path)
    """
    return "\n".join(_lines(summary))


def _lines(summary: Summary) -> Iterator[str]:
    counted = "1 instance" if summary.records == 1 else f"{summary.records} instances"
    statuses = ", ".join(f"{count} {status}" for status, count in summary.statuses.items())
    yield f"{counted}: {statuses}" if statuses else counted
    if summary.waiting:
        yield f"{summary.waiting} more have no record yet"
    if summary.unsolved:
        yield "not solved"
        for unsolved in summary.unsolved[:SHOWN]:
            yield from _unsolved(unsolved)
        if summary.unsolved_count > SHOWN:
            yield f"  and {summary.unsolved_count - SHOWN} more, see the table"
    yield from entry("verdict", _counts(summary.verdicts), indent=0)
    if summary.verdicts.get("sampled"):
        yield from entry("", "'sampled' is no proof: it rests on the vertices looked at", indent=0)
    yield from entry("structure", _counts(summary.structures), indent=0)
    yield from entry("route", _counts(summary.routes), indent=0)
    stages = {"read" if stage == "compile" else stage: stage for stage in STAGES}
    parts = ", ".join(f"{word} {summary.stages.get(s, 0.0):.3f}" for word, s in stages.items())
    yield from entry("seconds", f"{summary.seconds:.3f} ({parts})", indent=0)
    if summary.comparison is not None:
        saved = summary.saved_seconds
        more = f"; for all, about {abs(saved):.3g} s {'more' if saved > 0 else 'less'}"
        yield from entry("compared", comparison_words(summary.comparison) + more, indent=0)
    slow = [f"{s.instance} {s.seconds:.3f} s ({s.route})" for s in summary.slowest if s.route]
    if slow:
        yield from entry("slowest", ", ".join(slow[:3]), indent=0)


def comparison_words(comparison: Comparison) -> str:
    """What was measured beside branch and bound, as a clause.

    Examples
    --------
    >>> comparison_words(Comparison(20, 1.5, 6.0, 1))
    'on 20 of them HiGHS took 6.000 s, we 1.500 s (4.00 times; 1 unfinished at its limit)'
    """
    unfinished = comparison.unfinished
    more = f"; {unfinished} unfinished at its limit" if unfinished else ""
    return (
        f"on {comparison.instances} of them HiGHS took {comparison.highs_seconds:.3f} s, we "
        f"{comparison.seconds:.3f} s ({comparison.ratio:.2f} times{more})"
    )


def _unsolved(unsolved: Unsolved) -> list[str]:
    """The status, the name and the reason; a reason that begins with the name says it already."""
    told = unsolved.reason
    if not told.startswith(unsolved.instance):
        told = f"{unsolved.instance}: {told}"
    indent = " " * 13
    lines = textwrap.wrap(told, WIDTH, initial_indent=indent, subsequent_indent=indent)
    if len(lines) > REASON_LINES:
        lines[REASON_LINES - 1 :] = [lines[REASON_LINES - 1][: WIDTH - 4] + " ..."]
    return [f"  {unsolved.status:<11}{lines[0].lstrip()}", *lines[1:]]


def _counts(counts: Mapping[str, int]) -> str:
    return ", ".join(f"{name} {number(count)}" for name, count in counts.items()) or "-"

"""A batch as one page: what was not solved and why, all records, times, steps and routes."""

from __future__ import annotations

import math
from bisect import bisect_right
from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

from ..pages.drawing import bars
from ..pages.frame import page
from ..pages.markup import (
    cards,
    counted,
    figures,
    name,
    names,
    number,
    paragraphs,
    section,
    table,
    text,
    visible,
)
from .record import BatchRecord, Summary


@dataclass(frozen=True)
class Column:
    """What a record shows under a title: the field of that name, or what `value` makes of it.

    Attributes
    ----------
    title : str
    number : bool
    shown : bool
        Whether it stands in the table; an opened record shows all.
    value : callable, optional
    """

    title: str
    number: bool = False
    shown: bool = True
    value: Callable[[BatchRecord], Any] | None = None

    def of(self, record: BatchRecord) -> str | float | None:
        """The value as plain data for the page: None where it is not known."""
        value = getattr(record, self.title) if self.value is None else self.value(record)
        if self.number:
            return value if value is not None and math.isfinite(value) else None
        if value is None:
            return None
        # An error may be a traceback, whose line ends are meant to be seen as such.
        lines = value.split("\n") if self.title == "error" else [value]
        return "\n".join(map(visible, lines))


COLUMNS = (
    Column("instance"),
    Column("status"),
    Column("verdict"),
    Column("structure"),
    Column("route"),
    Column("objective", number=True),
    Column("seconds", number=True, value=lambda record: round(record.total_seconds, 4)),
    Column("steps", number=True),
    Column("rows", number=True),
    Column("columns", number=True),
    Column("integers", number=True),
    Column("nonzeros", number=True, shown=False),
    Column("bound", number=True, shown=False),
    Column("pivots", number=True, shown=False),
    Column("proof", shown=False),
    Column("why", shown=False),
    Column("sampled vertices", True, False, lambda record: record.samples or None),
    Column("seconds by stage", shown=False, value=lambda record: _stages(record)),
    Column("recognition", shown=False),
    Column("seconds of branch and bound", True, False, lambda record: record.highs_seconds),
    Column("plan", shown=False),
    Column("attempts", number=True, shown=False),
    Column("fingerprint", shown=False),
    Column("error", shown=False),
)
#: Places of the columns with a choice of their own above the table.
FILTERS = (1, 2, 4)
ROUTES = ("path", "split", "highs", "-")

MEANING = {
    "proven": "every vertex is whole, by a certificate",
    "sampled": "no fractional vertex was met among those looked at; this is no proof",
    "refuted": "a fractional vertex is known exactly",
    "undecided": "neither a proof nor a fractional vertex",
    "-": "not read, or not assessed",
}


def batch_page(records: Sequence[BatchRecord], summary: Summary) -> str:
    """Return a batch as one self-contained HTML page.

    Parameters
    ----------
    records : sequence of BatchRecord
    summary : Summary
        Of these records.

    Returns
    -------
    str

    Examples
    --------
    >>> record = BatchRecord("monday.mps", "0f", "optimal", verdict="proven", route="path")
    >>> summary = Summary(1, 0, {"optimal": 1}, {"proven": 1}, {}, {"path": 1}, 0, (), 0, (), {}, 1)
    >>> "monday.mps" in batch_page([record], summary)
    True
    """
    body = [_figures(records, summary), _unsolved(summary)]
    if records:
        body += [_all(records), _lengths(records, summary), _routes(records)]
    body += [_comparison(summary), _verdicts(records, summary)]
    return page(
        _headline(records, summary),
        "latpath batch",
        "\n".join(part for part in body if part),
        sheets=("records.css",),
        script="records.js" if records else None,
        data=_data(records) if records else None,
    )


def _headline(records: Sequence[BatchRecord], summary: Summary) -> str:
    total = counted(summary.records, "instance")
    solved = sum(record.solved for record in records)
    told = f"All {total} solved" if solved == summary.records else f"{solved:,} of {total} solved"
    if not summary.records:
        told = "No instance has a record yet"
    return told + (f", {summary.waiting:,} still waiting" if summary.waiting else "")


def _figures(records: Sequence[BatchRecord], summary: Summary) -> str:
    def share(count: int) -> str:
        return f"{count:,} ({count / summary.records:.0%})" if summary.records else "0"

    pairs = [
        ("not solved", number(summary.unsolved_count)),
        ("with an error", number(summary.errors)),
        ("wholly on the path route", share(summary.routes.get("path", 0))),
        ("proven whole", share(summary.verdicts.get("proven", 0))),
        ("seconds of work", number(round(summary.seconds, 2))),
        ("seconds on the clock", number(round(summary.wall_seconds, 2))),
    ]
    if summary.kept:
        pairs.append(("records kept from earlier runs", number(summary.kept)))
    return figures(pairs)


def _unsolved(summary: Summary) -> str:
    """What went wrong, equal reasons together: one bad file often comes with its neighbours."""
    if not summary.unsolved_count:
        return ""
    together: dict[tuple[str, str], list[str]] = {}
    for each in summary.unsolved:
        together.setdefault((each.status, each.reason), []).append(each.instance)
    told = cards(
        f"<p><strong>{text(status)}</strong> {text(reason)}</p><p>{names(instances)}</p>"
        for (status, reason), instances in together.items()
    )
    rest = summary.unsolved_count - len(summary.unsolved)
    lead = f"The first {len(summary.unsolved):,}; {rest:,} more stand below." if rest else ""
    return section("not-solved", "Not solved", told, lead)


def _all(records: Sequence[BatchRecord]) -> str:
    """The frame of the table that the page's script fills."""
    shown = [column for column in COLUMNS if column.shown]
    choices = "".join(_choice(k, records) for k in FILTERS)
    head = "".join(
        f'<th scope="col"{" class=number" if column.number else ""}>'
        f'<button type="button">{column.title}</button></th>'
        for column in shown
    )
    space = f'<tr class="space" aria-hidden="true"><td colspan="{len(shown)}"><div></div></td></tr>'
    body = f"""<noscript><p>This table needs the page's own script. The same records stand in the
files beside this page.</p></noscript>
<div id="all" hidden>
<form id="controls" role="search" aria-label="Filter the instances">
<label>search in all words<input id="search" type="search" autocomplete="off"></label>
{choices}<button type="reset" class="plain">Show all</button></form>
<output id="count" for="search"></output>
<div id="records-region" class="scroll" role="region" tabindex="0" aria-labelledby="records-title">
<table aria-rowcount="{len(records) + 1}"><caption id="records-title">
<span>All instances; a heading sorts, a name opens the whole record</span></caption>
<thead><tr aria-rowindex="1">{head}</tr></thead><tbody>{space}{space}</tbody></table></div>
</div>
<dialog id="record" aria-labelledby="record-name"><form method="dialog"><h2 id="record-name"></h2>
<button class="plain">Close</button></form><dl id="record-fields"></dl></dialog>"""
    return section("instances", "All instances", body, wide=True)


def _choice(k: int, records: Sequence[BatchRecord]) -> str:
    """A choice among the values of a column."""
    values = sorted({str(COLUMNS[k].of(record) or "–") for record in records})
    options = "".join(f"<option>{text(value)}</option>" for value in values)
    return (
        f'<label>{COLUMNS[k].title}<select id="filter-{k}"><option value="">all</option>'
        f"{options}</select></label>"
    )


def _data(records: Sequence[BatchRecord]) -> dict[str, Any]:
    """The records by columns, as the script reads them."""
    columns = [
        {
            "title": column.title,
            "number": column.number,
            "shown": column.shown,
            "values": [column.of(record) for record in records],
        }
        for column in COLUMNS
    ]
    return {"columns": columns, "filters": list(FILTERS)}


def _stages(record: BatchRecord) -> str | None:
    stages = (f"{stage} {seconds:.3f}" for stage, seconds in record.seconds.items())
    return ", ".join(stages) or None


def _lengths(records: Sequence[BatchRecord], summary: Summary) -> str:
    seconds = [record.total_seconds for record in records if record.seconds]
    steps = [record.steps for record in records if record.steps is not None]
    charts = _histogram("seconds-bars", "Seconds of an instance", seconds)
    charts += _histogram("steps-bars", "Steps of a walk", steps)
    rows = [[text(stage), f"{seconds:,.2f}"] for stage, seconds in summary.stages.items()]
    stages = table("stages", "Seconds by stage, all instances", ["stage", "seconds"], rows, [1])
    slowest = [
        [name(s.instance), f"{s.seconds:,.3f}", text(s.route or "–")] for s in summary.slowest
    ]
    slow = table("slowest", "Slowest instances", ["instance", "seconds", "route"], slowest, [1])
    return section(
        "lengths", "Times and steps", f'<div class="charts">{charts}</div>{stages}{slow}'
    )


def _histogram(key: str, title: str, values: Sequence[float]) -> str:
    """How many values lie between 1, 3, 10, 30, ...; zeros stand apart."""
    if not values:
        return ""
    positive = [value for value in values if value > 0]
    edges = _edges(positive) if positive else []
    counts = Counter(bisect_right(edges, value) for value in positive)
    told = [
        (f"{number(low)} to {number(high)}", counts[k])
        for k, (low, high) in enumerate(pairwise(edges), 1)
    ]
    zeros = len(values) - len(positive)
    return bars(key, title, [("0", zeros), *told] if zeros else told)


def _edges(values: Sequence[float]) -> list[float]:
    """1 and 3 times powers of ten around all values, which must be above 0."""
    low, high = math.floor(math.log10(min(values))), math.floor(math.log10(max(values))) + 1
    edges = [float(f"{digit}e{power}") for power in range(low, high + 1) for digit in (1, 3)]
    first = bisect_right(edges, min(values)) - 1
    last = bisect_right(edges, max(values))
    return edges[first : last + 1]


def _routes(records: Sequence[BatchRecord]) -> str:
    counts = Counter((record.structure or "–", record.route or "-") for record in records)
    routes = [route for route in ROUTES if any(r == route for _, r in counts)]
    structures = Counter(record.structure or "–" for record in records)
    rows = [
        [text(structure), *(f"{counts[structure, route]:,}" for route in routes), f"{total:,}"]
        for structure, total in structures.most_common()
    ]
    head = ["structure", *("no route" if r == "-" else r for r in routes), "all"]
    numbers = range(1, len(head))
    caption = "Instances by structure and route; – where no certificate names a structure"
    return section("routes", "Routes by structure", table("by-route", caption, head, rows, numbers))


def _comparison(summary: Summary) -> str:
    beside = summary.comparison
    if beside is None or not beside.instances:
        return ""
    least = " at least" if beside.unfinished else ""
    words = (
        f"On {counted(beside.instances, 'instance')} branch and bound was run as well: "
        f"{beside.highs_seconds:,.2f} s against {beside.seconds:,.2f} s here,{least} "
        f"{number(round(beside.ratio, 1))} times as long."
    )
    if beside.unfinished:
        words += f" {beside.unfinished:,} of its runs were cut off by the time limit."
    return section("beside", "Beside branch and bound", f"<p>{text(words)}</p>")


def _verdicts(records: Sequence[BatchRecord], summary: Summary) -> str:
    rows = [
        [text(verdict), f"{count:,}", text(MEANING.get(verdict, ""))]
        for verdict, count in summary.verdicts.items()
    ]
    if not rows:
        return ""
    head = ["verdict", "instances", "what is known"]
    shown = table("verdicts", "Verdicts", head, rows, numbers=[1], prose=[2])
    samples = sum(record.samples for record in records if record.verdict == "sampled")
    looked = counted(samples, "vertex", "vertices")
    note = f"Verdicts 'sampled' rest on {looked} looked at in all, not on a proof."
    return section("rests", "What the verdicts rest on", shown + paragraphs([note] * (samples > 0)))

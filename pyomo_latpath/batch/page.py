"""A batch as one page: what was not solved and why, all records, times, steps and routes."""

from __future__ import annotations

import math
from bisect import bisect_right
from collections import Counter
from collections.abc import Callable, Sequence
from typing import Any

from ..pages.drawing import box, label, picture
from ..pages.frame import page
from ..pages.markup import counted, figures, name, number, section, table, text, visible
from .record import BatchRecord, Summary

#: Title, value and whether it is a number, of each column of the table of all records.
SHOWN: tuple[tuple[str, Callable[[BatchRecord], Any], bool], ...] = (
    ("instance", lambda record: record.instance, False),
    ("status", lambda record: record.status, False),
    ("verdict", lambda record: record.verdict, False),
    ("structure", lambda record: record.structure, False),
    ("route", lambda record: record.route, False),
    ("objective", lambda record: record.objective, True),
    ("seconds", lambda record: round(record.total_seconds, 4), True),
    ("steps", lambda record: record.steps, True),
    ("rows", lambda record: record.rows, True),
    ("columns", lambda record: record.columns, True),
    ("integers", lambda record: record.integers, True),
)
#: What only an opened record shows beside these.
HIDDEN: tuple[tuple[str, Callable[[BatchRecord], Any], bool], ...] = (
    ("nonzeros", lambda record: record.nonzeros, True),
    ("bound", lambda record: record.bound, True),
    ("pivots", lambda record: record.pivots, True),
    ("proof", lambda record: record.proof, False),
    ("why", lambda record: record.why, False),
    ("sampled vertices", lambda record: record.samples or None, True),
    ("seconds by stage", lambda record: _stages(record), False),
    ("recognition", lambda record: record.recognition, False),
    ("branch and bound, seconds", lambda record: record.highs_seconds, True),
    ("plan", lambda record: record.plan, False),
    ("attempts", lambda record: record.attempts, True),
    ("fingerprint", lambda record: record.fingerprint, False),
    ("error", lambda record: record.error, False),
)
#: Columns with a choice of their own above the table.
FILTERS = ("status", "verdict", "route")
ROUTES = ("path", "split", "highs", "-")


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
    items = "".join(
        f"<li><p><strong>{text(status)}</strong> {text(reason)}</p>"
        f"<p>{', '.join(map(name, instances))}</p></li>"
        for (status, reason), instances in together.items()
    )
    rest = summary.unsolved_count - len(summary.unsolved)
    lead = f"The first {len(summary.unsolved):,}; {rest:,} more stand below." if rest else ""
    return section("not-solved", "Not solved", f'<ul class="cards">{items}</ul>', lead)


def _all(records: Sequence[BatchRecord]) -> str:
    """The frame of the table that the page's script fills."""
    titles = [title for title, _, _ in SHOWN]
    choices = "".join(
        f'<label>{title}<select id="filter-{titles.index(title)}"><option value="">all</option>'
        + "".join(f"<option>{text(value)}</option>" for value in _values(records, title))
        + "</select></label>"
        for title in FILTERS
    )
    head = "".join(
        f'<th scope="col"{" class=number" if is_number else ""}>'
        f'<button type="button">{title}</button></th>'
        for title, _, is_number in SHOWN
    )
    space = f'<tr class="space" aria-hidden="true"><td colspan="{len(SHOWN)}"><div></div></td></tr>'
    body = f"""<noscript><p>This table needs the page's own script. The same records stand in the
files beside this page.</p></noscript>
<div id="all" hidden>
<form id="controls" role="search" aria-label="Filter the instances">
<label>search in all words<input id="search" type="search" autocomplete="off"></label>
{choices}<button type="reset" class="plain">Show all</button></form>
<output id="count" for="search"></output>
<div id="records-region" class="scroll" role="region" tabindex="0" aria-labelledby="records-title">
<table aria-rowcount="{len(records) + 1}"><caption id="records-title">All instances; a heading
sorts, a name opens the whole record</caption>
<thead><tr aria-rowindex="1">{head}</tr></thead><tbody>{space}{space}</tbody></table></div>
</div>
<dialog id="record" aria-labelledby="record-name"><h2 id="record-name"></h2>
<dl id="record-fields"></dl><form method="dialog"><button class="plain">Close</button></form>
</dialog>"""
    return section("instances", "All instances", body, wide=True)


def _values(records: Sequence[BatchRecord], title: str) -> list[str]:
    get = next(get for each, get, _ in SHOWN if each == title)
    return sorted({visible(get(record)) if get(record) else "–" for record in records})


def _data(records: Sequence[BatchRecord]) -> dict[str, Any]:
    """The records by columns, as the script reads them."""
    columns = [
        {
            "title": title,
            "number": is_number,
            "shown": shown,
            "values": [_cell(get(record), is_number, title) for record in records],
        }
        for shown, part in ((True, SHOWN), (False, HIDDEN))
        for title, get, is_number in part
    ]
    titles = [column["title"] for column in columns]
    return {"columns": columns, "filters": [titles.index(title) for title in FILTERS]}


def _cell(value: Any, is_number: bool, title: str) -> Any:
    if value is None or (is_number and not math.isfinite(value)):
        return None
    if is_number:
        return value
    # An error may be a traceback, whose line ends are meant to be seen as such.
    lines = value.split("\n") if title == "error" else [value]
    return "\n".join(visible(line) for line in lines)


def _stages(record: BatchRecord) -> str | None:
    stages = (f"{stage} {seconds:.3f}" for stage, seconds in record.seconds.items())
    return ", ".join(stages) or None


def _lengths(records: Sequence[BatchRecord], summary: Summary) -> str:
    seconds = [record.total_seconds for record in records if record.seconds]
    steps = [record.steps for record in records if record.steps is not None]
    charts = _histogram("seconds", "Seconds of an instance", seconds)
    charts += _histogram("steps", "Steps of a walk", steps)
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
    """Counts between 1, 3, 10, 30, ...: bars from left to right, so that a phone shows them."""
    if not values:
        return ""
    positive = [value for value in values if value > 0]
    edges = _edges(positive) if positive else []
    bins = Counter(bisect_right(edges, value) for value in positive)
    lines = [
        (
            f"below {number(edges[0])}"
            if k == 0
            else f"{number(edges[k - 1])} to {number(edges[k])}",
            bins[k],
        )
        for k in range(1, len(edges))
    ]
    zeros = len(values) - len(positive)
    if zeros:
        lines.insert(0, ("0", zeros))
    most, step = max(count for _, count in lines), 24
    bars = "".join(
        label(126, step * k + 16, words, "soft", "end")
        + box(134, step * k + 4, 150 * count / most, 16, "bar")
        + label(140 + 150 * count / most, step * k + 16, f"{count:,}")
        for k, (words, count) in enumerate(lines)
    )
    told = "; ".join(f"{words}: {count:,}" for words, count in lines if count)
    drawing = picture(f"{key}-bars", 340, step * len(lines) + 6, title, told, bars)
    return f"<figure><figcaption>{text(title)}</figcaption>{drawing}</figure>"


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
        f"{beside.ratio:,.1f} times as long."
    )
    if beside.unfinished:
        words += f" {beside.unfinished:,} of its runs were cut off by the time limit."
    return section("beside", "Beside branch and bound", f"<p>{text(words)}</p>")


def _verdicts(records: Sequence[BatchRecord], summary: Summary) -> str:
    meaning = {
        "proven": "every vertex is whole, by a certificate",
        "sampled": "no fractional vertex was met among those looked at; this is no proof",
        "refuted": "a fractional vertex is known exactly",
        "undecided": "neither a proof nor a fractional vertex",
        "-": "no verdict: not read, or not assessed",
    }
    rows = [
        [text(verdict), f"{count:,}", text(meaning.get(verdict, ""))]
        for verdict, count in summary.verdicts.items()
    ]
    if not rows:
        return ""
    shown = table("verdicts", "Verdicts", ["verdict", "instances", "what is known"], rows, [1])
    samples = sum(record.samples for record in records if record.verdict == "sampled")
    note = ""
    if samples:
        looked = counted(samples, "vertex", "vertices")
        note = f"<p>Verdicts 'sampled' rest on {looked} looked at in all, not on a proof.</p>"
    return section("rests", "What the verdicts rest on", shown + note)
